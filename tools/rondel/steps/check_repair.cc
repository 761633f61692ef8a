#include "tools/rondel/steps/check_repair.h"

#include <fmt/core.h>

#include <Eigen/Eigenvalues>
#include <algorithm>
#include <array>
#include <cmath>
#include <initializer_list>
#include <opencv2/imgcodecs.hpp>
#include <opencv2/imgproc.hpp>
#include <system_error>
#include <utility>

#include "calib/base/file.h"
#include "calib/venue/centre_file.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/step.h"
#include "tools/rondel/venue_template.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;
using nlohmann::ordered_json;
using verdict::KnockKind;

/// A repair has to lower the errors of held-out rows by this factor to be kept.
constexpr double kGain = 0.9;
constexpr int kFolds = 5;

/// The parameters, by name, that a knock moves; the first of the names that the model has.
std::vector<int> parameters_of(const range::Model& model, KnockKind kind) {
  const auto first_of = [&](std::initializer_list<const char*> names) {
    for (const char* name : names) {
      if (const int at = range::index_of(model, name); at >= 0) return at;
    }
    return -1;
  };
  std::vector<int> at;
  switch (kind) {
    case KnockKind::centre:
      at = {first_of({"cu_px"}), first_of({"cv_px"})};
      break;
    case KnockKind::tilt:
      at = {first_of({"mirror_tilt_u_rad", "tilt_u_rad"}),
            first_of({"mirror_tilt_v_rad", "tilt_v_rad"})};
      break;
    case KnockKind::eye_height:
      at = {first_of({"eye_height_m"})};
      break;
    case KnockKind::focal:
      at = {first_of({"focal_px", "gamma_px"})};
      break;
    case KnockKind::heading:
      at = {first_of({"heading_rad"})};
      break;
    case KnockKind::mirror:  // another mirror is a matter of marks
    case KnockKind::count:
      break;
  }
  if (std::find(at.begin(), at.end(), -1) != at.end()) at.clear();
  return at;
}

/// The knock as the curve's own parameters have it, for fitting; the calibration's uncertainty in
/// the others counts as noise.
class CurveParts final : public verdict::KnockModel {
 public:
  CurveParts(const range::RangeCurve& curve, std::vector<int> parts)
      : curve_(curve), parts_(std::move(parts)) {
    const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(curve.covariance());
    for (Eigen::Index m = 0; m < eigen.eigenvalues().size(); ++m) {
      const double variance = eigen.eigenvalues()[m];
      if (variance > 0.0) modes_.emplace_back(std::sqrt(variance) * eigen.eigenvectors().col(m));
    }
  }
  [[nodiscard]] range::Params moved(KnockKind kind, std::span<const double> amounts) const {
    range::Params params = curve_.params();
    for (std::size_t a = 0; a < parts_.size() && a < amounts.size(); ++a) {
      double& value = params[parts_[a]];
      value = kind == KnockKind::focal ? value * (1.0 + amounts[a]) : value + amounts[a];
    }
    return params;
  }
  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot,
                                                   double height_m,
                                                   KnockKind kind,
                                                   std::span<const double> amounts) const override {
    return curve_.model().pixel(moved(kind, amounts), to_point(spot), height_m);
  }
  [[nodiscard]] int modes() const override { return static_cast<int>(modes_.size()); }
  [[nodiscard]] std::optional<ImagePoint> pixel_in_mode(FloorSpot spot,
                                                        double height_m,
                                                        int mode) const override {
    return curve_.model().pixel(
        curve_.params() + modes_[static_cast<std::size_t>(mode)], to_point(spot), height_m);
  }

 private:
  const range::RangeCurve& curve_;
  std::vector<int> parts_;
  std::vector<range::Params> modes_;
};

std::shared_ptr<const range::RangeCurve> with_params(const range::RangeCurve& curve,
                                                     range::Params params,
                                                     ImagePoint shift) {
  const ImagePoint centre{curve.centre().u_px + shift.u_px, curve.centre().v_px + shift.v_px};
  return std::make_shared<range::RangeCurve>(curve.shared_model(),
                                             std::move(params),
                                             curve.covariance(),
                                             curve.t95(),
                                             centre,
                                             curve.radius_limit_px());
}

