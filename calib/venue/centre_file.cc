#include "calib/venue/centre_file.h"

#include <fmt/core.h>
#include <yaml-cpp/yaml.h>

#include <algorithm>
#include <cmath>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel {
namespace {

std::string point_yaml(const ObservedPoint& point) {
  return fmt::format("{{u_px: {}, v_px: {}, cov_px2: [{}, {}, {}]}}",
                     number_text(point.at.u_px),
                     number_text(point.at.v_px),
                     number_text(point.cov_px2[0]),
                     number_text(point.cov_px2[1]),
                     number_text(point.cov_px2[2]));
}

double finite(const YAML::Node& node) {
  const double value = node.as<double>();
  if (!std::isfinite(value)) throw YAML::Exception(node.Mark(), "is not finite");
  return value;
}

ObservedPoint point_of(const YAML::Node& node) {
  ObservedPoint point;
  point.at = {finite(node["u_px"]), finite(node["v_px"])};
  for (std::size_t i = 0; i < 3; ++i) point.cov_px2[i] = finite(node["cov_px2"][i]);
  return point;
}

}  // namespace

std::string centre_yaml(const CentreResult& result) {
  std::string text = fmt::format("centre: {}\n", point_yaml(result.centre));
  if (result.rim) {
    text += fmt::format("rim: {{a_px: {}, b_px: {}, angle_deg: {}}}\n",
                        number_text(result.rim->a_px),
                        number_text(result.rim->b_px),
                        number_text(result.rim->angle_rad * kDegPerRad));
  }
  if (result.reflection) text += fmt::format("reflection: {}\n", point_yaml(*result.reflection));
  if (result.turning) text += fmt::format("turning: {}\n", point_yaml(*result.turning));
  text += fmt::format("frames_used: {}\nframes_disagree: {}\n",
                      result.frames_used,
                      result.frames_disagree ? "true" : "false");
  return text;
}

CentreResult read_centre(const std::filesystem::path& path) {
  std::error_code error;
  if (!std::filesystem::exists(path, error)) {
    throw InputError(path.string(), "is missing; run 'rondel centre' first");
  }
  try {
    const YAML::Node node = YAML::Load(read_file(path));
    CentreResult result;
    result.centre = point_of(node["centre"]);
    if (const YAML::Node rim = node["rim"]) {
      result.rim = RimEllipse{
          finite(rim["a_px"]), finite(rim["b_px"]), finite(rim["angle_deg"]) * kRadPerDeg};
    }
    if (node["reflection"]) result.reflection = point_of(node["reflection"]);
    if (node["turning"]) result.turning = point_of(node["turning"]);
    result.frames_used = node["frames_used"].as<int>();
    result.frames_disagree = node["frames_disagree"].as<bool>();
    return result;
  } catch (const YAML::Exception& damaged) {
    throw InputError(fmt::format("{}:{}", path.string(), std::max(0, damaged.mark.line) + 1),
                     "is damaged; delete it and run 'rondel centre' again");
  }
}

}  // namespace rondel
