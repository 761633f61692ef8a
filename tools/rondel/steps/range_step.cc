#include "tools/rondel/steps/range_step.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <numeric>
#include <system_error>
#include <utility>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/class_table.h"
#include "calib/colour/sets_file.h"
#include "calib/range/curve_file.h"
#include "calib/range/fit.h"
#include "calib/verdict/assignment.h"
#include "tools/rondel/range_input.h"
#include "tools/rondel/results.h"
#include "vision/detect/detect.h"
#include "vision/frames/load.h"
#include "vision/mask/mask_file.h"

namespace rondel::app {
namespace {

using nlohmann::ordered_json;

/// Marks from tape rows, and the rows that were kept back to check the curve with.
struct TapeMarks {
  std::vector<Mark> marks;
  std::vector<Mark> held_out;
  int rows = 0;
  int found = 0;
};

using Pairs = std::vector<std::pair<const TapeRow*, const vision::Blob*>>;

/// Which blob is which row's, by least total distance from where `curve` expects the rows.
Pairs pairs_of(const std::vector<const TapeRow*>& rows,
               const std::vector<const vision::Blob*>& blobs,
               const ObjectSpec& object,
               const range::RangeCurve* curve) {
  constexpr double kFarthestPx = 25.0;
  Pairs pairs;
  if (curve == nullptr) {
    if (rows.size() == 1 && blobs.size() == 1) pairs.emplace_back(rows.front(), blobs.front());
    return pairs;
  }
  std::vector<const TapeRow*> expected;
  std::vector<ImagePoint> places;
  for (const TapeRow* row : rows) {
    if (!row->bearing_rad) continue;
    const auto at = curve->pixel_of({row->range_m, *row->bearing_rad}, object.seen_height_m());
    if (!at) continue;
    expected.push_back(row);
    places.push_back(*at);
  }
  if (expected.empty() || blobs.empty()) return pairs;
  std::vector<double> cost;
  for (const ImagePoint place : places) {
    for (const vision::Blob* blob : blobs) {
      cost.push_back(
          std::hypot(blob->measured.u_px - place.u_px, blob->measured.v_px - place.v_px));
    }
  }
  const std::vector<int> chosen =
      verdict::assign(cost, static_cast<int>(expected.size()), static_cast<int>(blobs.size()));
  for (std::size_t r = 0; r < expected.size(); ++r) {
    if (chosen[r] < 0) continue;
    const auto b = static_cast<std::size_t>(chosen[r]);
    if (cost[r * blobs.size() + b] <= kFarthestPx) pairs.emplace_back(expected[r], blobs[b]);
  }
  return pairs;
}

/// Looks for the objects of the tape sheet in its images.
TapeMarks marks_from_tape(const Workspace& workspace, Progress& progress) {
  const std::filesystem::path colours = workspace.results() / "colours.yaml";
  std::error_code error;
  if (!std::filesystem::is_regular_file(colours, error)) {
    throw InputError(colours.string(), "is missing; run 'rondel colours' before 'range --tape'");
  }
  if (workspace.tape.empty()) {
    throw InputError("tape.csv", "has no rows; 'range --tape' takes its marks from there");
  }
  vision::DetectorSetup setup;
  const std::vector<colour::ThresholdSet> read = colour::read_threshold_sets(colours);
  std::vector<colour::ThresholdSet> sets;
  for (const ObjectSpec& object : workspace.venue.objects) {
    const auto set = std::find_if(
        read.begin(), read.end(), [&](const auto& s) { return s.object == object.name; });
    sets.push_back(set != read.end() ? *set : colour::ThresholdSet{object.name, {}});
  }
  setup.table = colour::make_class_table(sets);
  setup.objects = workspace.venue.objects;
  const CameraSpec& camera = workspace.rig.camera;
  const std::filesystem::path mask = workspace.results() / "mask.png";
  setup.mask = std::filesystem::is_regular_file(mask, error)
                   ? vision::read_mask(mask, camera)
                   : cv::Mat(camera.height_px, camera.width_px, CV_8U, cv::Scalar(255));
  const range::FitInput bare = range_input(workspace, {});
  setup.centre = bare.rim_centre
                     ? bare.rim_centre->at
                     : ImagePoint{0.5 * (camera.width_px - 1), 0.5 * (camera.height_px - 1)};

  // Several rows of an object in one image are told apart by where a first curve expects them; only
  // without any curve a row has to be alone.
  std::shared_ptr<const range::RangeCurve> first;
  try {
    first = range::fit_range(range_input(workspace, workspace.marks)).curve;
  } catch (const InputError&) {
    progress.note("no first curve from drawing or marks: only objects alone in their image count");
  }

  TapeMarks result;
  std::map<std::string, std::vector<const TapeRow*>> by_image;
  for (const TapeRow& row : workspace.tape) {
    if (row.absent) continue;
    by_image[row.image].push_back(&row);
    ++result.rows;
  }
  int done = 0;
  for (const auto& [image, rows] : by_image) {
    progress.at("images", done++, static_cast<int>(by_image.size()));
    const std::vector<vision::Blob> blobs =
        vision::detect(setup, vision::load_image(workspace.folder / image, camera));
    for (std::size_t o = 0; o < workspace.venue.objects.size(); ++o) {
      const ObjectSpec& object = workspace.venue.objects[o];
      std::vector<const TapeRow*> mine;
      for (const TapeRow* row : rows) {
        if (row->object == object.name) mine.push_back(row);
      }
      std::vector<const vision::Blob*> seen;
      for (const vision::Blob& blob : blobs) {
        if (blob.object == static_cast<int>(o)) seen.push_back(&blob);
      }
      for (const auto& [row, blob] : pairs_of(mine, seen, object, first.get())) {
        if (blob->cut_by_mask) continue;
        ++result.found;
        Mark mark{row->line, image, blob->measured, object.name, row->range_m, row->bearing_rad};
        (result.found % 2 == 1 ? result.marks : result.held_out).push_back(std::move(mark));
      }
    }
  }
  if (result.marks.empty()) {
    throw InputError("tape.csv",
                     fmt::format("none of the {} objects it lists was found in its image; look at "
                                 "the thresholds with 'rondel locate'",
                                 result.rows));
  }
  return result;
}

std::string direction(double u, double v, const range::ModelInput& made, double heading_rad) {
  const double azimuth = std::atan2(v, u);
  const double bearing = wrap_angle(heading_rad + (made.mirrored ? azimuth : -azimuth));
  return fmt::format("image azimuth {:.0f} deg, robot bearing {:.0f} deg",
                     azimuth * kDegPerRad,
                     bearing * kDegPerRad);
}

struct Alignment {
  ordered_json json;
  std::string text;
};

/// How the mirror sits, from the fitted tilt and shift: what a person needs who wants to shim it.
std::optional<Alignment> alignment_of(const range::FitResult& fit) {
  const range::RangeCurve& curve = *fit.curve;
  const int tilt = range::index_of(curve.model(), "mirror_tilt_u_rad");
  const int shift = range::index_of(curve.model(), "mirror_shift_u_m");
  if (tilt < 0 || shift < 0) return std::nullopt;
  const int heading = range::index_of(curve.model(), "heading_rad");
  const double heading_rad = heading >= 0 ? curve.params()[heading] : fit.model_input.heading_rad;
  const auto length_and_sd = [&](int first) {
    const Eigen::Vector2d at(curve.params()[first], curve.params()[first + 1]);
    const Eigen::Matrix2d cov = curve.covariance().block<2, 2>(first, first);
    const double length = at.norm();
    const Eigen::Vector2d along =
        length > 0.0 ? Eigen::Vector2d(at / length) : Eigen::Vector2d(1.0, 0.0);
    return std::pair{length, std::sqrt(std::max(0.0, along.dot(cov * along)))};
  };
  const auto [tilt_rad, tilt_sd] = length_and_sd(tilt);
  const auto [shift_m, shift_sd] = length_and_sd(shift);
  const range::Params& p = curve.params();
  const std::string low = direction(p[tilt], p[tilt + 1], fit.model_input, heading_rad);
  const std::string off = direction(p[shift], p[shift + 1], fit.model_input, heading_rad);
  Alignment a;
  a.json = {{"mirror_tilt_deg", tilt_rad * kDegPerRad},
            {"mirror_tilt_sd_deg", tilt_sd * kDegPerRad},
            {"low_side", low},
            {"mirror_shift_mm", shift_m * 1e3},
            {"mirror_shift_sd_mm", shift_sd * 1e3},
            {"shifted_towards", off}};
  a.text =
      fmt::format("Mirror tilt {:.2f} +- {:.2f} deg, {}; shift {:.2f} +- {:.2f} mm{}\n",
                  tilt_rad * kDegPerRad,
                  tilt_sd * kDegPerRad,
                  tilt_rad > 2.0 * tilt_sd ? "low side at " + low : "too small to name its side",
                  shift_m * 1e3,
                  shift_sd * 1e3,
                  shift_m > 2.0 * shift_sd ? " towards " + off : "");
  return a;
}

std::string mark_name(const std::vector<Mark>& marks, int index, bool tape) {
  return fmt::format(
      "{}:{}", tape ? "tape.csv" : "marks.csv", marks[static_cast<std::size_t>(index)].line);
}

ordered_json document_of(const range::FitResult& fit, const std::vector<Mark>& marks, bool tape) {
  ordered_json parameters = ordered_json::object();
  for (const range::ParameterValue& p : fit.parameters) {
    parameters[p.parameter.name] = {{"value", p.value}, {"sd", p.sd}};
  }
  ordered_json flagged = ordered_json::array();
  for (const range::Flagged& f : fit.flagged) {
    flagged.push_back(
        {{"mark", mark_name(marks, f.mark, tape)},
         {"studentised",
          std::isfinite(f.studentised) ? ordered_json(f.studentised) : ordered_json()},
         {"p", f.p},
         {"range_error_m", f.range_error_m},
         {"bearing_error_deg", f.bearing_error_rad * kDegPerRad},
         {"guess", f.guess}});
  }
  ordered_json candidates = ordered_json::array();
  for (const range::Candidate& c : fit.candidates) {
    candidates.push_back({{"model", c.model},
                          {"parameters", c.parameters},
                          {"effective_parameters", c.effective_parameters},
                          {"rms_px", c.rms_px},
                          {"leave_one_out_relative", c.leave_one_out_relative},
                          {"refused", c.refused}});
  }
  return {{"model", fit.model},
          {"marks", fit.marks},
          {"rms_px", fit.rms_px},
          {"leave_one_out_relative", fit.leave_one_out_relative},
          {"noise_scale", fit.noise_scale},
          {"reach_m", fit.reach_m},
          {"parameters", std::move(parameters)},
          {"flagged", std::move(flagged)},
          {"candidates", std::move(candidates)},
          {"notes", fit.notes}};
}

std::string summary_of(const range::FitResult& fit, const std::vector<Mark>& marks, bool tape) {
  std::string out;
  if (fit.marks == 0) {
    out = fmt::format("{} alone, no marks: a first curve with a wide band\n", fit.model);
  } else {
    out =
        fmt::format("{} on {} marks: {:.2f} px RMS, {:.1f} % of range when each mark is left out\n",
                    fit.model,
                    fit.marks,
                    fit.rms_px,
                    100.0 * fit.leave_one_out_relative);
  }
  out += fit.reach_m > 0.0
             ? fmt::format("Reach {:.2f} m: so far the 95 % band stays inside the tolerance\n",
                           fit.reach_m)
             : std::string(
                   "Reach 0 m: the band is nowhere inside the tolerance; measure marks (rondel "
                   "advise)\n");
  for (const range::Flagged& f : fit.flagged) {
    out += fmt::format("{} does not fit the others (tape {:+.3f} m off{}) and is left out{}{}\n",
                       mark_name(marks, f.mark, tape),
                       f.range_error_m,
                       marks[static_cast<std::size_t>(f.mark)].bearing_rad
                           ? fmt::format(", {:+.1f} deg", f.bearing_error_rad * kDegPerRad)
                           : "",
                       f.guess.empty() ? "" : ": ",
                       f.guess);
  }
  if (const auto alignment = alignment_of(fit)) out += alignment->text;
  for (const std::string& note : fit.notes) out += fmt::format("Note: {}\n", note);
  return out;
}

}  // namespace

Outcome run_range(const Workspace& workspace, const RangeOptions& options, Progress& progress) {
  std::vector<Mark> marks = workspace.marks;
  std::optional<TapeMarks> from_tape;
  if (options.tape) {
    from_tape = marks_from_tape(workspace, progress);
    marks = from_tape->marks;
  }
  range::FitInput input = range_input(workspace, marks);
  if (!options.model.empty()) {
    if (range::find_model(options.model) == nullptr) {
      std::vector<std::string> names;
      for (const range::ModelRow& row : range::model_table())
        names.push_back(range::full_name(row));
      throw InputError("--model",
                       fmt::format("'{}' is none of {}", options.model, fmt::join(names, ", ")));
    }
    input.only_model = options.model;
  }
  const range::FitResult fit = range::fit_range(input);

  Outcome outcome;
  outcome.document = document_of(fit, marks, options.tape);
  if (const auto alignment = alignment_of(fit)) outcome.document["alignment"] = alignment->json;
  outcome.summary = summary_of(fit, marks, options.tape);
  if (from_tape) {
    double square = 0.0;
    int n = 0;
    for (const Mark& mark : from_tape->held_out) {
      const ObjectSpec* object = workspace.venue.find_object(mark.object);
      const auto spot = fit.curve->floor_at(mark.pixel, object->seen_height_m());
      if (!spot) continue;
      square += std::pow(spot->range_m / mark.range_m - 1.0, 2);
      ++n;
    }
    const double rms = n > 0 ? std::sqrt(square / n) : 0.0;
    outcome.document["tape"] = {{"rows", from_tape->rows},
                                {"found", from_tape->found},
                                {"held_out", n},
                                {"held_out_rms_relative", rms}};
    outcome.summary += fmt::format(
        "{} of {} tape rows found; every second one was held out: {} rows, {:.1f} % RMS in range\n",
        from_tape->found,
        from_tape->rows,
        n,
        100.0 * rms);
  }
  write_file(result_of(workspace, "range"),
             with_made_from(range::range_yaml(fit), inputs_of(workspace, "range")));
  return outcome;
}

Outcome range_step(const Workspace& workspace, Progress& progress) {
  return run_range(workspace, {}, progress);
}

}  // namespace rondel::app
