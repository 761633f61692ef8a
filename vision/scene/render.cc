#include "vision/scene/render.h"

#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <functional>
#include <numbers>
#include <opencv2/imgcodecs.hpp>
#include <thread>
#include <utility>

#include "vision/scene/body.h"
#include "vision/scene/mirror.h"
#include "vision/scene/noise.h"
#include "vision/scene/world.h"

namespace rondel::scene {
namespace {

constexpr std::size_t kMostObjects = 64;

/// Rows [0, rows) shared out to threads; every row is somebody's, whoever's it is.
void for_rows(int rows, int threads, const std::function<void(int first, int end)>& work) {
  const int count = std::clamp(threads, 1, std::max(1, rows));
  std::vector<std::thread> others;
  for (int k = 1; k < count; ++k) {
    others.emplace_back(work, rows * k / count, rows * (k + 1) / count);
  }
  work(0, rows / count);
  for (std::thread& other : others) other.join();
}

/// What one ray of the camera shows.
struct Ray {
  PixelClass shows = PixelClass::beyond;
  int object = -1;          ///< named object seen, index into Scene::objects
  std::uint64_t ahead = 0;  ///< named objects that stand on the ray, hidden or not
};

/// Sums over a share of the rows, of one named object.
struct Tally {
  std::int64_t seen = 0;
  std::int64_t ahead = 0;
  double u = 0.0;
  double v = 0.0;
  int u_low = 0;
  int u_high = -1;
  int v_low = 0;
  int v_high = -1;
};

class Tracer {
 public:
  Tracer(const Scene& scene, std::size_t frame)
      : scene_{scene},
        frame_{scene.frames.at(frame)},
        mirror_{scene.rig},
        chassis_from_camera_{rotation_by({0.0, 0.0, scene.rig.heading_rad})},
        world_{scene, frame_},
        body_{scene, mirror_, chassis_from_camera_} {
    assert(scene.objects.size() <= kMostObjects);
    const SceneRig& rig = scene.rig;
    const Rotation lean = rotation_by({rig.lean_x_rad, rig.lean_y_rad, 0.0});
    const Rotation turn = rotation_by({0.0, 0.0, frame_.pose.heading_rad});
    const Rotation chassis = product(turn, lean);
    hall_from_chassis_ = chassis;
    eye_ = {frame_.pose.x_m, frame_.pose.y_m, rig.eye_height_m};
    cu_ = 0.5 * (rig.width_px - 1) + rig.principal_du_px;
    cv_ = 0.5 * (rig.height_px - 1) + rig.principal_dv_px;
    plate_sky_ = world_.irradiance(
        {eye_.x, eye_.y, eye_.z - scene.robot.plate_below_eye_m}, {0.0, 0.0, 1.0}, -2);
  }

  [[nodiscard]] const World& world() const { return world_; }

  /// Light already worked out for the last flat surface of this pixel.
  struct Kept {
    int surface = -1;
    Vec3 light;
    Vec3 shine;
  };

  /// Looks along the ray of image point (u, v) of the picture as delivered. With `colour`, also how
  /// bright it is. `last_floor` is the previous floor point nearby, for the size of the patch.
  Ray trace(double u, double v, Vec3* colour, Kept* kept, Vec3* last_floor) const {
    const SceneRig& rig = scene_.rig;
    const double raw_v = rig.mirrored ? v : rig.height_px - 1 - v;
    const Vec3 line = unit({(u - cu_) / rig.focal_px, (raw_v - cv_) / rig.focal_px, 1.0});
    Ray ray;
    const auto at = mirror_.hit({}, line);
    if (!at) {
      if (colour != nullptr) *colour = past_mirror(line, kept);
      return ray;
    }
    const Vec3 n = mirror_.normal(*at);
    const Vec3 away = line - 2.0 * dot(line, n) * n;
    const Vec3 from = chassis_from_camera_(*at);
    const Vec3 towards = chassis_from_camera_(away);
    const Vec3 hall_from = eye_ + hall_from_chassis_(from);
    const Vec3 hall_towards = hall_from_chassis_(towards);
    ray.ahead = world_.named_ahead(hall_from, hall_towards);
    const Sight sight = world_.look(hall_from, hall_towards);
    Body::Sight body;
    const double reflectance = scene_.sensor.mirror_reflectance;
    if (body_.look(from, towards, body) && body.t < sight.t) {
      ray.shows = body.camera ? PixelClass::hole : PixelClass::robot;
      if (colour != nullptr) *colour = reflectance * shade(body, hall_towards);
      return ray;
    }
    ray.shows = sight.shows;
    ray.object = world_.object_of(sight.solid);
    if (colour != nullptr) {
      *colour = reflectance * shade(hall_from, hall_towards, sight, kept, last_floor);
    }
    return ray;
  }

