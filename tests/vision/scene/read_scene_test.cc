#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <algorithm>
#include <filesystem>
#include <numbers>
#include <string>

#include "calib/base/problem.h"
#include "vision/scene/scene.h"

namespace rondel::scene {
namespace {

constexpr std::string_view kSmallest = R"(lights:
  on: {}
frames:
  frames/a.png: {light: on, x_m: 0, y_m: 0, heading_deg: 0}
)";

std::string with(std::string_view extra) { return std::string(kSmallest) + std::string(extra); }

/// Every problem of a scene's text, one a line; empty when it has none.
std::string problems_of(const std::string& text) {
  try {
    (void)parse_scene(text, "scene.yaml");
  } catch (const InputError& error) {
    return error.what();
  }
  return "";
}

TEST(ReadScene, SmallestSceneHasTheDocumentedDefaults) {
  const Scene scene = parse_scene(std::string(kSmallest), "scene.yaml");
  EXPECT_EQ(scene.rig.width_px, 320);
  EXPECT_EQ(scene.rig.conic_constant, -2.25);
  EXPECT_EQ(scene.sensor.supersample, 3);
  EXPECT_EQ(scene.robot.posts.size(), 3U);
  ASSERT_EQ(scene.frames.size(), 1U);
  EXPECT_EQ(scene.frames[0].image, "frames/a.png");
  EXPECT_FALSE(scene.survey);
}

TEST(ReadScene, EveryUnitIsConverted) {
  const Scene scene = parse_scene(R"(name: Lock
seed: 12
rig:
  width_px: 640
  height_px: 480
  focal_px: 500
  principal_du_px: 2
  mirror: {shape: cone, slope_deg: 30, rim_radius_mm: 25, distance_mm: 70, tilt_x_deg: 1, shift_y_mm: 0.5}
  mounting: {eye_height_mm: 200, lean_y_deg: 2, heading_deg: 90, mirrored: false}
robot:
  plate_radius_mm: 90
  posts: {only: {bearing_deg: 180, distance_mm: 50, radius_mm: 4}}
  parts: {box: {x_m: 0.05, y_m: 0, length_mm: 20, width_mm: 30, height_mm: 10, colour: "808080", gloss: 0.5}}
sensor: {supersample: 2, bayer: false, jpeg_quality: 80, rgb565: true}
floor:
  mat: {span_m: [[1, 1], [-2, -1]]}
  lanes:
    line: {points_m: [[0, 0], [1, 0]], width_mm: 20, colour: ffffff}
    turn: {ring: {x_m: 0, y_m: 0, radius_m: 0.5, from_deg: 0, to_deg: 90}}
walls: {edge: {span_m: [[0, 0], [1, 1]], height_mm: 150}}
objects:
  one: {name: buoy, solid: ball, diameter_mm: 74}
  two: {solid: box, length_mm: 200, width_mm: 100, height_mm: 50, x_m: 1, y_m: 0.5, turn_deg: 90}
lights:
  noon:
    lamps: {a: {x_m: 0, y_m: 0, lux: 300, kelvin: 3000}}
    windows: {w: {span_m: [[-1, 3], [1, 3]], lux: 1000}}
frames:
  frames/noon/1.jpg: {light: noon, x_m: 0.5, y_m: 0, heading_deg: 45, moves: {one: {x_m: 1}, two: {away: true}}}
survey: {mark_px: 0.2, tape_mm: 5}
)",
                                  "scene.yaml");
  EXPECT_EQ(scene.rig.kind, MirrorKind::cone);
  EXPECT_NEAR(scene.rig.slope_rad, std::numbers::pi / 6.0, 1e-15);
  EXPECT_NEAR(scene.rig.distance_m, 0.070, 1e-15);
  EXPECT_NEAR(scene.rig.shift_y_m, 0.0005, 1e-15);
  EXPECT_NEAR(scene.rig.tilt_x_rad, std::numbers::pi / 180.0, 1e-15);
  EXPECT_NEAR(scene.rig.lean_y_rad, std::numbers::pi / 90.0, 1e-15);
  EXPECT_FALSE(scene.rig.mirrored);
  ASSERT_EQ(scene.robot.posts.size(), 1U);
  EXPECT_NEAR(scene.robot.posts[0].radius_m, 0.004, 1e-15);
  EXPECT_NEAR(scene.robot.parts.at(0).material.albedo.x, 0.21586, 1e-5);
  EXPECT_EQ(scene.floor.mat_low.x_m, -2.0);
  EXPECT_EQ(scene.floor.mat_high.y_m, 1.0);
  ASSERT_EQ(scene.floor.lanes.size(), 2U);
  EXPECT_NEAR(scene.floor.lanes[1].points.back().y_m, 0.5, 1e-12);
  ASSERT_EQ(scene.objects.size(), 2U);
  EXPECT_EQ(scene.objects[0].id, "one");
  EXPECT_NEAR(scene.objects[1].turn_rad, std::numbers::pi / 2.0, 1e-15);
  EXPECT_EQ(scene.lights.at(0).lamps.at(0).kelvin, 3000.0);
  const SceneFrame& frame = scene.frames.at(0);
  ASSERT_EQ(frame.moves.size(), 2U);
  EXPECT_EQ(frame.moves[0].at.x_m, 1.0);
  EXPECT_EQ(frame.moves[0].at.y_m, 0.0);
  EXPECT_TRUE(frame.moves[1].away);
  ASSERT_TRUE(scene.survey);
  EXPECT_NEAR(scene.survey->tape_m, 0.005, 1e-15);
}

