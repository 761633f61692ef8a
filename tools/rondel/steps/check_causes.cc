#include "tools/rondel/steps/check_causes.h"

#include <fmt/core.h>

#include <Eigen/Eigenvalues>
#include <algorithm>
#include <cmath>
#include <utility>

namespace rondel::app {
namespace {

using nlohmann::ordered_json;
using verdict::KnockKind;
using verdict::RowState;

/// One standard deviation of a blob's place, px.
constexpr double kBlobPx = 0.3;
/// Where nothing says how high the eye stands.
constexpr double kUsualEyeHeightM = 0.160;

/// Holds the curve, and the curves a standard deviation away, that a model of knocks looks at.
class CurveKnocks final : public verdict::KnockModel {
 public:
  CurveKnocks(std::shared_ptr<const range::RangeCurve> curve, double eye_height_m)
      : curve_(std::move(curve)) {
    const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(curve_->covariance());
    std::vector<const FloorMap*> maps;
    for (Eigen::Index m = 0; m < eigen.eigenvalues().size(); ++m) {
      const double variance = eigen.eigenvalues()[m];
      if (!(variance > 0.0)) continue;
      const range::Params params =
          curve_->params() + std::sqrt(variance) * eigen.eigenvectors().col(m);
      moved_.push_back(std::make_unique<range::RangeCurve>(curve_->shared_model(),
                                                           params,
                                                           curve_->covariance(),
                                                           curve_->t95(),
                                                           curve_->centre(),
                                                           curve_->radius_limit_px()));
      maps.push_back(moved_.back().get());
    }
    knocks_ = verdict::knocks_of_map(*curve_, curve_->centre(), eye_height_m, std::move(maps));
  }
  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot,
                                                   double height_m,
                                                   KnockKind kind,
                                                   std::span<const double> amounts) const override {
    return knocks_->pixel_of(spot, height_m, kind, amounts);
  }
  [[nodiscard]] int modes() const override { return knocks_->modes(); }
  [[nodiscard]] std::optional<ImagePoint> pixel_in_mode(FloorSpot spot,
                                                        double height_m,
                                                        int mode) const override {
    return knocks_->pixel_in_mode(spot, height_m, mode);
  }

