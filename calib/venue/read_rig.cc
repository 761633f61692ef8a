#include <fmt/format.h>

#include <cmath>

#include "calib/base/file.h"
#include "calib/optics/conic_forms.h"
#include "calib/optics/profile.h"
#include "calib/venue/csv.h"
#include "calib/venue/read_yaml.h"
#include "calib/venue/yaml_map.h"

namespace rondel {
namespace {

constexpr double kMostPixels = 64e6;

// One standard deviation of a bare number, by kind: what a workshop's drawing or a tape is good
// for.
constexpr UsualTolerance kFocalTolerance = {0.0, 0.02};
constexpr UsualTolerance kRadiusTolerance = {0.0, 0.02};
constexpr UsualTolerance kConstantTolerance = {0.08, 0.0};
constexpr UsualTolerance kAxisTolerance = {0.0, 0.01};
constexpr UsualTolerance kEccentricityTolerance = {0.02, 0.0};
constexpr UsualTolerance kFocusTolerance = {0.0, 0.02};
constexpr UsualTolerance kSlopeTolerance_deg = {0.5, 0.0};
constexpr UsualTolerance kDistanceTolerance_mm = {1.0, 0.0};
constexpr UsualTolerance kEyeHeightTolerance_mm = {3.0, 0.0};

constexpr Limits kMirrorLength_mm = {0.0, 2000.0, true};

double metres(double mm) { return mm / 1000.0; }
Uncertain metres(Uncertain mm) { return {mm.value / 1000.0, mm.sd / 1000.0}; }
optics::Spread spread(Uncertain value) { return {value.value, value.sd}; }
optics::Spread spread_m(Uncertain mm) { return spread(metres(mm)); }

CameraSpec read_camera(const YamlMap& top) {
  CameraSpec camera;
  if (!top.require("camera", "it needs width_px and height_px")) return camera;
  const auto map = top.map("camera");
  if (!map) return camera;
  map->allow({"width_px", "height_px", "focal_px", "rgb565_order"});
  const bool has_width = map->require("width_px", "write the frames' width in pixels");
  const bool has_height = map->require("height_px", "write the frames' height in pixels");
  if (has_width) camera.width_px = map->whole("width_px", 16, 20000).value_or(0);
  if (has_height) camera.height_px = map->whole("height_px", 16, 20000).value_or(0);
  if (static_cast<double>(camera.width_px) * camera.height_px > kMostPixels) {
    map->complain("width_px", "with this height_px it is more than 64 megapixels");
  }
  camera.focal_px = map->uncertain("focal_px", {0.0, 20000.0, true}, kFocalTolerance);
  if (map->word("rgb565_order", {"high_first", "low_first"}) == 1U) {
    camera.rgb565_order = ByteOrder::low_first;
  }
  return camera;
}

/// Which of a conic's keys are there, and what to do with them.
struct ConicForm {
  const char* first;
  const char* second;
};
constexpr std::array kConicForms = {
    ConicForm{"vertex_radius_mm", "conic_constant"},
    ConicForm{"semi_axis_a_mm", "semi_axis_b_mm"},
    ConicForm{"eccentricity", "vertex_radius_mm"},
    ConicForm{"eccentricity", "focus_mm"},
    ConicForm{"eccentricity", "directrix_mm"},
    ConicForm{"eccentricity", "focus_to_directrix_mm"},
    ConicForm{"focus_mm", "directrix_mm"},
};
constexpr std::array kConicKeys = {"vertex_radius_mm",
                                   "conic_constant",
                                   "semi_axis_a_mm",
                                   "semi_axis_b_mm",
                                   "eccentricity",
                                   "focus_mm",
                                   "directrix_mm",
                                   "focus_to_directrix_mm"};

std::optional<optics::OpticalConic> read_conic_values(const YamlMap& mirror,
                                                      const ConicForm& form) {
  const std::string_view first = form.first;
  const std::string_view second = form.second;
  const auto eccentricity = [&] {
    return mirror.uncertain("eccentricity", {0.0, 20.0, false}, kEccentricityTolerance);
  };
  const auto length = [&](std::string_view key, UsualTolerance usual) {
    return mirror.uncertain(key, kMirrorLength_mm, usual);
  };
  if (second == "conic_constant") {
    const auto radius = length(first, kRadiusTolerance);
    const auto constant = mirror.uncertain(second, {-400.0, 100.0, false}, kConstantTolerance);
    if (!radius || !constant) return std::nullopt;
    return optics::OpticalConic{spread_m(*radius), spread(*constant), 0.0};
  }
  if (first == "semi_axis_a_mm") {
    const auto a = length(first, kAxisTolerance);
    const auto b = length(second, kAxisTolerance);
    const bool ellipse = mirror.word("curve", {"hyperbola", "ellipse"}) == 1U;
    if (!a || !b) return std::nullopt;
    return ellipse ? optics::from_ellipse(spread_m(*a), spread_m(*b))
                   : optics::from_hyperbola(spread_m(*a), spread_m(*b));
  }
  if (first == "focus_mm") {
    const auto focus = length(first, kFocusTolerance);
    const auto directrix = length(second, kFocusTolerance);
    if (!focus || !directrix) return std::nullopt;
    return optics::from_focus_and_directrix(spread_m(*focus), spread_m(*directrix));
  }
  const auto e = eccentricity();
  const auto other =
      length(second, second == "vertex_radius_mm" ? kRadiusTolerance : kFocusTolerance);
  if (!e || !other) return std::nullopt;
  if (second == "vertex_radius_mm") return optics::from_eccentricity(spread(*e), spread_m(*other));
  if (second == "focus_mm") return optics::from_focus(spread(*e), spread_m(*other));
  if (!(e->value > 0.0)) {
    mirror.complain("eccentricity", "a circle has no directrix; give vertex_radius_mm");
    return std::nullopt;
  }
  return second == "directrix_mm" ? optics::from_directrix(spread(*e), spread_m(*other))
                                  : optics::from_focus_to_directrix(spread(*e), spread_m(*other));
}

ConicSpec read_conic(const YamlMap& mirror, double rim_radius_m) {
  std::vector<std::string> given;
  for (const char* key : kConicKeys) {
    if (mirror.has(key)) given.emplace_back(key);
  }
  const ConicForm* form = nullptr;
  for (const ConicForm& candidate : kConicForms) {
    if (given.size() == 2 && mirror.has(candidate.first) && mirror.has(candidate.second)) {
      form = &candidate;
    }
  }
  if (form == nullptr) {
    std::string pairs;
    for (const ConicForm& candidate : kConicForms) {
      if (!pairs.empty()) pairs += "; ";
      pairs += fmt::format("{} and {}", candidate.first, candidate.second);
    }
    mirror.complain(fmt::format("a conic needs just one of these pairs: {}", pairs));
    return {};
  }
  if (std::string_view(form->first) != "semi_axis_a_mm" && mirror.has("curve")) {
    mirror.complain("curve", "goes with semi_axis_a_mm and semi_axis_b_mm only; remove it");
  }
  const auto values = read_conic_values(mirror, *form);
  if (!values) return {};
  const double c_per_m = 1.0 / values->vertex_radius_m.value;
  const double at_rim =
      (1.0 + values->conic_constant.value) * c_per_m * c_per_m * rim_radius_m * rim_radius_m;
  if (!(at_rim < 1.0)) {
    mirror.complain(
        "rim_radius_mm",
        fmt::format("this conic is only {:.4g} mm wide from its axis; check its numbers",
                    1000.0 * values->vertex_radius_m.value /
                        std::sqrt(1.0 + values->conic_constant.value)));
  }
  return {{values->vertex_radius_m.value, values->vertex_radius_m.sd},
          {values->conic_constant.value, values->conic_constant.sd},
          values->correlation};
}

std::optional<std::vector<std::pair<double, double>>> read_points_file(
    const YamlMap& mirror,
    const std::string& name,
    const std::filesystem::path& folder,
    std::vector<Problem>& problems) {
  if (std::filesystem::path(name).filename() != name) {
    mirror.complain("points_file", "must be a file beside rig.yaml, named without its folder");
    return std::nullopt;
  }
  const std::filesystem::path path = folder / name;
  std::error_code error;
  if (!std::filesystem::is_regular_file(path, error)) {
    mirror.complain("points_file", "there is no such file beside rig.yaml");
    return std::nullopt;
  }
  const std::size_t before = problems.size();
  const CsvTable table =
      read_csv(read_file(path), path.string(), {{"distance_mm", "sag_mm"}, {"note"}}, problems);
  std::vector<std::pair<double, double>> points_mm;
  for (const CsvRow& row : table.rows) {
    const auto distance = row.number("distance_mm", {0.0, 2000.0, false});
    const auto sag = row.number("sag_mm", {-2000.0, 2000.0, false});
    if (distance && sag) points_mm.emplace_back(*distance, *sag);
  }
  if (problems.size() != before) return std::nullopt;
  return points_mm;
}

ProfileSpec read_profile(const YamlMap& mirror,
                         double rim_radius_m,
                         const std::filesystem::path& folder,
                         std::vector<Problem>& problems) {
  ProfileSpec profile;
  profile.sag_sd_m = metres(mirror.number("sag_sd_mm", {0.0, 20.0, false}).value_or(0.0));
  if (mirror.has("points_mm") == mirror.has("points_file")) {
    mirror.complain("a profile needs points_mm or points_file, just one of them");
    return profile;
  }
  const std::string key = mirror.has("points_mm") ? "points_mm" : "points_file";
  std::optional<std::vector<std::pair<double, double>>> points_mm;
  if (key == "points_mm") {
    points_mm = mirror.points(key, {0.0, 2000.0, false}, {-2000.0, 2000.0, false});
  } else if (const auto name = mirror.text(key)) {
    points_mm = read_points_file(mirror, *name, folder, problems);
  }
  if (!points_mm) return profile;
  for (const auto& [distance_mm, sag_mm] : *points_mm) {
    profile.points_m.emplace_back(metres(distance_mm), metres(sag_mm));
  }
  try {
    const auto fitted = optics::Profile::fit(profile.points_m, profile.sag_sd_m);
    if (!fitted->covers(rim_radius_m)) {
      mirror.complain("rim_radius_mm",
                      fmt::format("the profile's points end at {:.4g} mm; measure up to the rim",
                                  1000.0 * fitted->last_point_m()));
    }
  } catch (const InputError& error) {
    for (const Problem& problem : error.problems()) {
      mirror.complain(fmt::format("{}: {}", key, problem.what));
    }
  }
  return profile;
}

std::optional<MirrorSpec> read_mirror(const YamlMap& top,
                                      const std::filesystem::path& folder,
                                      std::vector<Problem>& problems) {
  const auto map = top.map("mirror");
  if (!map) return std::nullopt;
  MirrorSpec mirror;
  const std::size_t shape =
      map->has("shape") ? map->word("shape", {"conic", "cone", "profile"}).value_or(3) : 0;
  if (map->require("rim_radius_mm", "write the radius of the mirror's edge")) {
    mirror.rim_radius_m = metres(map->number("rim_radius_mm", kMirrorLength_mm).value_or(0.0));
  }
  if (map->require("distance_mm", "write the distance from the pinhole to the mirror's vertex")) {
    mirror.distance_m =
        metres(map->uncertain("distance_mm", kMirrorLength_mm, kDistanceTolerance_mm)
                   .value_or(Uncertain{}));
  }
  switch (shape) {
    case 0:
      map->allow({"shape",
                  "rim_radius_mm",
                  "distance_mm",
                  "vertex_radius_mm",
                  "conic_constant",
                  "semi_axis_a_mm",
                  "semi_axis_b_mm",
                  "curve",
                  "eccentricity",
                  "focus_mm",
                  "directrix_mm",
                  "focus_to_directrix_mm"});
      mirror.shape = read_conic(*map, mirror.rim_radius_m);
      break;
    case 1: {
      map->allow({"shape", "rim_radius_mm", "distance_mm", "slope_deg"});
      ConeSpec cone;
      if (map->require("slope_deg", "write the angle between the cone's flank and its base")) {
        const Uncertain slope_deg =
            map->uncertain("slope_deg", {0.0, 85.0, true}, kSlopeTolerance_deg)
                .value_or(Uncertain{});
        cone.slope_rad = {slope_deg.value * kRadPerDeg, slope_deg.sd * kRadPerDeg};
      }
      mirror.shape = cone;
      break;
    }
    case 2:
      map->allow(
          {"shape", "rim_radius_mm", "distance_mm", "points_mm", "points_file", "sag_sd_mm"});
      mirror.shape = read_profile(*map, mirror.rim_radius_m, folder, problems);
      break;
    default:  // the shape is misspelt, and that has been said
      break;
  }
  return mirror;
}

MountingSpec read_mounting(const YamlMap& top) {
  MountingSpec mounting;
  const auto map = top.map("mounting");
  if (!map) return mounting;
  map->allow({"eye_height_mm", "mirrored", "heading_deg", "robot_radius_mm"});
  if (const auto eye_mm =
          map->uncertain("eye_height_mm", {0.0, 5000.0, true}, kEyeHeightTolerance_mm)) {
    mounting.eye_height_m = metres(*eye_mm);
  }
  mounting.mirrored = map->yes_or_no("mirrored");
  if (const auto heading_deg = map->number("heading_deg", {-360.0, 360.0, false})) {
    mounting.heading_rad = wrap_angle(*heading_deg * kRadPerDeg);
  }
  mounting.robot_radius_m =
      metres(map->number("robot_radius_mm", {0.0, 2000.0, false}).value_or(0.0));
  return mounting;
}

}  // namespace

RigSpec read_rig(std::string_view text,
                 const std::string& file,
                 const std::filesystem::path& folder,
                 std::vector<Problem>& problems) {
  const YamlMap top(text, file, problems);
  top.allow({"camera", "mirror", "mounting"});
  RigSpec rig;
  rig.camera = read_camera(top);
  rig.mirror = read_mirror(top, folder, problems);
  rig.mounting = read_mounting(top);
  return rig;
}

}  // namespace rondel