ImagePoint shift_of(KnockKind kind, std::span<const double> amounts) {
  return kind == KnockKind::centre ? ImagePoint{amounts[0], amounts[1]} : ImagePoint{};
}

struct Errors {
  double over_tolerance = 0.0;  ///< squared
  double range = 0.0;           ///< relative, squared
};

/// A pixel that shows no floor any more counts as an error of the whole range.
Errors errors_of(const FloorMap& map, const verdict::Sighting& s, const ToleranceSpec& tolerance) {
  const auto at = map.floor_at(s.seen, s.height_m);
  const double range_m = at ? at->range_m - s.tape.range_m : s.tape.range_m;
  Errors errors;
  errors.range = std::pow(range_m / s.tape.range_m, 2);
  errors.over_tolerance = std::pow(range_m / tolerance.range_m_at(s.tape.range_m), 2);
  if (s.bearing_known && at) {
    errors.over_tolerance +=
        std::pow(wrap_angle(at->bearing_rad - s.tape.bearing_rad) / tolerance.bearing_rad, 2);
  }
  return errors;
}

/// `yaml` with `text` put in the place of what stands between `before` and the next of `ends`.
std::string with_value(const std::string& yaml,
                       const std::string& before,
                       const char* ends,
                       const std::string& text) {
  const std::size_t at = yaml.find(before);
  if (at == std::string::npos) return yaml;
  const std::size_t from = at + before.size();
  const std::size_t to = yaml.find_first_of(ends, from);
  return yaml.substr(0, from) + text + (to == std::string::npos ? "" : yaml.substr(to));
}

/// range.yaml with the curve's parameters and centre.
std::string curve_text(std::string yaml, const range::RangeCurve& curve) {
  const auto& parameters = curve.model().parameters();
  for (std::size_t i = 0; i < parameters.size(); ++i) {
    yaml = with_value(yaml,
                      fmt::format("- {{name: {}, value: ", parameters[i].name),
                      ",",
                      number_text(curve.params()[static_cast<Eigen::Index>(i)]));
  }
  yaml = with_value(yaml, "\ncentre: {u_px: ", ",", number_text(curve.centre().u_px));
  const std::size_t centre = yaml.find("\ncentre: {u_px: ");
  const std::size_t v = centre == std::string::npos ? centre : yaml.find("v_px: ", centre);
  if (v != std::string::npos) {
    yaml =
        yaml.substr(0, v + 6) + number_text(curve.centre().v_px) + yaml.substr(yaml.find('}', v));
  }
  return yaml;
}

void copy_if_any(const fs::path& from, const fs::path& to) {
  std::error_code error;
  if (fs::is_regular_file(from, error)) write_file(to, read_file(from));
}

