#include "vision/scene/scene_rig.h"

#include <cmath>
#include <cstdint>

#include "calib/base/problem.h"
#include "vision/scene/noise.h"

namespace rondel::scene {
namespace {

/// Draws normal numbers in order.
class Draws {
 public:
  explicit Draws(std::uint64_t seed) : seed_{seed} {}
  double normal() { return normals(seed_, next_++).first; }
  double uniform01() { return uniform(seed_, 1'000'000 + next_++); }

 private:
  std::uint64_t seed_;
  std::uint64_t next_ = 0;
};

double moved(const Uncertain& value, Draws* draws) {
  return draws == nullptr ? value.value : value.value + value.sd * draws->normal();
}

/// On a conic s^2 = 2 R z - (1 + K) z^2, linear in R and 1 + K: least squares over the points.
void conic_through(const ProfileSpec& profile, SceneRig& rig) {
  double zz = 0.0;
  double zq = 0.0;
  double qq = 0.0;
  double zs = 0.0;
  double qs = 0.0;
  for (const auto& [s, z] : profile.points_m) {
    const double a = 2.0 * z;
    const double q = -z * z;
    zz += a * a;
    zq += a * q;
    qq += q * q;
    zs += a * s * s;
    qs += q * s * s;
  }
  const double det = zz * qq - zq * zq;
  if (!(std::abs(det) > 0.0)) {
    throw InputError("rig.yaml", "mirror profile: needs two points off the vertex at least");
  }
  rig.vertex_radius_m = (zs * qq - qs * zq) / det;
  rig.conic_constant = (qs * zz - zs * zq) / det - 1.0;
}

SceneRig build(const RigSpec& drawing, Draws* draws) {
  if (!drawing.mirror) throw InputError("rig.yaml", "mirror: missing; a scene needs the drawing");
  if (!drawing.camera.focal_px) throw InputError("rig.yaml", "camera.focal_px: missing");
  if (!drawing.mounting.eye_height_m) {
    throw InputError("rig.yaml", "mounting.eye_height_mm: missing");
  }
  SceneRig rig;
  rig.width_px = drawing.camera.width_px;
  rig.height_px = drawing.camera.height_px;
  rig.focal_px = moved(*drawing.camera.focal_px, draws);
  const MirrorSpec& mirror = *drawing.mirror;
  if (const auto* conic = std::get_if<ConicSpec>(&mirror.shape)) {
    rig.kind = MirrorKind::conic;
    rig.vertex_radius_m = moved(conic->vertex_radius_m, draws);
    rig.conic_constant = moved(conic->conic_constant, draws);
  } else if (const auto* cone = std::get_if<ConeSpec>(&mirror.shape)) {
    rig.kind = MirrorKind::cone;
    rig.slope_rad = moved(cone->slope_rad, draws);
  } else {
    rig.kind = MirrorKind::conic;
    conic_through(std::get<ProfileSpec>(mirror.shape), rig);
  }
  rig.rim_radius_m = mirror.rim_radius_m;
  rig.distance_m = moved(mirror.distance_m, draws);
  rig.eye_height_m = moved(*drawing.mounting.eye_height_m, draws);
  rig.heading_rad = drawing.mounting.heading_rad.value_or(0.0);
  rig.mirrored = drawing.mounting.mirrored.value_or(true);
  return rig;
}

}  // namespace

SceneRig rig_as_drawn(const RigSpec& drawing) { return build(drawing, nullptr); }

SceneRig rig_as_built(const RigSpec& drawing, unsigned seed, double tilt_rad, double shift_m) {
  Draws draws{seed};
  SceneRig rig = build(drawing, &draws);
  const double tilt_to = 2.0 * std::numbers::pi * draws.uniform01();
  const double shift_to = 2.0 * std::numbers::pi * draws.uniform01();
  rig.tilt_x_rad = tilt_rad * std::cos(tilt_to);
  rig.tilt_y_rad = tilt_rad * std::sin(tilt_to);
  rig.shift_x_m = shift_m * std::cos(shift_to);
  rig.shift_y_m = shift_m * std::sin(shift_to);
  return rig;
}

}  // namespace rondel::scene