struct Bad {
  std::string text;
  std::string message;
};

TEST(ReadScene, OneLineForEachMistake) {
  const Bad kBad[] = {
      {"", "scene.yaml: is empty; a scene names its lights: and frames: at least"},
      {"lights: {on: {}}\nframes: {}\n", "scene.yaml:2: frames: name at least one frame"},
      {"lights: {on: {}}\n", "scene.yaml:1: frames: is missing; name at least one frame"},
      {with("supersample: 2\n"),
       "scene.yaml:5: supersample: unknown key; allowed: name, seed, rig, robot, sensor, floor, "
       "hall, walls, objects, lights, frames, survey"},
      {with("senor: {}\n"), "scene.yaml:5: senor: unknown key; did you mean 'sensor'?"},
      {with("sensor: {supersample: 0}\n"),
       "scene.yaml:5: sensor.supersample = 0: must be from 1 to 16"},
      {with("sensor: {glare: 2}\n"), "scene.yaml:5: sensor.glare = 2: must be from 0 to 1"},
      {with("rig: {mirror: {shape: sphere}}\n"),
       "scene.yaml:5: rig.mirror.shape = sphere: must be one of: conic, cone"},
      {with("rig: {mirror: {conic_constant: 0, vertex_radius_mm: 20, rim_radius_mm: 30}}\n"),
       "scene.yaml:5: rig.mirror.rim_radius_mm = 30: the mirror ends before this distance from its "
       "axis"},
      {with("rig: {mounting: {eye_height_mm: 40}}\n"),
       "scene.yaml:1: robot: plate_below_eye_mm + plate_thickness_mm must be less than the eye's "
       "height of 40 mm"},
      {with("floor: {colour: green}\n"),
       "scene.yaml:5: floor.colour = green: must be six hex digits, rrggbb, in quotes when they "
       "are all decimal"},
      {with("floor: {lanes: {a: {width_mm: 20}}}\n"),
       "scene.yaml:5: floor.lanes.a: needs either points_m: [[x, y], ...] or ring: {x_m:, y_m:, "
       "radius_m:}"},
      {with("walls: {a: {height_mm: 100}}\n"),
       "scene.yaml:5: walls.a.span_m: is missing; write [[x, y], [x, y]]"},
      {with("walls: {a: {span_m: [[0, 0], [0, 0]]}}\n"),
       "scene.yaml:5: walls.a.span_m: must be two different places, [[x, y], [x, y]]"},
      {with("objects: {a: {name: buoy}}\n"),
       "scene.yaml:5: objects.a.solid: is missing; must be one of: ball, box, cylinder"},
      {with("objects: {a: {solid: ball}}\n"),
       "scene.yaml:5: objects.a.diameter_mm: is missing; must be above 0 and at most 50000"},
      {with("objects: {a: {solid: ball, diameter_mm: .nan}}\n"),
       "scene.yaml:5: objects.a.diameter_mm = .nan: is not a number; it must be above 0 and at "
       "most 50000"},
      {with("survey: {nearest_m: 2, farthest_m: 1}\n"),
       "scene.yaml:5: survey.farthest_m = 1: must be above nearest_m"},
      {"lights: {on: {}}\nframes: {a.gif: {light: on, x_m: 0, y_m: 0, heading_deg: 0}}\n",
       "scene.yaml:2: frames.a.gif: a frame's name must be a path below the output folder, ending "
       "in .png or .jpg"},
      {"lights: {on: {}}\nframes: {../a.png: {light: on, x_m: 0, y_m: 0, heading_deg: 0}}\n",
       "scene.yaml:2: frames.../a.png: a frame's name must be a path below the output folder, "
       "ending in .png or .jpg"},
      {"lights: {on: {}}\nframes: {a.png: {light: off, x_m: 0, y_m: 0, heading_deg: 0}}\n",
       "scene.yaml:2: frames.a.png.light = off: is none of the scene's lights"},
      {"lights: {on: {}}\nframes: {a.png: {light: on, x_m: 9, y_m: 0, heading_deg: 0}}\n",
       "scene.yaml:2: frames.a.png.x_m = 9: the robot stands outside the hall"},
      {"lights: {on: {}}\nframes: {a.png: {light: on, x_m: 0, y_m: 0, heading_deg: 0, moves: "
       "{buoy: {away: true}}}}\n",
       "scene.yaml:2: frames.a.png.moves.buoy: is none of the scene's objects"},
  };
  for (const Bad& bad : kBad) EXPECT_EQ(problems_of(bad.text), bad.message) << bad.text;
}

TEST(ReadScene, AllMistakesOfAFileComeTogether) {
  const std::string problems = problems_of(with("seed: -1\nsensor: {glare: 2, bayer: perhaps}\n"));
  EXPECT_EQ(std::count(problems.begin(), problems.end(), '\n'), 2) << problems;
}

TEST(ReadScene, FileThatIsNotThere) {
  EXPECT_THROW((void)read_scene(std::filesystem::temp_directory_path() / "no-such-scene.yaml"),
               InputError);
}

}  // namespace
}  // namespace rondel::scene