 private:
  std::shared_ptr<const range::RangeCurve> curve_;
  std::vector<std::unique_ptr<range::RangeCurve>> moved_;
  std::unique_ptr<verdict::KnockModel> knocks_;
};

std::string spot_text(FloorSpot spot, bool with_bearing) {
  if (!with_bearing) return fmt::format("{:.2f} m", spot.range_m);
  return fmt::format("{:.2f} m, {:.0f} deg", spot.range_m, spot.bearing_rad * kDegPerRad);
}

std::string chance_text(double p) {
  if (p < 1e-6) return "less than one in a million";
  return fmt::format("{:.2g} %", 100.0 * p);
}

std::string sentence_of(const verdict::Hypothesis& h, const verdict::Diagnosis& diagnosis) {
  if (h.id == "tape") {
    std::string rows;
    for (const verdict::WrongRow& row : h.rows) {
      if (!rows.empty()) rows += "; ";
      rows += fmt::format("line {} says {}", row.line, spot_text(row.tape, row.bearing_known));
      rows += row.likely
                  ? fmt::format(", the picture says {}", spot_text(*row.likely, row.bearing_known))
                  : ", which the picture does not show anywhere near";
    }
    return fmt::format("{}. The other rows fit ({:.2f} px left).", rows, h.rms_px);
  }
  std::string sentence = fmt::format(
      "It explains {:.0f} % of the residuals of {} rows, {:.2f} px before and {:.2f} px after; "
      "chance would do as well in {}.",
      100.0 * h.explained,
      diagnosis.sightings,
      diagnosis.rms_px,
      h.rms_px,
      chance_text(h.p));
  if (h.kind == KnockKind::centre || h.kind == KnockKind::tilt) {
    sentence += fmt::format(
        " Amounts are known to {}.",
        h.kind == KnockKind::centre
            ? fmt::format("{:.1f} px", std::hypot(h.amounts_sd[0], h.amounts_sd[1]))
            : fmt::format("{:.1f} deg", kDegPerRad * std::hypot(h.amounts_sd[0], h.amounts_sd[1])));
  } else if (h.kind == KnockKind::eye_height) {
    sentence += fmt::format(" The change is known to {:.1f} mm.", 1e3 * h.amounts_sd[0]);
  } else if (h.kind == KnockKind::focal) {
    sentence += fmt::format(" The scale is known to {:.1f} %.", 100.0 * h.amounts_sd[0]);
  } else if (h.kind == KnockKind::heading) {
    sentence += fmt::format(" The turn is known to {:.1f} deg.", kDegPerRad * h.amounts_sd[0]);
  }
  return sentence;
}

std::string advice_of(const verdict::Hypothesis& h) {
  if (!h.kind) {
    return "Measure again what these lines say and correct tape.csv; then run 'rondel check'.";
  }
  switch (*h.kind) {
    case KnockKind::centre:
      return "Fasten the camera and the mirror, take new frames and run 'rondel run'; or keep the "
             "frames and try 'rondel check --repair'.";
    case KnockKind::tilt:
      return "Set the mirror straight, or measure six new marks all around and run 'rondel run'; "
             "'rondel check --repair' may do until then.";
    case KnockKind::eye_height:
      return "Measure the eye height, correct eye_height_mm in rig.yaml and run 'rondel run'; look "
             "for a sunk wheel or a bent mast. 'rondel check --repair' may do until then.";
    case KnockKind::focal:
      return "Lock the lens at its old focus, or measure three new marks and run 'rondel run'; "
             "'rondel check --repair' may do until then.";
    case KnockKind::mirror:
      return "If the mirror is another one: put its drawing into rig.yaml, measure six marks and "
             "run 'rondel run'.";
    case KnockKind::heading:
      return "Turn the camera back, or measure three marks with their bearings and run 'rondel "
             "run'; 'rondel check --repair' may do until then.";
    case KnockKind::count:
      break;
  }
  return "";
}

double json_number(double value, int digits) {
  return std::stod(fmt::format("{:.{}g}", value, digits));
}

ordered_json spot_json(FloorSpot spot, bool with_bearing) {
  ordered_json json = {{"range_m", json_number(spot.range_m, 5)}};
  if (with_bearing) json["bearing_deg"] = json_number(spot.bearing_rad * kDegPerRad, 5);
  return json;
}

ordered_json row_json(const verdict::WrongRow& row) {
  ordered_json json = {{"line", row.line}, {"tape", spot_json(row.tape, row.bearing_known)}};
  json["likely"] = row.likely ? spot_json(*row.likely, row.bearing_known) : ordered_json(nullptr);
  json["p"] = json_number(row.p, 3);
  return json;
}

/// Amounts in the units people use, named.
ordered_json amounts_json(const verdict::Hypothesis& h) {
  static const std::array<std::array<std::pair<const char*, double>, 2>,
                          static_cast<std::size_t>(KnockKind::count)>
      kNames = {{{{{"du_px", 1.0}, {"dv_px", 1.0}}},
                 {{{"tilt_u_deg", kDegPerRad}, {"tilt_v_deg", kDegPerRad}}},
                 {{{"eye_height_mm", 1e3}, {"", 0.0}}},
                 {{{"focal_relative", 1.0}, {"", 0.0}}},
                 {{{"shape_1", 1.0}, {"shape_2", 1.0}}},
                 {{{"heading_deg", kDegPerRad}, {"", 0.0}}}}};
  ordered_json json = ordered_json::object();
  for (std::size_t a = 0; a < h.amounts.size(); ++a) {
    const auto& [name, factor] = kNames[static_cast<std::size_t>(*h.kind)][a];
    json[name] = {{"value", json_number(h.amounts[a] * factor, 4)},
                  {"sd", json_number(h.amounts_sd[a] * factor, 2)}};
  }
  return json;
}

ordered_json hypothesis_json(const verdict::Hypothesis& h, bool named) {
  ordered_json json;
  json["id"] = h.id;
  json["cause"] = h.cause;
  json["named"] = named;
  json["parameters"] = h.parameters;
  json["criterion"] = json_number(h.criterion, 6);
  json["evidence"] = json_number(h.evidence, 6);
  json["p"] = json_number(h.p, 3);
  json["explained"] = json_number(h.explained, 4);
  json["rms_px"] = json_number(h.rms_px, 4);
  if (h.kind) json["amounts"] = amounts_json(h);
  if (h.id == "tape") {
    json["rows"] = ordered_json::array();
    for (const verdict::WrongRow& row : h.rows) json["rows"].push_back(row_json(row));
  }
  return json;
}

void add_geometry(const verdict::Diagnosis& diagnosis, ordered_json& causes) {
  std::string names;
  for (int c = 0; c < diagnosis.causes; ++c) {
    if (c > 0) names += c + 1 == diagnosis.causes ? " and " : ", ";
    names += "'" + diagnosis.hypotheses[static_cast<std::size_t>(c)].cause + "'";
  }
  std::string apart;
  if (diagnosis.causes > 1) {
    apart = fmt::format("This data cannot tell {} apart", names);
    if (diagnosis.tell_apart && diagnosis.tell_apart->apart_sigma > 1.0) {
      apart += fmt::format(
          "; measure an object at {}, where the first two are {:.1f} px ({:.0f} "
          "standard deviations) apart.",
          spot_text(diagnosis.tell_apart->spot, true),
          diagnosis.tell_apart->apart_px,
          diagnosis.tell_apart->apart_sigma);
    } else {
      apart += ", and no single further mark would; measure several, near and far.";
    }
  }
  for (int c = 0; c < diagnosis.causes; ++c) {
    const verdict::Hypothesis& h = diagnosis.hypotheses[static_cast<std::size_t>(c)];
    ordered_json json;
    json["cause"] = h.cause;
    json["id"] = h.id;
    json["evidence"] = json_number(h.evidence, 4);
    json["sentence"] = sentence_of(h, diagnosis);
    if (!apart.empty()) json["sentence"] = sentence_of(h, diagnosis) + " " + apart;
    json["advice"] = advice_of(h);
    json["undecided"] = diagnosis.causes > 1;
    if (h.kind) json["amounts"] = amounts_json(h);
    if (h.id == "tape") {
      json["rows"] = ordered_json::array();
      for (const verdict::WrongRow& row : h.rows) json["rows"].push_back(row_json(row));
    }
    if (diagnosis.causes > 1 && diagnosis.tell_apart) {
      json["measure_here"] = spot_json(diagnosis.tell_apart->spot, true);
    }
    causes.push_back(std::move(json));
  }
  if (!diagnosis.odd_rows.empty()) {
    verdict::Hypothesis odd;
    odd.id = "tape";
    odd.rows = diagnosis.odd_rows;
    ordered_json json;
    std::string lines;
    for (const verdict::WrongRow& row : odd.rows) {
      lines += (lines.empty() ? "" : ", ") + std::to_string(row.line);
    }
    json["cause"] = fmt::format(
        "Beside it, tape rows wrong: line{} {}", odd.rows.size() == 1 ? "" : "s", lines);
    json["id"] = "tape";
    json["evidence"] = json_number(-2.0 * std::log(std::max(1e-300, odd.rows.front().p)), 4);
    json["sentence"] =
        fmt::format("Chance of a row so far off: {}.", chance_text(odd.rows.front().p));
    json["advice"] = advice_of(odd);
    json["undecided"] = false;
    json["rows"] = ordered_json::array();
    for (const verdict::WrongRow& row : odd.rows) json["rows"].push_back(row_json(row));
    causes.push_back(std::move(json));
  }
}

/// Up to three images of the light in which the object was missed.
std::string missed_images(const VenueSpec& venue,
                          const TapeBatch& batch,
                          const verdict::Verdict& verdict,
                          const verdict::DriftedLight& drift) {
  std::vector<std::string> images;
  for (std::size_t i = 0; i < verdict.rows.size() && images.size() < 3; ++i) {
    if (verdict.rows[i].state != RowState::missed) continue;
    const verdict::TapeEntry& entry = batch.tape[i];
    const verdict::ImageEntry& image = batch.images[static_cast<std::size_t>(entry.image)];
    if (image.light != drift.light) continue;
    if (!drift.object.empty() &&
        venue.objects[static_cast<std::size_t>(entry.object)].name != drift.object) {
      continue;
    }
    if (std::find(images.begin(), images.end(), image.image) == images.end()) {
      images.push_back(image.image);
    }
  }
  std::string text;
  for (const std::string& image : images) text += (text.empty() ? "" : ", ") + image;
  return text;
}

void add_lights(const VenueSpec& venue,
                const TapeBatch& batch,
                const verdict::Verdict& verdict,
                std::span<const verdict::DriftedLight> lights,
                ordered_json& causes) {
  for (const verdict::DriftedLight& drift : lights) {
    const std::string light =
        drift.light.empty() ? "in the unnamed light" : "in light " + drift.light;
    const std::string object = drift.object.empty() ? "" : " of " + drift.object;
    ordered_json json;
    json["cause"] = fmt::format("Colours{} drifted {}", object, light);
    json["id"] = "colours";
    json["evidence"] = json_number(drift.evidence, 4);
    json["sentence"] = fmt::format(
        "{} of {} rows found there; at a recall of {:.0f} % so few happen by chance in {}.",
        drift.found,
        drift.rows,
        100.0 * venue.tolerance.recall,
        chance_text(drift.p));
    json["advice"] =
        fmt::format("Label swatches in frames of that light ({}) and run 'rondel run'.",
                    missed_images(venue, batch, verdict, drift));
    json["undecided"] = false;
    json["light"] = drift.light;
    if (!drift.object.empty()) json["object"] = drift.object;
    causes.push_back(std::move(json));
  }
}

/// Not accepted, and no cause stands out: where the errors come from at least.
void add_unexplained(const verdict::Verdict& verdict,
                     const std::string& silence,
                     ordered_json& causes) {
  ordered_json json;
  json["cause"] = "No single cause found";
  json["id"] = "none";
  json["evidence"] = 0.0;
  std::string sentence = silence.empty()
                             ? "Neither a knock, nor wrong tape rows, nor one light explain it."
                             : "Nothing can be said: " + silence + ".";
  std::string advice = "Look at the worst images in the report.";
  if (verdict.range_shares) {
    const verdict::Shares& s = *verdict.range_shares;
    sentence += fmt::format(
        " Of the squared range errors {:.0f} % are rounding, {:.0f} % pixel noise, {:.0f} % the "
        "rest.",
        100.0 * s.rounding,
        100.0 * s.pixel_noise,
        100.0 * s.rest);
    if (s.rounding > 0.5) {
      advice = "Raise link.range_bits or budget.table_bytes in venue.yaml and run 'rondel run'.";
    } else if (s.pixel_noise > 0.5) {
      advice =
          "The picture does not resolve more at these ranges: lower link.far_m, or allow more in "
          "tolerance.";
    } else if (!silence.empty()) {
      advice = "Tape more rows, near and far, all around.";
    }
  }
  json["sentence"] = sentence;
  json["advice"] = advice;
  json["undecided"] = false;
  causes.push_back(std::move(json));
}

}  // namespace

