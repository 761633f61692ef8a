#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <opencv2/core.hpp>
#include <optional>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/centre_file.h"
#include "tools/rondel/frames.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/step.h"
#include "vision/rim/combine_rims.h"
#include "vision/rim/find_rim.h"

namespace rondel::app {
namespace {

/// More frames than this add nothing to the centre.
constexpr std::size_t kMostFrames = 48;

double rim_sag_m(const MirrorSpec& mirror) {
  const double s = mirror.rim_radius_m;
  if (const auto* conic = std::get_if<ConicSpec>(&mirror.shape)) {
    const double c = 1.0 / conic->vertex_radius_m.value;
    const double k = conic->conic_constant.value;
    return c * s * s / (1.0 + std::sqrt(std::max(0.0, 1.0 - (1.0 + k) * c * c * s * s)));
  }
  if (const auto* cone = std::get_if<ConeSpec>(&mirror.shape))
    return s * std::tan(cone->slope_rad.value);
  const auto& points = std::get<ProfileSpec>(mirror.shape).points_m;
  const auto outermost = std::max_element(points.begin(), points.end());
  return outermost->second * s / std::max(1e-6, outermost->first);
}

/// The rim's radius in the image as the drawing has it, with the tolerances that matter.
std::optional<Uncertain> drawn_rim_px(const RigSpec& rig) {
  if (!rig.mirror || !rig.camera.focal_px || rig.mirror->rim_radius_m <= 0.0) return std::nullopt;
  const Uncertain focal = *rig.camera.focal_px;
  const double away_m = rig.mirror->distance_m.value + rim_sag_m(*rig.mirror);
  const double radius = focal.value * rig.mirror->rim_radius_m / away_m;
  const double relative = std::hypot(focal.sd / focal.value, rig.mirror->distance_m.sd / away_m);
  return Uncertain{radius, radius * relative};
}

double sd_px(const ObservedPoint& point) {
  return std::sqrt(0.5 * (point.cov_px2[0] + point.cov_px2[2]));
}

nlohmann::ordered_json point_json(const ObservedPoint& point) {
  return {{"u_px", point.at.u_px},
          {"v_px", point.at.v_px},
          {"sd_px", sd_px(point)},
          {"cov_px2", {point.cov_px2[0], point.cov_px2[1], point.cov_px2[2]}}};
}

Outcome finish(const Workspace& workspace, const CentreResult& result) {
  write_file(result_of(workspace, "centre"),
             with_made_from(centre_yaml(result), inputs_of(workspace, "centre")));
  Outcome outcome;
  outcome.document["centre"] = point_json(result.centre);
  if (result.rim) {
    outcome.document["rim"] = {{"a_px", result.rim->a_px},
                               {"b_px", result.rim->b_px},
                               {"angle_deg", result.rim->angle_rad * kDegPerRad}};
  } else {
    outcome.document["rim"] = nullptr;
  }
  outcome.document["frames_used"] = result.frames_used;
  outcome.document["frames_disagree"] = result.frames_disagree;
  if (result.reflection) outcome.document["reflection"] = point_json(*result.reflection);
  if (result.turning) outcome.document["turning"] = point_json(*result.turning);
  outcome.summary = fmt::format("centre {:.2f}, {:.2f} px, one deviation {:.2f} px",
                                result.centre.at.u_px,
                                result.centre.at.v_px,
                                sd_px(result.centre));
  if (result.rim) {
    outcome.summary +=
        fmt::format("\nrim {:.1f} px in radius", 0.5 * (result.rim->a_px + result.rim->b_px));
  }
  return outcome;
}

}  // namespace

Outcome centre_step(const Workspace& workspace, Progress& progress) {
  if (workspace.venue.centre) {
    const CentreOverride& given = *workspace.venue.centre;
    const double variance = given.sd_px * given.sd_px;
    CentreResult result;
    result.centre = {given.centre, {variance, 0.0, variance}};
    Outcome outcome = finish(workspace, result);
    outcome.summary += "\ngiven by hand in venue.yaml";
    return outcome;
  }
  if (workspace.frames.empty()) {
    throw InputError((workspace.folder / "frames").string(),
                     "holds no images; put frames there, or write 'centre: {u_px:, v_px:, sd_px:}' "
                     "into venue.yaml");
  }
  std::vector<FrameFile> chosen;
  const std::size_t count = std::min(kMostFrames, workspace.frames.size());
  for (std::size_t k = 0; k < count; ++k) {
    chosen.push_back(workspace.frames[k * workspace.frames.size() / count]);
  }
  const vision::LoadedFrames loaded = load_frames(chosen, workspace.rig.camera, progress);
  if (loaded.frames.empty()) throw InputError(loaded.left_out);

  vision::RimSearch search;
  search.radius_px = drawn_rim_px(workspace.rig);
  const int total = static_cast<int>(loaded.frames.size());
  std::vector<std::optional<vision::Rim>> found(loaded.frames.size());
  cv::parallel_for_(cv::Range(0, total), [&](const cv::Range& range) {
    for (int k = range.start; k < range.end && !progress.cancelled(); ++k) {
      const auto i = static_cast<std::size_t>(k);
      found[i] = vision::find_rim(loaded.frames[i].bgr, search);
      progress.at("looking for the rim", k + 1, total);
    }
  });
  std::vector<vision::Rim> rims;
  std::vector<std::string> names;
  for (std::size_t i = 0; i < found.size(); ++i) {
    if (!found[i]) continue;
    rims.push_back(*found[i]);
    names.push_back(loaded.frames[i].image);
  }
  if (rims.empty()) {
    throw InputError(
        loaded.frames.front().image,
        search.radius_px
            ? fmt::format(
                  "no mirror edge is seen near the {:.0f} px that rig.yaml's drawing gives, "
                  "in this or any other frame; check focal_px, rim_radius_mm and "
                  "distance_mm, or give the centre by hand in venue.yaml",
                  search.radius_px->value)
            : "no mirror edge is seen, in this or any other frame; at least 60 % of it must be "
              "in the picture, or give the centre by hand in venue.yaml");
  }
  const vision::CombinedRims combined = vision::combine_rims(rims);
  Outcome outcome = finish(workspace, combined.result);
  outcome.document["frames"] = total;
  outcome.document["rim_sd_px"] = combined.radius_sd_px;
  outcome.document["scatter_px"] = combined.scatter_px;
  nlohmann::ordered_json off = nlohmann::ordered_json::array();
  for (std::size_t i = 0; i < rims.size(); ++i) {
    if (!combined.agrees[i]) off.push_back(names[i]);
  }
  outcome.document["frames_off"] = off;
  outcome.summary += fmt::format("\nfrom {} of {} frames", combined.result.frames_used, total);
  if (combined.result.frames_used > 1) {
    outcome.summary += fmt::format(", whose centres scatter by {:.2f} px", combined.scatter_px);
  }
  if (combined.result.frames_disagree) {
    outcome.summary += fmt::format(
        "\nframes disagree by {:.1f} px: the mirror or camera moved during capture; fix it and "
        "capture again",
        combined.largest_move_px);
  }
  const std::string left_out = vision::left_out_text(loaded);
  if (!left_out.empty()) outcome.summary += "\n" + left_out;
  return outcome;
}

}  // namespace rondel::app