 private:
  static Rotation product(const Rotation& a, const Rotation& b) {
    const Rotation t = b.inverse();
    return Rotation{a(t.row_x), a(t.row_y), a(t.row_z)}.inverse();
  }

  Vec3 shade(Vec3 from, Vec3 towards, const Sight& sight, Kept* kept, Vec3* last_floor) const {
    const Vec3 own = world_.emission(from, towards, sight);
    if (own.y > 0.0) return own;
    const double gloss = world_.gloss(sight);
    const int key = 8 * sight.surface + sight.face;
    double footprint = 0.0;
    if (sight.surface == 0) {
      footprint = std::min(0.5, 1.5 * length(sight.at - *last_floor));
      *last_floor = sight.at;
    }
    if (sight.face == 0 || kept->surface != key) {
      // What stands on the floor shades floor and things, not the hall's walls and ceiling.
      const bool shadows = sight.surface == 0 || sight.solid >= 0;
      kept->light = world_.irradiance(sight.at, sight.normal, sight.solid, shadows);
      kept->shine = world_.highlight(sight.at, sight.normal, towards, gloss);
      if (sight.surface == 0 && gloss > 0.0) {
        kept->shine += sheen(sight, towards, gloss);
      }
      kept->surface = sight.face == 0 ? -1 : key;
    }
    return world_.exposure() * world_.albedo(sight, footprint) * kept->light + kept->shine;
  }

  /// What a polished floor reflects at a flat angle (Schlick 1994).
  Vec3 sheen(const Sight& sight, Vec3 towards, double gloss) const {
    const Vec3 away = towards - 2.0 * dot(towards, sight.normal) * sight.normal;
    const double flat = 1.0 - std::max(0.0, dot(away, sight.normal));
    const double grazing = flat * flat * flat * flat * flat;
    const double share = gloss * (0.03 + 0.6 * grazing);
    const Vec3 from = sight.at + 1e-6 * sight.normal;
    const Sight far = world_.look(from, away);
    Vec3 seen = world_.emission(from, away, far);
    if (seen.y <= 0.0) {
      seen = world_.exposure() * world_.albedo(far, 1.0) *
             world_.irradiance(far.at, far.normal, far.solid, false);
    }
    return share * seen;
  }

  /// A part of the robot. It stands in its mirror's shade: the sky above it is narrowed.
  Vec3 shade(const Body::Sight& body, Vec3 hall_towards) const {
    const Vec3 normal = hall_from_chassis_(body.normal);
    const Vec3 at = eye_ + hall_from_chassis_(body.at);
    const double from_axis = std::hypot(body.at.x, body.at.y);
    const double open = 0.35 + 0.65 * std::min(1.0, from_axis / 0.06);
    const double up = 0.5 + 0.5 * normal.z;
    const Vec3 light = open * up * plate_sky_ + (1.0 - up) * world_.mean_floor_light();
    return world_.exposure() * body.material.albedo * light +
           open * world_.highlight(at, normal, hall_towards, body.material.gloss);
  }

  Vec3 past_mirror(Vec3 line, Kept* kept) const {
    const Vec3 towards = chassis_from_camera_(line);
    Body::Sight body;
    if (body_.look_past_mirror(towards, body)) return shade(body, hall_from_chassis_(towards));
    const Vec3 hall_towards = hall_from_chassis_(towards);
    Vec3 nowhere;
    return shade(eye_, hall_towards, world_.look(eye_, hall_towards), kept, &nowhere);
  }