std::shared_ptr<const verdict::KnockModel> knock_model(
    std::shared_ptr<const range::RangeCurve> curve, const RigSpec& rig) {
  if (const auto geometry = curve->rig()) {
    return verdict::knocks_of_rig(*geometry, curve->rig_modes());
  }
  double eye_height_m = kUsualEyeHeightM;
  if (const int at = range::index_of(curve->model(), "eye_height_m"); at >= 0) {
    eye_height_m = curve->params()[at];
  } else if (rig.mounting.eye_height_m) {
    eye_height_m = rig.mounting.eye_height_m->value;
  }
  return std::make_shared<CurveKnocks>(std::move(curve), eye_height_m);
}

std::vector<verdict::Sighting> sightings_of(const VenueSpec& venue,
                                            const TapeBatch& batch,
                                            std::span<const std::vector<verdict::Find>> finds,
                                            const verdict::Verdict& verdict) {
  std::vector<verdict::Sighting> sightings;
  for (std::size_t i = 0; i < verdict.rows.size(); ++i) {
    const verdict::RowResult& row = verdict.rows[i];
    if (row.find < 0 || (row.state != RowState::found && row.state != RowState::elsewhere))
      continue;
    const verdict::TapeEntry& entry = batch.tape[i];
    const verdict::Find& find =
        finds[static_cast<std::size_t>(entry.image)][static_cast<std::size_t>(row.find)];
    if (find.cut_by_mask) continue;
    verdict::Sighting sighting;
    sighting.line = entry.line;
    sighting.tape = {entry.range_m, entry.bearing_rad.value_or(0.0)};
    sighting.bearing_known = entry.bearing_rad.has_value();
    if (!sighting.bearing_known && find.unrounded) {
      sighting.tape.bearing_rad = find.unrounded->bearing_rad;
    }
    sighting.height_m = venue.objects[static_cast<std::size_t>(entry.object)].seen_height_m();
    sighting.seen = find.measured;
    sightings.push_back(sighting);
  }
  return sightings;
}