/// The venue's hand-written files and results in `folder`, with the curve in the place of its own.
void write_copy(const Workspace& workspace,
                const range::RangeCurve& curve,
                ImagePoint shift,
                const fs::path& folder) {
  std::error_code error;
  fs::remove_all(folder, error);
  copy_if_any(workspace.folder / "venue.yaml", folder / "venue.yaml");
  copy_if_any(workspace.folder / "rig.yaml", folder / "rig.yaml");
  if (const auto points = points_file_of(read_file(workspace.folder / "rig.yaml"))) {
    copy_if_any(workspace.folder / *points, folder / *points);
  }
  const fs::path from = workspace.results();
  const fs::path to = folder / "results";
  copy_if_any(from / "mask.yaml", to / "mask.yaml");
  copy_if_any(from / "colours.yaml", to / "colours.yaml");
  copy_if_any(from / "centre.yaml", to / "centre.yaml");
  copy_if_any(from / "mask.png", to / "mask.png");
  if (shift.u_px != 0.0 || shift.v_px != 0.0) {
    // The whole picture moved, and the robot's own body in it.
    CentreResult centre = read_centre(from / "centre.yaml");
    const auto move = [&](ImagePoint& at) { at = {at.u_px + shift.u_px, at.v_px + shift.v_px}; };
    move(centre.centre.at);
    if (centre.reflection) move(centre.reflection->at);
    if (centre.turning) move(centre.turning->at);
    write_file(to / "centre.yaml",
               with_made_from(centre_yaml(centre), made_from_of(from / "centre.yaml")));
    const cv::Mat mask = cv::imread((from / "mask.png").string(), cv::IMREAD_GRAYSCALE);
    cv::Mat moved;
    const cv::Matx23d by(1.0, 0.0, std::round(shift.u_px), 0.0, 1.0, std::round(shift.v_px));
    cv::warpAffine(mask, moved, by, mask.size(), cv::INTER_NEAREST);
    std::vector<std::uint8_t> png;
    cv::imencode(".png", moved, png);
    write_file(to / "mask.png", std::string(png.begin(), png.end()));
  }
  const std::string text = read_file(from / "range.yaml");
  write_file(to / "range.yaml",
             with_made_from(curve_text(std::string(without_made_from(text)), curve),
                            made_from_of(from / "range.yaml")));
}

/// What the copy's boards would have reported for the blobs that were found.
verdict::Verdict judge_again(const Workspace& workspace,
                             const Board& repaired,
                             const CheckReport& report) {
  std::vector<std::vector<verdict::Find>> finds = report.finds;
  for (std::vector<verdict::Find>& in_image : finds) {
    for (verdict::Find& find : in_image) {
      report_find(repaired.tables, find);
      find.unrounded = repaired.curve->floor_at(
          find.measured,
          workspace.venue.objects[static_cast<std::size_t>(find.object)].seen_height_m());
    }
  }
  return verdict::judge(workspace.venue, report.batch->images, report.batch->tape, finds);
}

Repair no_repair(const std::string& why) {
  return {{{"changed", false}, {"why", why}}, "  repair   nothing changed: " + why + "\n"};
}

}  // namespace

std::shared_ptr<const range::RangeCurve> moved_curve(const range::RangeCurve& curve,
                                                     KnockKind kind,
                                                     std::span<const double> amounts) {
  const std::vector<int> parts = parameters_of(curve.model(), kind);
  if (parts.empty()) return nullptr;
  return with_params(curve, CurveParts(curve, parts).moved(kind, amounts), shift_of(kind, amounts));
}

std::optional<HeldOut> held_out(const std::shared_ptr<const range::RangeCurve>& curve,
                                KnockKind kind,
                                std::span<const verdict::Sighting> sightings,
                                const verdict::SightingNoise& noise,
                                const ToleranceSpec& tolerance,
                                int folds) {
  const std::vector<int> parts = parameters_of(curve->model(), kind);
  if (parts.empty()) return std::nullopt;
  const CurveParts model(*curve, parts);
  const auto amounts = verdict::fit_knock(model, kind, sightings, noise);
  if (!amounts) return std::nullopt;
  HeldOut out;
  out.kind = kind;
  out.amounts = *amounts;
  for (int fold = 0; fold < folds; ++fold) {
    std::vector<verdict::Sighting> rest;
    std::vector<verdict::Sighting> held;
    for (std::size_t i = 0; i < sightings.size(); ++i) {
      (static_cast<int>(i) % folds == fold ? held : rest).push_back(sightings[i]);
    }
    if (held.empty()) continue;
    const auto fitted = verdict::fit_knock(model, kind, rest, noise);
    if (!fitted) return std::nullopt;
    const auto repaired = moved_curve(*curve, kind, *fitted);
    for (const verdict::Sighting& s : held) {
      const Errors before = errors_of(*curve, s, tolerance);
      const Errors after = errors_of(*repaired, s, tolerance);
      out.before += before.over_tolerance;
      out.after += after.over_tolerance;
      out.range_before += before.range;
      out.range_after += after.range;
      ++out.rows;
    }
  }
  if (out.rows == 0) return std::nullopt;
  for (double* sum : {&out.before, &out.after, &out.range_before, &out.range_after}) {
    *sum = std::sqrt(*sum / out.rows);
  }
  return out;
}