  const Scene& scene_;
  const SceneFrame& frame_;
  Mirror mirror_;
  Rotation chassis_from_camera_;
  World world_;
  Body body_;
  Rotation hall_from_chassis_;
  Vec3 eye_;
  double cu_ = 0.0;
  double cv_ = 0.0;
  Vec3 plate_sky_;
};

/// A box's foot nearest to the robot along the line to its middle; otherwise what is measured of
/// it.
FloorSpot measured_spot(const SceneObject& object, const Pose& pose, FloorSpot middle) {
  if (object.solid == Solid::ball) return middle;
  if (object.solid == Solid::cylinder) {
    return {std::max(0.0, middle.range_m - 0.5 * object.diameter_m), middle.bearing_rad};
  }
  const double towards = middle.bearing_rad + pose.heading_rad - object.turn_rad;
  const double c = std::abs(std::cos(towards));
  const double s = std::abs(std::sin(towards));
  const double inside =
      std::min(c > 0.0 ? 0.5 * object.length_m / c : 1e9, s > 0.0 ? 0.5 * object.width_m / s : 1e9);
  return {std::max(0.0, middle.range_m - inside), middle.bearing_rad};
}

FloorSpot spot_from(const Pose& pose, FloorPoint in_hall) {
  const double dx = in_hall.x_m - pose.x_m;
  const double dy = in_hall.y_m - pose.y_m;
  return {std::hypot(dx, dy), wrap_angle(std::atan2(dy, dx) - pose.heading_rad)};
}

/// The rays' places in a pixel, from its middle outwards: light is worked out where a surface is
/// first seen, which shall be near the middle.
std::vector<std::pair<double, double>> places_in_pixel(int across) {
  std::vector<std::pair<double, double>> places;
  for (int j = 0; j < across; ++j) {
    for (int i = 0; i < across; ++i) {
      places.emplace_back((2 * i + 1 - across) / (2.0 * across),
                          (2 * j + 1 - across) / (2.0 * across));
    }
  }
  std::stable_sort(places.begin(), places.end(), [](const auto& a, const auto& b) {
    return a.first * a.first + a.second * a.second < b.first * b.first + b.second * b.second;
  });
  return places;
}

FrameTruth trace_frame(const Scene& scene,
                       std::size_t frame_index,
                       int threads,
                       const Tracer& tracer,
                       cv::Mat* linear) {
  const SceneFrame& frame = scene.frames[frame_index];
  const SceneRig& rig = scene.rig;
  const int width = rig.width_px;
  const int height = rig.height_px;
  FrameTruth truth;
  truth.image = frame.image;
  truth.light = scene.lights[frame.light].name;
  truth.pose = frame.pose;
  truth.rim = imaged_rim(rig);
  truth.classes = cv::Mat(height, width, CV_8U);
  truth.objects = cv::Mat(height, width, CV_8U);
  truth.mask = cv::Mat(height, width, CV_8U);
  if (linear != nullptr) *linear = cv::Mat(height, width, CV_32FC3);

  const int across = std::max(1, scene.sensor.supersample);
  const std::vector<std::pair<double, double>> places = places_in_pixel(across);
  const std::size_t count = scene.objects.size();
  std::vector<std::vector<Tally>> rows(static_cast<std::size_t>(height), std::vector<Tally>(count));
  for_rows(height, threads, [&](int first, int end) {
    for (int v = first; v < end; ++v) {
      std::vector<Tally>& tallies = rows[static_cast<std::size_t>(v)];
      auto* class_row = truth.classes.ptr<unsigned char>(v);
      auto* object_row = truth.objects.ptr<unsigned char>(v);
      auto* mask_row = truth.mask.ptr<unsigned char>(v);
      auto* colour_row = linear != nullptr ? linear->ptr<cv::Vec3f>(v) : nullptr;
      Vec3 last_floor;
      for (int u = 0; u < width; ++u) {
        Tracer::Kept kept;
        Vec3 sum;
        Ray middle;
        for (const auto& [du, dv] : places) {
          Vec3 colour;
          const Ray ray = tracer.trace(
              u + du, v + dv, linear != nullptr ? &colour : nullptr, &kept, &last_floor);
          sum += colour;
          if (du == 0.0 && dv == 0.0) middle = ray;
          for (std::uint64_t left = ray.ahead; left != 0; left &= left - 1) {
            const auto k = static_cast<std::size_t>(__builtin_ctzll(left));
            Tally& tally = tallies[k];
            ++tally.ahead;
            if (ray.object != static_cast<int>(k)) continue;
            ++tally.seen;
            tally.u += u + du;
            tally.v += v + dv;
            tally.u_low = tally.u_high < 0 ? u : std::min(tally.u_low, u);
            tally.u_high = std::max(tally.u_high, u);
            tally.v_low = tally.v_high < 0 ? v : std::min(tally.v_low, v);
            tally.v_high = std::max(tally.v_high, v);
          }
        }
        if (across % 2 == 0) middle = tracer.trace(u, v, nullptr, &kept, &last_floor);
        class_row[u] = static_cast<unsigned char>(middle.shows);
        object_row[u] = static_cast<unsigned char>(middle.object + 1);
        mask_row[u] = middle.shows >= PixelClass::floor ? 255 : 0;
        if (colour_row != nullptr) {
          const double share = 1.0 / (across * across);
          colour_row[u] = {static_cast<float>(share * sum.z),
                           static_cast<float>(share * sum.y),
                           static_cast<float>(share * sum.x)};
        }
      }
    }
  });

  for (std::size_t k = 0; k < count; ++k) {
    const SceneObject& object = tracer.world().objects()[k];
    if (object.name.empty() || tracer.world().away(k)) continue;
    Tally all;
    for (const std::vector<Tally>& row : rows) {
      const Tally& t = row[k];
      if (t.seen > 0) {
        all.u_low = all.u_high < 0 ? t.u_low : std::min(all.u_low, t.u_low);
        all.v_low = all.v_high < 0 ? t.v_low : std::min(all.v_low, t.v_low);
        all.u_high = std::max(all.u_high, t.u_high);
        all.v_high = std::max(all.v_high, t.v_high);
      }
      all.seen += t.seen;
      all.ahead += t.ahead;
      all.u += t.u;
      all.v += t.v;
    }
    ObjectTruth seen;
    seen.object = k;
    seen.name = object.name;
    seen.middle = spot_from(frame.pose, object.at);
    seen.spot = measured_spot(object, frame.pose, seen.middle);
    seen.height_m = object.solid == Solid::ball ? 0.5 * object.diameter_m : 0.0;
    seen.at = pixel_of(rig, seen.spot, seen.height_m);
    seen.area_px = static_cast<double>(all.seen) / (across * across);
    if (all.ahead > 0) {
      seen.hidden_fraction = 1.0 - static_cast<double>(all.seen) / static_cast<double>(all.ahead);
    }
    if (all.seen > 0) {
      const auto n = static_cast<double>(all.seen);
      seen.centroid = ImagePoint{all.u / n, all.v / n};
      seen.box_px = {all.u_low, all.v_low, all.u_high - all.u_low + 1, all.v_high - all.v_low + 1};
    }
    truth.seen.push_back(seen);
  }
  return truth;
}

}  // namespace

FrameTruth trace_truth(const Scene& scene, std::size_t frame, int threads) {
  const Tracer tracer{scene, frame};
  return trace_frame(scene, frame, threads, tracer, nullptr);
}

cv::Mat render_linear(const Scene& scene, std::size_t frame, int threads) {
  const Tracer tracer{scene, frame};
  cv::Mat linear;
  (void)trace_frame(scene, frame, threads, tracer, &linear);
  return linear;
}

RenderedFrame render(const Scene& scene, std::size_t frame, int threads) {
  const Tracer tracer{scene, frame};
  cv::Mat linear;
  RenderedFrame rendered;
  rendered.truth = trace_frame(scene, frame, threads, tracer, &linear);
  rendered.bgr = expose(linear,
                        scene.sensor,
                        scene.lights[scene.frames[frame].light],
                        mix(scene.seed ^ mix(frame + 1)));
  int quality = scene.sensor.jpeg_quality;
  if (quality == 0 && scene.frames[frame].image.ends_with(".jpg")) quality = 92;
  if (quality > 0) {
    cv::imencode(".jpg", rendered.bgr, rendered.jpeg, {cv::IMWRITE_JPEG_QUALITY, quality});
    rendered.bgr = cv::imdecode(rendered.jpeg, cv::IMREAD_COLOR);
  }
  return rendered;
}

std::vector<RangeSample> true_ranges(const SceneRig& rig, double step_px) {
  const ImagedRim rim = imaged_rim(rig);
  std::vector<RangeSample> samples;
  for (int turn = 0; turn < 360; turn += 15) {
    const double azimuth = turn * kRadPerDeg;
    for (double radius = step_px; radius <= rim_radius_px(rim, azimuth); radius += step_px) {
      RangeSample sample;
      sample.at = {rim.centre.u_px + radius * std::cos(azimuth),
                   rim.centre.v_px + radius * std::sin(azimuth)};
      sample.radius_px = radius;
      const auto spot = floor_at(rig, sample.at);
      if (!spot) continue;
      sample.spot = *spot;
      samples.push_back(sample);
    }
  }
  return samples;
}

}  // namespace rondel::scene
