#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <set>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/yaml_map.h"
#include "vision/scene/scene.h"

namespace rondel::scene {
namespace {

constexpr Limits kAnywhere{-100.0, 100.0, false};
constexpr Limits kShare{0.0, 1.0, false};
constexpr Limits kSize{0.0, 100.0, true};
constexpr Limits kSizeOrNone{0.0, 100.0, false};
constexpr Limits kSizeMm{0.0, 50000.0, true};
constexpr Limits kSizeOrNoneMm{0.0, 50000.0, false};
constexpr Limits kTurn{-360.0, 360.0, false};
constexpr Limits kLux{0.0, 200000.0, false};
constexpr Limits kKelvin{1700.0, 25000.0, false};
constexpr double kMm = 1e-3;
constexpr std::size_t kMostObjects = 64;

/// Sets `target` to `scale` times the number at `key`, where there is one.
void read(const YamlMap& map,
          std::string_view key,
          const Limits& limits,
          double& target,
          double scale = 1.0) {
  if (const auto value = map.number(key, limits)) target = scale * *value;
}

void read(const YamlMap& map, std::string_view key, bool& target) {
  if (const auto value = map.yes_or_no(key)) target = *value;
}

/// A number that has to be there.
void need(const YamlMap& map,
          std::string_view key,
          const Limits& limits,
          double& target,
          double scale = 1.0) {
  if (map.require(key, text_of(limits))) read(map, key, limits, target, scale);
}

/// 'rrggbb' or '#rrggbb', as on a screen.
void read_colour(const YamlMap& map, std::string_view key, Vec3& target) {
  const auto text = map.text(key);
  if (!text) return;
  const std::string digits = text->front() == '#' ? text->substr(1) : *text;
  const bool right =
      digits.size() == 6 && digits.find_first_not_of("0123456789abcdefABCDEF") == std::string::npos;
  if (!right) {
    map.complain(key, "must be six hex digits, rrggbb, in quotes when they are all decimal");
    return;
  }
  const auto part = [&](std::size_t at) { return std::stoi(digits.substr(at, 2), nullptr, 16); };
  target = srgb(part(0), part(2), part(4));
}

void read_material(const YamlMap& map,
                   std::string_view colour,
                   std::string_view gloss,
                   Material& material) {
  read_colour(map, colour, material.albedo);
  read(map, gloss, kShare, material.gloss);
}

/// Calls `each` with the name and map of every entry of the map at `key`.
template <typename Each>
void for_each(const YamlMap& map, std::string_view key, const Each& each) {
  const auto entries = map.map(key);
  if (!entries) return;
  for (const std::string& name : entries->keys()) {
    if (const auto entry = entries->map(name)) each(name, *entry);
  }
}

void read_place(const YamlMap& map, FloorPoint& place) {
  need(map, "x_m", kAnywhere, place.x_m);
  need(map, "y_m", kAnywhere, place.y_m);
}

void read_span(const YamlMap& map, FloorPoint& from, FloorPoint& to) {
  if (!map.require("span_m", "write [[x, y], [x, y]]")) return;
  const auto points = map.points("span_m", kAnywhere, kAnywhere);
  if (!points) return;
  if (points->size() != 2 || (*points)[0] == (*points)[1]) {
    map.complain("span_m", "must be two different places, [[x, y], [x, y]]");
    return;
  }
  from = {(*points)[0].first, (*points)[0].second};
  to = {(*points)[1].first, (*points)[1].second};
}

void read_rig(const YamlMap& map, SceneRig& rig) {
  map.allow({"width_px",
             "height_px",
             "focal_px",
             "principal_du_px",
             "principal_dv_px",
             "mirror",
             "mounting"});
  if (const auto width = map.whole("width_px", 16, 8192)) rig.width_px = *width;
  if (const auto height = map.whole("height_px", 16, 8192)) rig.height_px = *height;
  read(map, "focal_px", {1.0, 100000.0, false}, rig.focal_px);
  read(map, "principal_du_px", {-1000.0, 1000.0, false}, rig.principal_du_px);
  read(map, "principal_dv_px", {-1000.0, 1000.0, false}, rig.principal_dv_px);
  if (const auto mirror = map.map("mirror")) {
    mirror->allow({"shape",
                   "vertex_radius_mm",
                   "conic_constant",
                   "slope_deg",
                   "rim_radius_mm",
                   "distance_mm",
                   "tilt_x_deg",
                   "tilt_y_deg",
                   "shift_x_mm",
                   "shift_y_mm"});
    if (const auto shape = mirror->word("shape", {"conic", "cone"})) {
      rig.kind = *shape == 0 ? MirrorKind::conic : MirrorKind::cone;
    }
    read(*mirror, "vertex_radius_mm", {0.0, 10000.0, true}, rig.vertex_radius_m, kMm);
    read(*mirror, "conic_constant", {-100.0, 10.0, false}, rig.conic_constant);
    read(*mirror, "slope_deg", {1.0, 80.0, false}, rig.slope_rad, kRadPerDeg);
    read(*mirror, "rim_radius_mm", {0.0, 1000.0, true}, rig.rim_radius_m, kMm);
    read(*mirror, "distance_mm", {0.0, 10000.0, true}, rig.distance_m, kMm);
    read(*mirror, "tilt_x_deg", {-20.0, 20.0, false}, rig.tilt_x_rad, kRadPerDeg);
    read(*mirror, "tilt_y_deg", {-20.0, 20.0, false}, rig.tilt_y_rad, kRadPerDeg);
    read(*mirror, "shift_x_mm", {-100.0, 100.0, false}, rig.shift_x_m, kMm);
    read(*mirror, "shift_y_mm", {-100.0, 100.0, false}, rig.shift_y_m, kMm);
    const double k1 = 1.0 + rig.conic_constant;
    if (rig.kind == MirrorKind::conic && k1 > 0.0 &&
        rig.rim_radius_m >= rig.vertex_radius_m / std::sqrt(k1)) {
      mirror->complain("rim_radius_mm", "the mirror ends before this distance from its axis");
    }
  }
  if (const auto mounting = map.map("mounting")) {
    mounting->allow({"eye_height_mm", "lean_x_deg", "lean_y_deg", "heading_deg", "mirrored"});
    read(*mounting, "eye_height_mm", kSizeMm, rig.eye_height_m, kMm);
    read(*mounting, "lean_x_deg", {-20.0, 20.0, false}, rig.lean_x_rad, kRadPerDeg);
    read(*mounting, "lean_y_deg", {-20.0, 20.0, false}, rig.lean_y_rad, kRadPerDeg);
    read(*mounting, "heading_deg", kTurn, rig.heading_rad, kRadPerDeg);
    read(*mounting, "mirrored", rig.mirrored);
  }
}

void read_robot(const YamlMap& map, Robot& robot) {
  map.allow({"plate_radius_mm",
             "plate_below_eye_mm",
             "plate_thickness_mm",
             "body_radius_mm",
             "plate_colour",
             "plate_gloss",
             "posts",
             "post_colour",
             "post_gloss",
             "parts",
             "holder_radius_mm",
             "holder_colour",
             "holder_gloss",
             "camera_radius_mm",
             "camera_board_mm",
             "board_colour",
             "board_gloss"});
  read(map, "plate_radius_mm", kSizeMm, robot.plate_radius_m, kMm);
  read(map, "plate_below_eye_mm", kSizeMm, robot.plate_below_eye_m, kMm);
  read(map, "plate_thickness_mm", kSizeMm, robot.plate_thickness_m, kMm);
  read(map, "body_radius_mm", kSizeOrNoneMm, robot.body_radius_m, kMm);
  read_material(map, "plate_colour", "plate_gloss", robot.plate);
  read_material(map, "post_colour", "post_gloss", robot.post);
  read(map, "holder_radius_mm", kSizeOrNoneMm, robot.holder_radius_m, kMm);
  read_material(map, "holder_colour", "holder_gloss", robot.holder);
  read(map, "camera_radius_mm", kSizeOrNoneMm, robot.camera_radius_m, kMm);
  read(map, "camera_board_mm", kSizeOrNoneMm, robot.camera_board_m, kMm);
  read_material(map, "board_colour", "board_gloss", robot.board);
  if (map.has("posts")) robot.posts.clear();
  for_each(map, "posts", [&](const std::string&, const YamlMap& entry) {
    entry.allow({"bearing_deg", "distance_mm", "radius_mm"});
    Post post;
    need(entry, "bearing_deg", kTurn, post.bearing_rad, kRadPerDeg);
    read(entry, "distance_mm", kSizeMm, post.distance_m, kMm);
    read(entry, "radius_mm", kSizeMm, post.radius_m, kMm);
    robot.posts.push_back(post);
  });
  for_each(map, "parts", [&](const std::string&, const YamlMap& entry) {
    entry.allow(
        {"x_m", "y_m", "turn_deg", "length_mm", "width_mm", "height_mm", "colour", "gloss"});
    RobotPart part;
    read_place(entry, part.at);
    read(entry, "turn_deg", kTurn, part.turn_rad, kRadPerDeg);
    need(entry, "length_mm", kSizeMm, part.length_m, kMm);
    need(entry, "width_mm", kSizeMm, part.width_m, kMm);
    need(entry, "height_mm", kSizeMm, part.height_m, kMm);
    read_material(entry, "colour", "gloss", part.material);
    robot.parts.push_back(part);
  });
}

void read_sensor(const YamlMap& map, Sensor& sensor) {
  map.allow({"supersample",
             "vignetting",
             "defocus_px",
             "glare",
             "full_well_e",
             "read_noise_e",
             "bayer",
             "jpeg_quality",
             "rgb565",
             "mirror_reflectance"});
  if (const auto rays = map.whole("supersample", 1, 16)) sensor.supersample = *rays;
  read(map, "vignetting", kShare, sensor.vignetting);
  read(map, "defocus_px", {0.0, 20.0, false}, sensor.defocus_px);
  read(map, "glare", kShare, sensor.glare);
  read(map, "full_well_e", {0.0, 1e6, false}, sensor.full_well_e);
  read(map, "read_noise_e", {0.0, 1e4, false}, sensor.read_noise_e);
  read(map, "bayer", sensor.bayer);
  if (const auto quality = map.whole("jpeg_quality", 0, 100)) sensor.jpeg_quality = *quality;
  read(map, "rgb565", sensor.rgb565);
  read(map, "mirror_reflectance", kShare, sensor.mirror_reflectance);
}

void read_floor(const YamlMap& map, Floor& floor) {
  map.allow({"colour", "gloss", "mat", "texture", "grain_mm", "lanes"});
  read_material(map, "colour", "gloss", floor.hall);
  read(map, "texture", kShare, floor.texture);
  read(map, "grain_mm", {0.1, 1000.0, false}, floor.grain_m, kMm);
  if (const auto mat = map.map("mat")) {
    mat->allow({"span_m", "colour", "gloss"});
    FloorPoint a = floor.mat_low;
    FloorPoint b = floor.mat_high;
    if (mat->has("span_m")) read_span(*mat, a, b);
    floor.mat_low = {std::min(a.x_m, b.x_m), std::min(a.y_m, b.y_m)};
    floor.mat_high = {std::max(a.x_m, b.x_m), std::max(a.y_m, b.y_m)};
    read_material(*mat, "colour", "gloss", floor.mat);
  }
  for_each(map, "lanes", [&](const std::string&, const YamlMap& entry) {
    entry.allow({"points_m", "ring", "width_mm", "colour"});
    Lane lane;
    read(entry, "width_mm", kSizeMm, lane.width_m, kMm);
    read_colour(entry, "colour", lane.albedo);
    if (entry.has("points_m") == entry.has("ring")) {
      entry.complain("needs either points_m: [[x, y], ...] or ring: {x_m:, y_m:, radius_m:}");
      return;
    }
    if (const auto points = entry.points("points_m", kAnywhere, kAnywhere)) {
      for (const auto& [x, y] : *points) lane.points.push_back({x, y});
      if (lane.points.size() < 2) entry.complain("points_m", "must be two places at least");
    }
    if (const auto ring = entry.map("ring")) {
      ring->allow({"x_m", "y_m", "radius_m", "from_deg", "to_deg"});
      FloorPoint middle;
      double radius = 1.0;
      double from = 0.0;
      double to = 360.0;
      read_place(*ring, middle);
      need(*ring, "radius_m", kSize, radius);
      read(*ring, "from_deg", kTurn, from);
      read(*ring, "to_deg", kTurn, to);
      const int pieces = std::max(4, static_cast<int>(std::abs(to - from) / 5.0));
      for (int k = 0; k <= pieces; ++k) {
        const double t = kRadPerDeg * (from + (to - from) * k / pieces);
        lane.points.push_back(
            {middle.x_m + radius * std::cos(t), middle.y_m + radius * std::sin(t)});
      }
    }
    floor.lanes.push_back(lane);
  });
}

void read_hall(const YamlMap& map, Hall& hall) {
  map.allow(
      {"span_m", "height_m", "wall_colour", "ceiling_colour", "skirting_colour", "skirting_mm"});
  if (map.has("span_m")) {
    FloorPoint a = hall.low;
    FloorPoint b = hall.high;
    read_span(map, a, b);
    hall.low = {std::min(a.x_m, b.x_m), std::min(a.y_m, b.y_m)};
    hall.high = {std::max(a.x_m, b.x_m), std::max(a.y_m, b.y_m)};
  }
  read(map, "height_m", kSize, hall.height_m);
  read_colour(map, "wall_colour", hall.walls.albedo);
  read_colour(map, "ceiling_colour", hall.ceiling.albedo);
  read_colour(map, "skirting_colour", hall.skirting);
  read(map, "skirting_mm", kSizeOrNoneMm, hall.skirting_m, kMm);
}

SceneObject read_object(const std::string& id, const YamlMap& map) {
  map.allow({"name",
             "solid",
             "x_m",
             "y_m",
             "turn_deg",
             "diameter_mm",
             "length_mm",
             "width_mm",
             "height_mm",
             "colour",
             "gloss"});
  SceneObject object;
  object.id = id;
  if (const auto name = map.text("name")) object.name = *name;
  if (map.require("solid", "must be one of: ball, box, cylinder")) {
    constexpr Solid kSolids[] = {Solid::ball, Solid::box, Solid::cylinder};
    const auto solid = map.word("solid", {"ball", "box", "cylinder"});
    if (!solid) return object;
    object.solid = kSolids[*solid];
    if (object.solid == Solid::box) {
      need(map, "length_mm", kSizeMm, object.length_m, kMm);
      need(map, "width_mm", kSizeMm, object.width_m, kMm);
    } else {
      need(map, "diameter_mm", kSizeMm, object.diameter_m, kMm);
    }
    if (object.solid != Solid::ball) need(map, "height_mm", kSizeMm, object.height_m, kMm);
  }
  read(map, "x_m", kAnywhere, object.at.x_m);
  read(map, "y_m", kAnywhere, object.at.y_m);
  read(map, "turn_deg", kTurn, object.turn_rad, kRadPerDeg);
  read_material(map, "colour", "gloss", object.material);
  return object;
}

Light read_light(const std::string& name, const YamlMap& map) {
  map.allow({"lamps",
             "windows",
             "ambient_lux",
             "ambient_kelvin",
             "exposure_lux",
             "stops",
             "white_kelvin",
             "white_error_red",
             "white_error_blue"});
  Light light;
  light.name = name;
  read(map, "ambient_lux", kLux, light.ambient_lux);
  read(map, "ambient_kelvin", kKelvin, light.ambient_kelvin);
  read(map, "exposure_lux", {0.0, 200000.0, true}, light.exposure_lux);
  read(map, "stops", {-10.0, 10.0, false}, light.stops);
  read(map, "white_kelvin", kKelvin, light.white_kelvin);
  read(map, "white_error_red", {0.1, 10.0, false}, light.white_error_red);
  read(map, "white_error_blue", {0.1, 10.0, false}, light.white_error_blue);
  for_each(map, "lamps", [&](const std::string&, const YamlMap& entry) {
    entry.allow({"x_m", "y_m", "height_m", "radius_m", "lux", "kelvin"});
    Lamp lamp;
    need(entry, "x_m", kAnywhere, lamp.at.x);
    need(entry, "y_m", kAnywhere, lamp.at.y);
    read(entry, "height_m", {0.1, 100.0, false}, lamp.at.z);
    read(entry, "radius_m", {0.005, 10.0, false}, lamp.radius_m);
    need(entry, "lux", kLux, lamp.lux);
    read(entry, "kelvin", kKelvin, lamp.kelvin);
    light.lamps.push_back(lamp);
  });
  for_each(map, "windows", [&](const std::string&, const YamlMap& entry) {
    entry.allow({"span_m", "sill_m", "top_m", "lux", "kelvin"});
    Window window;
    read_span(entry, window.from, window.to);
    read(entry, "sill_m", kSizeOrNone, window.sill_m);
    read(entry, "top_m", kSize, window.top_m);
    if (window.top_m <= window.sill_m) entry.complain("top_m", "must be above sill_m");
    need(entry, "lux", kLux, window.lux);
    read(entry, "kelvin", kKelvin, window.kelvin);
    light.windows.push_back(window);
  });
  return light;
}

SceneFrame read_frame(const std::string& image, const YamlMap& map, const Scene& scene) {
  map.allow({"light", "x_m", "y_m", "heading_deg", "moves"});
  SceneFrame frame;
  frame.image = image;
  const std::string ending = image.size() > 4 ? image.substr(image.size() - 4) : "";
  if ((ending != ".png" && ending != ".jpg") || image.front() == '/' ||
      image.find("..") != std::string::npos) {
    map.complain("a frame's name must be a path below the output folder, ending in .png or .jpg");
  }
  if (map.require("light", "write the name of one of lights:")) {
    if (const auto name = map.text("light")) {
      const auto found = std::find_if(scene.lights.begin(),
                                      scene.lights.end(),
                                      [&](const Light& light) { return light.name == *name; });
      if (found == scene.lights.end()) {
        map.complain("light", "is none of the scene's lights");
      } else {
        frame.light = static_cast<std::size_t>(found - scene.lights.begin());
      }
    }
  }
  need(map, "x_m", kAnywhere, frame.pose.x_m);
  need(map, "y_m", kAnywhere, frame.pose.y_m);
  need(map, "heading_deg", kTurn, frame.pose.heading_rad, kRadPerDeg);
  const Hall& hall = scene.hall;
  if (frame.pose.x_m <= hall.low.x_m || frame.pose.x_m >= hall.high.x_m) {
    map.complain("x_m", "the robot stands outside the hall");
  }
  if (frame.pose.y_m <= hall.low.y_m || frame.pose.y_m >= hall.high.y_m) {
    map.complain("y_m", "the robot stands outside the hall");
  }
  const auto moves = map.map("moves");
  if (!moves) return frame;
  for (const std::string& id : moves->keys()) {
    const auto found = std::find_if(scene.objects.begin(),
                                    scene.objects.end(),
                                    [&](const SceneObject& object) { return object.id == id; });
    if (found == scene.objects.end()) {
      moves->complain(id, "is none of the scene's objects");
      continue;
    }
    const auto entry = moves->map(id);
    if (!entry) continue;
    entry->allow({"x_m", "y_m", "turn_deg", "away"});
    Move move{
        static_cast<std::size_t>(found - scene.objects.begin()), found->at, found->turn_rad, false};
    read(*entry, "x_m", kAnywhere, move.at.x_m);
    read(*entry, "y_m", kAnywhere, move.at.y_m);
    read(*entry, "turn_deg", kTurn, move.turn_rad, kRadPerDeg);
    read(*entry, "away", move.away);
    frame.moves.push_back(move);
  }
  return frame;
}

}  // namespace

Scene parse_scene(const std::string& text, const std::string& file) {
  if (text.find_first_not_of(" \t\r\n") == std::string::npos) {
    throw InputError(file, "is empty; a scene names its lights: and frames: at least");
  }
  std::vector<Problem> problems;
  const YamlMap map(text, file, problems);
  map.allow({"name",
             "seed",
             "rig",
             "robot",
             "sensor",
             "floor",
             "hall",
             "walls",
             "objects",
             "lights",
             "frames",
             "survey"});
  Scene scene;
  if (const auto name = map.text("name")) scene.name = *name;
  if (const auto seed = map.whole("seed", 0, 1'000'000'000)) {
    scene.seed = static_cast<std::uint64_t>(*seed);
  }
  if (const auto rig = map.map("rig")) read_rig(*rig, scene.rig);
  if (const auto robot = map.map("robot")) read_robot(*robot, scene.robot);
  if (scene.robot.plate_below_eye_m + scene.robot.plate_thickness_m >= scene.rig.eye_height_m) {
    map.complain("robot",
                 fmt::format("plate_below_eye_mm + plate_thickness_mm must be less than the eye's "
                             "height of {:g} mm",
                             1e3 * scene.rig.eye_height_m));
  }
  if (const auto sensor = map.map("sensor")) read_sensor(*sensor, scene.sensor);
  if (const auto floor = map.map("floor")) read_floor(*floor, scene.floor);
  if (const auto hall = map.map("hall")) read_hall(*hall, scene.hall);
  for_each(map, "walls", [&](const std::string&, const YamlMap& entry) {
    entry.allow({"span_m", "lift_mm", "height_mm", "thickness_mm", "colour", "gloss"});
    Wall wall;
    read_span(entry, wall.from, wall.to);
    read(entry, "lift_mm", kSizeOrNoneMm, wall.lift_m, kMm);
    read(entry, "height_mm", kSizeMm, wall.height_m, kMm);
    read(entry, "thickness_mm", kSizeMm, wall.thickness_m, kMm);
    read_material(entry, "colour", "gloss", wall.material);
    scene.walls.push_back(wall);
  });
  for_each(map, "objects", [&](const std::string& id, const YamlMap& entry) {
    scene.objects.push_back(read_object(id, entry));
  });
  if (scene.objects.size() > kMostObjects) {
    map.complain("objects", fmt::format("a scene holds at most {} objects", kMostObjects));
  }
  if (map.require("lights", "name at least one light")) {
    for_each(map, "lights", [&](const std::string& name, const YamlMap& entry) {
      scene.lights.push_back(read_light(name, entry));
    });
    if (scene.lights.empty() && problems.empty()) map.complain("lights", "name at least one light");
  }
  if (map.require("frames", "name at least one frame")) {
    for_each(map, "frames", [&](const std::string& image, const YamlMap& entry) {
      scene.frames.push_back(read_frame(image, entry, scene));
    });
    if (scene.frames.empty() && problems.empty()) map.complain("frames", "name at least one frame");
  }
  if (const auto survey = map.map("survey")) {
    survey->allow(
        {"seed", "mark_px", "tape_mm", "floor_marks", "object_marks", "nearest_m", "farthest_m"});
    Survey plan;
    if (const auto seed = survey->whole("seed", 0, 1'000'000'000)) {
      plan.seed = static_cast<std::uint64_t>(*seed);
    }
    read(*survey, "mark_px", {0.0, 20.0, false}, plan.mark_px);
    read(*survey, "tape_mm", {0.0, 1000.0, false}, plan.tape_m, kMm);
    if (const auto count = survey->whole("floor_marks", 0, 1000)) plan.floor_marks = *count;
    if (const auto count = survey->whole("object_marks", 0, 1000)) plan.object_marks = *count;
    read(*survey, "nearest_m", kSize, plan.nearest_m);
    read(*survey, "farthest_m", kSize, plan.farthest_m);
    if (plan.farthest_m <= plan.nearest_m) {
      survey->complain("farthest_m", "must be above nearest_m");
    }
    scene.survey = plan;
  }
  if (!problems.empty()) throw InputError(std::move(problems));
  return scene;
}

Scene read_scene(const std::filesystem::path& path) {
  return parse_scene(read_file(path), path.string());
}

}  // namespace rondel::scene
