#include "vision/scene/world.h"

#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <numbers>
#include <type_traits>
#include <utility>

#include "vision/scene/light_colour.h"
#include "vision/scene/noise.h"

namespace rondel::scene {
namespace {

constexpr double kPi = std::numbers::pi;
constexpr int kFloor = 0;
constexpr int kWalls = 1;  // 1..4
constexpr int kCeiling = 5;
constexpr int kSolids = 6;

constexpr Vec3 kUp{0.0, 0.0, 1.0};

/// Smooth noise with period 1, about -1..1, variance about 0.1.
double grain(std::uint64_t seed, double x, double y) {
  const double fx = std::floor(x);
  const double fy = std::floor(y);
  const double tx = x - fx;
  const double ty = y - fy;
  const auto ix = static_cast<std::int64_t>(fx);
  const auto iy = static_cast<std::int64_t>(fy);
  const auto corner = [&](std::int64_t dx, std::int64_t dy) {
    const std::uint64_t key = seed ^ (static_cast<std::uint64_t>(ix + dx) * 0x9E3779B97F4A7C15ULL) ^
                              (static_cast<std::uint64_t>(iy + dy) * 0xC2B2AE3D27D4EB4FULL);
    return static_cast<double>(mix(key) >> 40U) * 0x1.0p-23 - 1.0;
  };
  const double sx = tx * tx * (3.0 - 2.0 * tx);
  const double sy = ty * ty * (3.0 - 2.0 * ty);
  const double low = (1.0 - sx) * corner(0, 0) + sx * corner(1, 0);
  const double high = (1.0 - sx) * corner(0, 1) + sx * corner(1, 1);
  return (1.0 - sy) * low + sy * high;
}

/// How much of a round light of angular radius `light` a round thing of angular radius `thing`
/// leaves, `apart` from it (all rad, small).
double uncovered(double apart, double thing, double light) {
  const double touch = thing + light;
  if (apart >= touch) return 1.0;
  const double inside = std::abs(thing - light);
  const double most = std::min(1.0, thing * thing / (light * light));
  if (apart <= inside) return 1.0 - most;
  const double t = (touch - apart) / (touch - inside);
  return 1.0 - most * t * t * (3.0 - 2.0 * t);
}

/// Twelve places evenly over the unit disc: how much of a round light a thing leaves.
const std::array<std::pair<double, double>, 12> kSunflower = [] {
  std::array<std::pair<double, double>, 12> points;
  for (std::size_t k = 0; k < points.size(); ++k) {
    const double r = std::sqrt((static_cast<double>(k) + 0.5) / points.size());
    const double turn = 2.399963229728653 * static_cast<double>(k);
    points[k] = {r * std::cos(turn), r * std::sin(turn)};
  }
  return points;
}();

/// The hypotenuse; std::hypot guards against overflow at ten times the cost.
double size(double a, double b) { return std::sqrt(a * a + b * b); }

/// Distance on the floor from a thing's footprint, 0 inside.
double distance_from(const Can& can, Vec3 at) {
  return std::max(0.0, size(at.x - can.foot.x, at.y - can.foot.y) - can.radius);
}
double distance_from(const Block& block, Vec3 at) {
  const double wx = at.x - block.foot.x;
  const double wy = at.y - block.foot.y;
  const double lx = std::abs(block.cos_turn * wx + block.sin_turn * wy);
  const double ly = std::abs(-block.sin_turn * wx + block.cos_turn * wy);
  return size(std::max(0.0, lx - block.half_length), std::max(0.0, ly - block.half_width));
}

Block board(const Wall& wall) {
  const double dx = wall.to.x_m - wall.from.x_m;
  const double dy = wall.to.y_m - wall.from.y_m;
  const double run = size(dx, dy);
  return {{0.5 * (wall.from.x_m + wall.to.x_m), 0.5 * (wall.from.y_m + wall.to.y_m), wall.lift_m},
          0.5 * run,
          0.5 * wall.thickness_m,
          wall.height_m,
          dx / run,
          dy / run};
}

}  // namespace

bool World::Stroke::covers(double x, double y) const {
  const double px = x - at.x_m;
  const double py = y - at.y_m;
  const double off = px * along_y - py * along_x;
  if (off * off > half_width_m * half_width_m) return false;
  const double along = std::clamp(px * along_x + py * along_y, 0.0, length_m);
  const double ox = px - along * along_x;
  const double oy = py - along * along_y;
  return ox * ox + oy * oy <= half_width_m * half_width_m;
}

World::World(const Scene& scene, const SceneFrame& frame)
    : scene_{scene}, objects_{scene.objects}, away_(scene.objects.size(), false) {
  for (const Move& move : frame.moves) {
    SceneObject& object = objects_[move.object];
    object.at = move.at;
    object.turn_rad = move.turn_rad;
    away_[move.object] = move.away;
  }
  for (std::size_t k = 0; k < objects_.size(); ++k) {
    if (away_[k]) continue;
    const SceneObject& object = objects_[k];
    Thing thing;
    thing.material = object.material;
    thing.object = object.name.empty() ? -1 : static_cast<int>(k);
    thing.shows = object.name.empty() ? PixelClass::scenery : PixelClass::object;
    const Vec3 foot{object.at.x_m, object.at.y_m, 0.0};
    const double radius = 0.5 * object.diameter_m;
    if (object.solid == Solid::ball) {
      thing.shape = Ball{foot + radius * kUp, radius};
    } else if (object.solid == Solid::cylinder) {
      thing.shape = Can{foot, radius, object.height_m};
    } else {
      thing.shape = Block{foot,
                          0.5 * object.length_m,
                          0.5 * object.width_m,
                          object.height_m,
                          std::cos(object.turn_rad),
                          std::sin(object.turn_rad)};
    }
    solids_.push_back(thing);
  }
  for (const Wall& wall : scene.walls) {
    Thing thing;
    thing.shape = board(wall);
    thing.material = wall.material;
    solids_.push_back(thing);
  }
  for (Thing& thing : solids_) {
    thing.bound = std::visit([](const auto& shape) { return around(shape); }, thing.shape);
  }

  for (const Lane& lane : scene.floor.lanes) {
    for (std::size_t k = 1; k < lane.points.size(); ++k) {
      const FloorPoint a = lane.points[k - 1];
      const double dx = lane.points[k].x_m - a.x_m;
      const double dy = lane.points[k].y_m - a.y_m;
      const double run = size(dx, dy);
      if (run == 0.0) continue;
      strokes_.push_back({a, dx / run, dy / run, run, 0.5 * lane.width_m, lane.albedo});
    }
  }

  robot_ = {{frame.pose.x_m, frame.pose.y_m, 0.0},
            scene.robot.plate_radius_m,
            scene.rig.eye_height_m - scene.robot.plate_below_eye_m};

  const Light& light = scene.lights.at(frame.light);
  exposure_ = std::exp2(light.stops) / light.exposure_lux;
  ambient_ = light.ambient_lux * light_colour(light.ambient_kelvin);
  for (const Lamp& lamp : light.lamps) {
    const double square = lamp.at.z * lamp.at.z + lamp.radius_m * lamp.radius_m;
    const Vec3 intensity = lamp.lux * square * light_colour(lamp.kelvin);
    sources_.push_back({lamp.at, -kUp, intensity, lamp.radius_m});
    discs_.push_back(
        {lamp.at, lamp.radius_m, (exposure_ / (lamp.radius_m * lamp.radius_m)) * intensity});
  }
  for (const Window& window : light.windows) {
    Pane pane;
    pane.corner = {window.from.x_m, window.from.y_m, 0.0};
    const Vec3 to{window.to.x_m, window.to.y_m, 0.0};
    pane.width = length(to - pane.corner);
    pane.across = unit(to - pane.corner);
    pane.low = window.sill_m;
    pane.top = window.top_m;
    const Vec3 middle{0.5 * (scene.hall.low.x_m + scene.hall.high.x_m),
                      0.5 * (scene.hall.low.y_m + scene.hall.high.y_m),
                      0.0};
    pane.normal = {-pane.across.y, pane.across.x, 0.0};
    if (dot(pane.normal, middle - pane.corner) < 0.0) pane.normal = -pane.normal;
    const int columns = std::clamp(static_cast<int>(std::lround(pane.width / 0.7)), 1, 6);
    const int rows = 2;
    const double area = pane.width * (pane.top - pane.low) / (columns * rows);
    std::vector<Source> pieces;
    double there = 0.0;  // on an upright surface a metre before the middle, per unit of intensity
    const Vec3 probe = pane.corner + 0.5 * pane.width * pane.across + pane.normal +
                       0.5 * (pane.low + pane.top) * kUp;
    for (int i = 0; i < columns; ++i) {
      for (int j = 0; j < rows; ++j) {
        Source piece;
        piece.at = pane.corner + ((i + 0.5) / columns) * pane.width * pane.across +
                   (pane.low + (j + 0.5) / rows * (pane.top - pane.low)) * kUp;
        piece.axis = pane.normal;
        piece.radius = std::sqrt(area / kPi);
        const Vec3 v = probe - piece.at;
        const double d = length(v);
        there += std::pow(dot(v, pane.normal) / d, 2.0) / (d * d);
        pieces.push_back(piece);
      }
    }
    const Vec3 intensity = (window.lux / there) * light_colour(window.kelvin);
    for (Source& piece : pieces) {
      piece.intensity = intensity;
      sources_.push_back(piece);
    }
    pane.radiance = (exposure_ * kPi / area) * intensity;
    panes_.push_back(pane);
  }
  // Light that comes back from the floor around the robot.
  const Vec3 here{frame.pose.x_m, frame.pose.y_m, 0.0};
  Vec3 direct;
  for (const Source& source : sources_) {
    const Vec3 v = source.at - here;
    const double d2 = dot(v, v);
    const double cosines = std::max(0.0, v.z) * std::max(0.0, -dot(v, source.axis)) / d2;
    direct += (cosines / d2) * source.intensity;
  }
  bounce_ = scene.floor.mat.albedo * (direct + ambient_);
}

Sight World::look(Vec3 from, Vec3 towards) const {
  Meeting meeting;
  int solid = -1;
  for (std::size_t k = 0; k < solids_.size(); ++k) {
    const Thing& thing = solids_[k];
    if (!may_touch(thing.bound, from, towards)) continue;
    if (std::visit([&](const auto& shape) { return meet(shape, from, towards, meeting); },
                   thing.shape)) {
      solid = static_cast<int>(k);
    }
  }
  // The hall from inside: the first plane left.
  const Hall& hall = scene_.hall;
  double t = std::numeric_limits<double>::infinity();
  int surface = kFloor;
  Vec3 normal = kUp;
  const auto plane = [&](double start, double step, double low, double high, int id, Vec3 axis) {
    if (step == 0.0) return;
    const double at = ((step > 0.0 ? high : low) - start) / step;
    if (at >= t) return;
    t = std::max(0.0, at);
    surface = id + (step > 0.0 ? 1 : 0);
    normal = step > 0.0 ? -axis : axis;
  };
  plane(from.x, towards.x, hall.low.x_m, hall.high.x_m, kWalls, {1.0, 0.0, 0.0});
  plane(from.y, towards.y, hall.low.y_m, hall.high.y_m, kWalls + 2, {0.0, 1.0, 0.0});
  if (towards.z != 0.0) {
    const double at = ((towards.z > 0.0 ? hall.height_m : 0.0) - from.z) / towards.z;
    if (at < t) {
      t = std::max(0.0, at);
      surface = towards.z > 0.0 ? kCeiling : kFloor;
      normal = towards.z > 0.0 ? -kUp : kUp;
    }
  }
  Sight sight;
  if (solid >= 0 && meeting.t < t) {
    const Thing& thing = solids_[static_cast<std::size_t>(solid)];
    sight.t = meeting.t;
    sight.normal = meeting.normal;
    sight.face = meeting.face;
    sight.surface = kSolids + solid;
    sight.solid = solid;
    sight.shows = thing.shows;
  } else {
    sight.t = t;
    sight.normal = normal;
    sight.face = 1;
    sight.surface = surface;
    sight.shows = surface == kFloor ? PixelClass::floor : PixelClass::wall;
  }
  sight.at = from + sight.t * towards;
  return sight;
}

std::uint64_t World::named_ahead(Vec3 from, Vec3 towards) const {
  std::uint64_t ahead = 0;
  for (const Thing& thing : solids_) {
    if (thing.object < 0 || !may_touch(thing.bound, from, towards)) continue;
    Meeting meeting;
    if (std::visit([&](const auto& shape) { return meet(shape, from, towards, meeting); },
                   thing.shape)) {
      ahead |= std::uint64_t{1} << static_cast<unsigned>(thing.object);
    }
  }
  return ahead;
}

double World::lit(Vec3 at, const Source& source, int own_solid) const {
  const Vec3 v = source.at - at;
  const double d = length(v);
  const Vec3 to = (1.0 / d) * v;
  const double light = source.radius / d;
  const double lowest = v.z - source.radius;
  const double level = size(v.x, v.y) + source.radius;
  double left = 1.0;
  // Lines to the light are below the height of a thing only this near, seen from above.
  const auto too_far = [&](const auto& shape) {
    const double above = shape.foot.z + shape.height - at.z;
    if (above <= 0.0) return true;
    return lowest > above && distance_from(shape, at) * lowest > above * level;
  };
  const auto shade = [&](const Ball& bound, const auto& shape) {
    const Vec3 w = bound.centre - at;
    const double ahead = dot(w, to);
    if (ahead <= 0.0 || ahead > d + bound.radius) return;
    const double far2 = dot(w, w);
    // Off the line by more than the thing and the light's own cone: no shadow.
    const double room = bound.radius + ahead * light;
    if (far2 - ahead * ahead >= room * room) return;
    if constexpr (std::is_same_v<std::decay_t<decltype(shape)>, Ball>) {
      const double far = std::sqrt(far2);
      const double apart = std::acos(std::clamp(ahead / far, -1.0, 1.0));
      const double thing = std::asin(std::clamp(bound.radius / far, 0.0, 1.0));
      left *= uncovered(apart, thing, std::max(light, 1e-4));
    } else {
      if (too_far(shape)) return;
      const Vec3 lifted = at + 1e-6 * to;
      const Vec3 side = unit(std::abs(to.z) < 0.9 ? cross(to, kUp) : cross(to, {1.0, 0.0, 0.0}));
      const Vec3 up = cross(side, to);
      int open = 0;
      for (const auto& [across, upwards] : kSunflower) {
        Meeting meeting;
        meeting.t = d;
        const Vec3 aim = v + source.radius * across * side + source.radius * upwards * up;
        if (!meet(shape, lifted, unit(aim), meeting)) ++open;
      }
      left *= static_cast<double>(open) / static_cast<double>(kSunflower.size());
    }
  };
  for (std::size_t k = 0; k < solids_.size() && left > 0.0; ++k) {
    if (static_cast<int>(k) == own_solid) continue;
    const Thing& thing = solids_[k];
    std::visit([&](const auto& shape) { shade(thing.bound, shape); }, thing.shape);
  }
  if (own_solid != -2) shade(around(robot_), robot_);
  return left;
}

double World::open_sky(Vec3 at, Vec3 normal, int own_solid) const {
  double open = 1.0;
  // Share of the cosine-weighted sky that a long wall of height h hides at distance x, times the
  // share of the half-circle that its width fills.
  const auto upright = [&](double x, double half_width, double h) {
    const double near = std::max(x, 1e-4);
    const double hidden =
        0.5 * (1.0 - near / size(near, h)) * (2.0 / kPi) * std::atan2(half_width, near);
    open *= 1.0 - hidden;
  };
  for (std::size_t k = 0; k < solids_.size(); ++k) {
    if (static_cast<int>(k) == own_solid) continue;
    const Thing& thing = solids_[k];
    const Vec3 v = thing.bound.centre - at;
    const double d2 = dot(v, v);
    const double r2 = thing.bound.radius * thing.bound.radius;
    if (d2 > 60.0 * r2) continue;
    if (const auto* ball = std::get_if<Ball>(&thing.shape)) {
      const double d = std::sqrt(std::max(d2, ball->radius * ball->radius));
      const double up = dot(normal, v) / d;
      // A ball fills (r/d)^2 of the cosine-weighted sky in its direction.
      open *= 1.0 - std::max(0.0, up) * r2 / (d * d);
    } else if (normal.z > 0.5) {
      if (const auto* can = std::get_if<Can>(&thing.shape)) {
        upright(distance_from(*can, at), can->radius, can->height + can->foot.z - at.z);
      } else {
        const Block& block = std::get<Block>(thing.shape);
        upright(distance_from(block, at),
                std::max(block.half_length, block.half_width),
                block.height + block.foot.z - at.z);
      }
    }
  }
  if (own_solid != -2 && normal.z > 0.5) {
    upright(distance_from(robot_, at), robot_.radius, robot_.height - at.z);
  }
  return open;
}

Vec3 World::irradiance(Vec3 at, Vec3 normal, int own_solid, bool shadows) const {
  Vec3 sum;
  for (const Source& source : sources_) {
    const Vec3 v = source.at - at;
    const double d2 = dot(v, v);
    // A light as wide as it is near wraps around the horizon a little.
    const double d = std::sqrt(d2);
    const double wrap = 0.5 * source.radius / d;
    const double facing = (dot(v, normal) / d + wrap) / (1.0 + wrap);
    const double from = -dot(v, source.axis) / d;
    if (facing <= 0.0 || from <= 0.0) continue;
    const double open = shadows ? lit(at, source, own_solid) : 1.0;
    sum += (open * facing * from / d2) * source.intensity;
  }
  const double up = 0.5 + 0.5 * normal.z;
  const double sky = shadows ? open_sky(at, normal, own_solid) : 1.0;
  return sum + sky * (up * ambient_ + (1.0 - up) * (bounce_ + 0.3 * ambient_));
}

Vec3 World::highlight(Vec3 at, Vec3 normal, Vec3 towards, double gloss) const {
  Vec3 sum;
  if (gloss <= 0.0) return sum;
  const double sharp = 30.0 + 90.0 * gloss;
  const double least = std::pow(1e-4, 1.0 / sharp);
  for (const Source& source : sources_) {
    const Vec3 v = source.at - at;
    const double d2 = dot(v, v);
    const double d = std::sqrt(d2);
    const double facing = dot(v, normal) / d;
    const double from = -dot(v, source.axis) / d;
    if (facing <= 0.0 || from <= 0.0) continue;
    const Vec3 half = unit((1.0 / d) * v - towards);
    const double cosine = dot(half, normal);
    if (cosine < least) continue;
    const double lobe = std::pow(cosine, sharp);
    sum += (lobe * (sharp + 8.0) / 8.0 * facing * from / d2) * source.intensity;
  }
  return (0.06 * gloss * exposure_) * sum;
}

Vec3 World::floor_albedo(double x, double y, double footprint_m) const {
  const Floor& floor = scene_.floor;
  const bool mat = x > floor.mat_low.x_m && x < floor.mat_high.x_m && y > floor.mat_low.y_m &&
                   y < floor.mat_high.y_m;
  Vec3 albedo = mat ? floor.mat.albedo : floor.hall.albedo;
  double contrast = 1.0;
  for (const Stroke& stroke : strokes_) {
    if (stroke.covers(x, y)) {
      albedo = stroke.albedo;
      contrast = 0.4;
    }
  }
  if (floor.texture > 0.0) {
    double sum = 0.0;
    double period = floor.grain_m;
    for (int octave = 0; octave < 4; ++octave, period *= 5.0) {
      // A patch averages what is finer than itself.
      const double weight = period / size(period, 1.5 * footprint_m);
      if (weight < 0.1) continue;
      sum +=
          weight * grain(scene_.seed + 17U * static_cast<unsigned>(octave), x / period, y / period);
    }
    albedo = std::max(0.1, 1.0 + contrast * floor.texture * 1.6 * sum) * albedo;
  }
  return albedo;
}

Vec3 World::albedo(const Sight& sight, double footprint_m) const {
  if (sight.solid >= 0) return solids_[static_cast<std::size_t>(sight.solid)].material.albedo;
  if (sight.surface == kFloor) return floor_albedo(sight.at.x, sight.at.y, footprint_m);
  if (sight.surface == kCeiling) return scene_.hall.ceiling.albedo;
  return sight.at.z < scene_.hall.skirting_m ? scene_.hall.skirting : scene_.hall.walls.albedo;
}

double World::gloss(const Sight& sight) const {
  if (sight.solid >= 0) return solids_[static_cast<std::size_t>(sight.solid)].material.gloss;
  if (sight.surface != kFloor) return 0.0;
  const Floor& floor = scene_.floor;
  const bool mat = sight.at.x > floor.mat_low.x_m && sight.at.x < floor.mat_high.x_m &&
                   sight.at.y > floor.mat_low.y_m && sight.at.y < floor.mat_high.y_m;
  return mat ? floor.mat.gloss : floor.hall.gloss;
}

Vec3 World::emission(Vec3 from, Vec3 towards, const Sight& sight) const {
  if (towards.z > 0.0) {
    for (const Disc& disc : discs_) {
      const double t = (disc.at.z - from.z) / towards.z;
      if (t <= 0.0 || t > sight.t + 1e-6) continue;
      const double x = from.x + t * towards.x - disc.at.x;
      const double y = from.y + t * towards.y - disc.at.y;
      if (x * x + y * y <= disc.radius * disc.radius) return disc.radiance;
    }
  }
  if (sight.surface >= kWalls && sight.surface < kCeiling) {
    for (const Pane& pane : panes_) {
      const Vec3 v = sight.at - pane.corner;
      if (std::abs(dot(v, pane.normal)) > 0.05 || sight.at.z < pane.low || sight.at.z > pane.top) {
        continue;
      }
      const double across = dot(v, pane.across);
      if (across < 0.0 || across > pane.width) continue;
      // Glazing bars.
      const double bays = std::max(1.0, std::round(pane.width / 0.9));
      const double in_bay = across / pane.width * bays;
      const double edge = std::abs(in_bay - std::round(in_bay)) * pane.width / bays;
      const double middle = std::abs(sight.at.z - (pane.low + 0.6 * (pane.top - pane.low)));
      if (edge < 0.03 || middle < 0.02) return {};
      return pane.radiance;
    }
  }
  return {};
}

}  // namespace rondel::scene