verdict::SightingNoise sighting_noise(const VenueSpec& venue) {
  verdict::SightingNoise noise;
  noise.pixel_sd = kBlobPx;
  noise.tape_sd_m = venue.noise.tape_m;
  return noise;
}

Causes find_causes(const VenueSpec& venue,
                   const TapeBatch& batch,
                   std::span<const std::vector<verdict::Find>> finds,
                   const verdict::Verdict& verdict,
                   const verdict::KnockModel* model,
                   const Examiner& examiner) {
  Causes causes;
  if (model != nullptr) {
    const auto visible = [&](FloorSpot spot) {
      if (examiner.curve == nullptr) return true;
      const auto at = examiner.curve->pixel_of(spot, 0.0);
      if (!at) return false;
      const cv::Mat& mask = examiner.detector.mask;
      const int u = static_cast<int>(std::lround(at->u_px));
      const int v = static_cast<int>(std::lround(at->v_px));
      return u >= 0 && v >= 0 && u < mask.cols && v < mask.rows && mask.at<std::uint8_t>(v, u) != 0;
    };
    causes.diagnosis = verdict::diagnose(*model,
                                         sightings_of(venue, batch, finds, verdict),
                                         sighting_noise(venue),
                                         venue.link.far_m,
                                         visible);
    causes.silence = causes.diagnosis.silence;
    add_geometry(causes.diagnosis, causes.causes);
    for (std::size_t h = 0; h < causes.diagnosis.hypotheses.size(); ++h) {
      causes.hypotheses.push_back(hypothesis_json(causes.diagnosis.hypotheses[h],
                                                  static_cast<int>(h) < causes.diagnosis.causes));
    }
  }
  causes.lights = verdict::drifted_lights(venue, batch.images, batch.tape, verdict.rows);
  add_lights(venue, batch, verdict, causes.lights, causes.causes);
  if (causes.causes.empty() && !verdict.accepted) {
    add_unexplained(verdict, causes.silence, causes.causes);
  }
  return causes;
}

}  // namespace rondel::app