Repair try_repair(const Workspace& workspace,
                  const Board& board,
                  const CheckReport& report,
                  const Causes& causes,
                  Progress& progress) {
  const verdict::Diagnosis& diagnosis = causes.diagnosis;
  if (!board.curve) return no_repair("there is no range curve to refit");
  if (diagnosis.causes == 0) {
    return no_repair(causes.lights.empty()
                         ? "no cause was found that a refit could mend"
                         : "drifted colours need new swatches; see the advice above");
  }
  std::vector<verdict::Sighting> sightings =
      sightings_of(workspace.venue, *report.batch, report.finds, report.verdict);
  std::erase_if(sightings, [&](const verdict::Sighting& s) {
    return std::any_of(diagnosis.odd_rows.begin(),
                       diagnosis.odd_rows.end(),
                       [&](const verdict::WrongRow& odd) { return odd.line == s.line; });
  });
  // Of causes that cannot be told apart, the one that serves held-out rows best.
  std::optional<HeldOut> best;
  std::string cause;
  std::string lacking;
  for (int c = 0; c < diagnosis.causes; ++c) {
    const verdict::Hypothesis& h = diagnosis.hypotheses[static_cast<std::size_t>(c)];
    if (!h.kind) continue;
    const auto held = held_out(board.curve,
                               *h.kind,
                               sightings,
                               sighting_noise(workspace.venue),
                               workspace.venue.tolerance,
                               kFolds);
    if (!held) {
      lacking += (lacking.empty() ? "" : ", ") + h.cause;
    } else if (!best || held->after < best->after) {
      best = held;
      cause = h.cause;
    }
  }
  if (!best) {
    return no_repair(
        lacking.empty()
            ? "wrong tape rows are mended in tape.csv, not in the results"
            : fmt::format("the curve ({}) has nothing in it that could follow '{}'; measure marks "
                          "and run 'rondel range'",
                          board.curve->model().name(),
                          lacking));
  }
  ordered_json numbers = {{"cause", cause},
                          {"id", verdict::info_of(best->kind).id},
                          {"rows", best->rows},
                          {"folds", kFolds},
                          {"held_out_over_tolerance_before", best->before},
                          {"held_out_over_tolerance_after", best->after},
                          {"held_out_range_rms_relative_before", best->range_before},
                          {"held_out_range_rms_relative_after", best->range_after}};
  if (!(best->after < kGain * best->before)) {
    Repair repair = no_repair(
        fmt::format("refitting '{}' leaves held-out rows at {:.2f} times the tolerance, {:.2f} "
                    "before; it must gain a tenth",
                    cause,
                    best->after,
                    best->before));
    repair.document.update(numbers);
    return repair;
  }
  const fs::path folder = workspace.results() / "repaired";
  const auto curve = moved_curve(*board.curve, best->kind, best->amounts);
  write_copy(workspace, *curve, shift_of(best->kind, best->amounts), folder);
  const Workspace copy = open_workspace(folder);
  (void)tables_step(copy, progress);
  const verdict::Verdict again = judge_again(workspace, open_board(copy), report);

  Repair repair;
  repair.document = {{"changed", true}, {"folder", folder.string()}};
  repair.document.update(numbers);
  repair.document["accepted_after"] = again.accepted;
  repair.document["range_rms_relative_after"] = again.all.range_rms_relative.value.value_or(0.0);
  repair.summary = fmt::format(
      "  repair   '{}' refitted: held-out rows from {:.1f} % to {:.1f} % RMS in range, from {:.2f} "
      "to {:.2f} times the tolerance\n           with its tables the verdict on these images is "
      "{}\n           in {}: check it with other images, then copy its results/ over the venue's\n",
      cause,
      100.0 * best->range_before,
      100.0 * best->range_after,
      best->before,
      best->after,
      again.accepted ? "accepted" : "not accepted",
      folder.string());
  return repair;
}

}  // namespace rondel::app
