#include "vision/scene/world.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <numbers>

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

bool on_lane(const Lane& lane, double x, double y) {
  const double reach2 = 0.25 * lane.width_m * lane.width_m;
  for (std::size_t k = 1; k < lane.points.size(); ++k) {
    const FloorPoint a = lane.points[k - 1];
    const FloorPoint b = lane.points[k];
    const double ex = b.x_m - a.x_m;
    const double ey = b.y_m - a.y_m;
    const double px = x - a.x_m;
    const double py = y - a.y_m;
    const double along = std::clamp((px * ex + py * ey) / (ex * ex + ey * ey), 0.0, 1.0);
    const double ox = px - along * ex;
    const double oy = py - along * ey;
    if (ox * ox + oy * oy <= reach2) return true;
  }
  return false;
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

Block board(const Wall& wall) {
  const double dx = wall.to.x_m - wall.from.x_m;
  const double dy = wall.to.y_m - wall.from.y_m;
  const double size = std::hypot(dx, dy);
  return {{0.5 * (wall.from.x_m + wall.to.x_m), 0.5 * (wall.from.y_m + wall.to.y_m), wall.lift_m},
          0.5 * size,
          0.5 * wall.thickness_m,
          wall.height_m,
          dx / size,
          dy / size};
}

}  // namespace

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
  double left = 1.0;
  const auto shade = [&](const Ball& bound, auto blocked, bool is_ball) {
    const Vec3 w = bound.centre - at;
    const double ahead = dot(w, to);
    if (ahead <= 0.0 || ahead > d + bound.radius) return;
    const double far2 = dot(w, w);
    // Off the line by more than the thing and the light's own cone: no shadow.
    const double room = bound.radius + ahead * light;
    if (far2 - ahead * ahead >= room * room) return;
    const double far = std::sqrt(far2);
    if (is_ball) {
      const double apart = std::acos(std::clamp(ahead / far, -1.0, 1.0));
      const double thing = std::asin(std::clamp(bound.radius / far, 0.0, 1.0));
      left *= uncovered(apart, thing, std::max(light, 1e-4));
      return;
    }
    // Twelve points over the light (a sunflower), exactly.
    const Vec3 side = unit(std::abs(to.z) < 0.9 ? cross(to, kUp) : cross(to, {1.0, 0.0, 0.0}));
    const Vec3 up = cross(side, to);
    constexpr int kPoints = 12;
    int open = 0;
    for (int k = 0; k < kPoints; ++k) {
      const double r = source.radius * std::sqrt((k + 0.5) / kPoints);
      const double turn = 2.399963229728653 * k;
      const Vec3 aim = v + r * std::cos(turn) * side + r * std::sin(turn) * up;
      if (!blocked(unit(aim))) ++open;
    }
    left *= static_cast<double>(open) / kPoints;
  };
  const Vec3 lifted = at + 1e-6 * to;
  for (std::size_t k = 0; k < solids_.size() && left > 0.0; ++k) {
    if (static_cast<int>(k) == own_solid) continue;
    const Thing& thing = solids_[k];
    shade(
        thing.bound,
        [&](Vec3 aim) {
          Meeting meeting;
          meeting.t = d;
          return std::visit([&](const auto& shape) { return meet(shape, lifted, aim, meeting); },
                            thing.shape);
        },
        std::holds_alternative<Ball>(thing.shape));
  }
  if (own_solid != -2) {
    shade(
        around(robot_),
        [&](Vec3 aim) {
          Meeting meeting;
          meeting.t = d;
          return meet(robot_, lifted, aim, meeting);
        },
        false);
  }
  return left;
}

double World::open_sky(Vec3 at, Vec3 normal, int own_solid) const {
  double open = 1.0;
  // Share of the cosine-weighted sky that a long wall of height h hides at distance x, times the
  // share of the half-circle that its width fills.
  const auto upright = [&](double x, double half_width, double h) {
    const double near = std::max(x, 1e-4);
    const double hidden =
        0.5 * (1.0 - near / std::hypot(near, h)) * (2.0 / kPi) * std::atan2(half_width, near);
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
        const double x = std::hypot(at.x - can->foot.x, at.y - can->foot.y) - can->radius;
        upright(x, can->radius, can->height + can->foot.z - at.z);
      } else {
        const Block& block = std::get<Block>(thing.shape);
        const double wx = at.x - block.foot.x;
        const double wy = at.y - block.foot.y;
        const double lx = std::abs(block.cos_turn * wx + block.sin_turn * wy);
        const double ly = std::abs(-block.sin_turn * wx + block.cos_turn * wy);
        const double x =
            std::hypot(std::max(0.0, lx - block.half_length), std::max(0.0, ly - block.half_width));
        upright(
            x, std::max(block.half_length, block.half_width), block.height + block.foot.z - at.z);
      }
    }
  }
  if (own_solid != -2 && normal.z > 0.5) {
    const double x = std::hypot(at.x - robot_.foot.x, at.y - robot_.foot.y) - robot_.radius;
    upright(x, robot_.radius, robot_.height - at.z);
  }
  return open;
}

Vec3 World::irradiance(Vec3 at, Vec3 normal, int own_solid) const {
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
    sum += (lit(at, source, own_solid) * facing * from / d2) * source.intensity;
  }
  const double up = 0.5 + 0.5 * normal.z;
  const double sky = open_sky(at, normal, own_solid);
  return sum + sky * (up * ambient_ + (1.0 - up) * (bounce_ + 0.3 * ambient_));
}

Vec3 World::highlight(Vec3 at, Vec3 normal, Vec3 towards, double gloss) const {
  Vec3 sum;
  if (gloss <= 0.0) return sum;
  const double sharp = 30.0 + 90.0 * gloss;
  for (const Source& source : sources_) {
    const Vec3 v = source.at - at;
    const double d2 = dot(v, v);
    const double d = std::sqrt(d2);
    const double facing = dot(v, normal) / d;
    const double from = -dot(v, source.axis) / d;
    if (facing <= 0.0 || from <= 0.0) continue;
    const Vec3 half = unit((1.0 / d) * v - towards);
    const double lobe = std::pow(std::max(0.0, dot(half, normal)), sharp);
    if (lobe < 1e-4) continue;
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
  for (const Lane& lane : floor.lanes) {
    if (on_lane(lane, x, y)) {
      albedo = lane.albedo;
      contrast = 0.4;
    }
  }
  if (floor.texture > 0.0) {
    double sum = 0.0;
    double period = floor.grain_m;
    for (int octave = 0; octave < 4; ++octave, period *= 5.0) {
      // A patch averages what is finer than itself.
      const double weight = period / std::hypot(period, 1.5 * footprint_m);
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
