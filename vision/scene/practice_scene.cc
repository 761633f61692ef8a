#include <fmt/format.h>

#include <cmath>
#include <numbers>

#include "vision/scene/noise.h"
#include "vision/scene/scene.h"

namespace rondel::scene {
namespace {

SceneObject ball(const std::string& name, double diameter_m, Material material) {
  SceneObject object;
  object.name = name;
  object.solid = Solid::ball;
  object.diameter_m = diameter_m;
  object.material = material;
  return object;
}

SceneObject box(
    const std::string& name, double length_m, double width_m, double height_m, Material material) {
  SceneObject object;
  object.name = name;
  object.solid = Solid::box;
  object.length_m = length_m;
  object.width_m = width_m;
  object.height_m = height_m;
  object.material = material;
  return object;
}

/// Lanes, boards, posters and doors of the practice hall.
void furnish(Scene& scene) {
  const Vec3 paint = srgb(226, 226, 220);
  const auto line = [&](FloorPoint a, FloorPoint b, double width_m) {
    scene.floor.lanes.push_back({{a, b}, width_m, paint});
  };
  line({-1.35, -0.85}, {1.35, -0.85}, 0.03);
  line({1.35, -0.85}, {1.35, 0.85}, 0.03);
  line({1.35, 0.85}, {-1.35, 0.85}, 0.03);
  line({-1.35, 0.85}, {-1.35, -0.85}, 0.03);
  line({0.0, -0.85}, {0.0, 0.85}, 0.03);
  Lane ring{{}, 0.03, paint};
  for (int k = 0; k <= 48; ++k) {
    const double t = 2.0 * std::numbers::pi * k / 48;
    ring.points.push_back({0.35 * std::cos(t), 0.35 * std::sin(t)});
  }
  scene.floor.lanes.push_back(ring);
  for (const double side : {-1.0, 1.0}) {
    line({side * 1.35, -0.32}, {side * 1.05, -0.32}, 0.03);
    line({side * 1.05, -0.32}, {side * 1.05, 0.32}, 0.03);
    line({side * 1.05, 0.32}, {side * 1.35, 0.32}, 0.03);
  }
  Wall board;
  board.height_m = 0.14;
  board.material = {srgb(178, 176, 168), 0.1};
  const FloorPoint corners[] = {{-1.52, -1.02}, {1.52, -1.02}, {1.52, 1.02}, {-1.52, 1.02}};
  for (int k = 0; k < 4; ++k) {
    board.from = corners[k];
    board.to = corners[(k + 1) % 4];
    scene.walls.push_back(board);
  }
  const auto panel = [&](FloorPoint a, FloorPoint b, double lift, double height, Vec3 albedo) {
    Wall wall;
    wall.from = a;
    wall.to = b;
    wall.lift_m = lift;
    wall.height_m = height;
    wall.thickness_m = 0.04;
    wall.material = {albedo, 0.05};
    scene.walls.push_back(wall);
  };
  panel({3.98, -1.6}, {3.98, -0.7}, 0.0, 2.05, srgb(120, 92, 66));
  panel({-3.98, 0.4}, {-3.98, 1.6}, 1.0, 0.9, srgb(52, 74, 92));
  panel({-2.0, -2.98}, {-0.8, -2.98}, 1.1, 0.8, srgb(196, 190, 176));
  panel({0.9, -2.98}, {2.1, -2.98}, 0.0, 1.1, srgb(104, 100, 94));
  panel({-3.0, -1.6}, {-2.4, -1.9}, 0.68, 0.04, srgb(168, 140, 104));
}

}  // namespace

Scene practice_scene(const SceneRig& rig, unsigned seed, int frames_per_light) {
  Scene scene;
  scene.name = fmt::format("practice {}", seed);
  scene.seed = seed;
  scene.rig = rig;
  // Posts, ring and plate fit the mirror's size.
  const double scale = rig.rim_radius_m / 0.030;
  scene.robot.holder_radius_m = rig.rim_radius_m + 0.0045 * scale;
  for (Post& post : scene.robot.posts) post.distance_m = 0.041 * scale;
  scene.robot.plate_below_eye_m = std::min(0.045, 0.28 * rig.eye_height_m);
  scene.robot.parts = {{{0.052, 0.0}, 0.0, 0.018, 0.046, 0.014, {srgb(38, 62, 112), 0.2}},
                       {{-0.050, 0.022}, 0.5, 0.022, 0.016, 0.008, {srgb(190, 188, 180), 0.1}},
                       {{-0.046, -0.030}, -0.4, 0.012, 0.020, 0.006, {srgb(28, 96, 52), 0.2}}};
  furnish(scene);

  const Material orange{srgb(236, 104, 22), 0.6};
  const Material teal{srgb(0, 128, 124), 0.25};
  const Material violet{srgb(104, 58, 150), 0.25};
  const Material dark{srgb(34, 34, 38), 0.3};
  for (int k = 0; k < 4; ++k) scene.objects.push_back(ball("buoy", 0.074, orange));
  scene.objects.push_back(box("dock_teal", 0.20, 0.10, 0.16, teal));
  scene.objects.push_back(box("dock_violet", 0.20, 0.10, 0.16, violet));
  for (int k = 0; k < 2; ++k) {
    SceneObject tug;
    tug.solid = Solid::cylinder;
    tug.diameter_m = 0.18;
    tug.height_m = 0.17;
    tug.material = dark;
    scene.objects.push_back(tug);
  }
  SceneObject legs;
  legs.solid = Solid::cylinder;
  legs.diameter_m = 0.16;
  legs.height_m = 0.85;
  legs.material = {srgb(44, 50, 66), 0.0};
  for (const FloorPoint at : {FloorPoint{-0.4, 1.55}, FloorPoint{-0.16, 1.62}}) {
    legs.at = at;
    scene.objects.push_back(legs);
  }

  for (std::size_t k = 0; k < scene.objects.size(); ++k) {
    scene.objects[k].id = fmt::format("thing_{}", k + 1);
  }

  Light noon;
  noon.name = "noon";
  noon.windows.push_back({{-2.6, 3.0}, {2.2, 3.0}, 0.9, 2.3, 1500.0, 6200.0});
  noon.lamps = {{{-1.0, 0.0, 2.85}, 0.22, 90.0, 4000.0}, {{1.2, 0.0, 2.85}, 0.22, 90.0, 4000.0}};
  noon.ambient_lux = 130.0;
  noon.ambient_kelvin = 5200.0;
  noon.exposure_lux = 1000.0;
  noon.white_kelvin = 5600.0;
  Light dusk;
  dusk.name = "dusk";
  dusk.windows.push_back({{-2.6, 3.0}, {2.2, 3.0}, 0.9, 2.3, 150.0, 9000.0});
  dusk.lamps = {{{-1.0, 0.0, 2.85}, 0.22, 130.0, 3000.0}, {{1.2, 0.0, 2.85}, 0.22, 130.0, 3000.0}};
  dusk.ambient_lux = 40.0;
  dusk.ambient_kelvin = 3600.0;
  dusk.exposure_lux = 420.0;
  dusk.white_kelvin = 4000.0;
  Light lamps;
  lamps.name = "lamps";
  lamps.lamps = {{{-1.2, -0.9, 2.85}, 0.20, 190.0, 4000.0},
                 {{1.2, -0.9, 2.85}, 0.20, 190.0, 4000.0},
                 {{-1.2, 1.1, 2.85}, 0.20, 190.0, 4000.0},
                 {{1.2, 1.1, 2.85}, 0.20, 190.0, 4000.0}};
  lamps.ambient_lux = 90.0;
  lamps.ambient_kelvin = 3900.0;
  lamps.exposure_lux = 850.0;
  lamps.white_kelvin = 4200.0;
  lamps.white_error_blue = 0.95;
  scene.lights = {noon, dusk, lamps};

  // Places on the mat apart from each other and from the robot, drawn again until they fit.
  std::uint64_t draw = 0;
  const auto random = [&](double low, double high) {
    return low + (high - low) * uniform(mix(seed) ^ 0x5CE4EULL, draw++);
  };
  for (std::size_t light = 0; light < scene.lights.size(); ++light) {
    for (int k = 0; k < frames_per_light; ++k) {
      SceneFrame frame;
      frame.image = fmt::format("frames/{}/{:04}.png", scene.lights[light].name, k + 1);
      frame.light = light;
      frame.pose = {random(-0.9, 0.9), random(-0.5, 0.5), random(-3.14, 3.14)};
      std::vector<FloorPoint> taken = {{frame.pose.x_m, frame.pose.y_m}};
      std::vector<double> room = {0.14};
      for (std::size_t object = 0; object < 8; ++object) {
        const SceneObject& thing = scene.objects[object];
        const double size =
            thing.solid == Solid::box ? 0.5 * thing.length_m : 0.5 * thing.diameter_m;
        for (int attempt = 0; attempt < 200; ++attempt) {
          const FloorPoint at{random(-1.3, 1.3), random(-0.8, 0.8)};
          bool free = true;
          for (std::size_t j = 0; j < taken.size(); ++j) {
            free = free &&
                   std::hypot(at.x_m - taken[j].x_m, at.y_m - taken[j].y_m) > size + room[j] + 0.06;
          }
          if (!free) continue;
          taken.push_back(at);
          room.push_back(size);
          frame.moves.push_back({object, at, random(-1.57, 1.57), false});
          break;
        }
      }
      scene.frames.push_back(frame);
    }
  }
  return scene;
}

}  // namespace rondel::scene
