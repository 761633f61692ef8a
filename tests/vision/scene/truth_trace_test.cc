#include "vision/scene/truth_trace.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "calib/optics/trace.h"
#include "vision/scene/mirror.h"
#include "vision/scene/noise.h"

namespace rondel::scene {
namespace {

/// Rigs of every kind, tilted, shifted, leaning, either way up, the eye anywhere near the focus.
SceneRig random_rig(std::uint64_t seed) {
  auto u = [seed, i = std::uint64_t{0}](double low, double high) mutable {
    return low + (high - low) * uniform(seed, i++);
  };
  SceneRig rig;
  rig.focal_px = u(180, 400);
  rig.principal_du_px = u(-5, 5);
  rig.principal_dv_px = u(-5, 5);
  rig.kind = u(0, 1) < 0.2 ? MirrorKind::cone : MirrorKind::conic;
  rig.vertex_radius_m = u(0.025, 0.06);
  rig.conic_constant = u(-4.0, 0.5);
  rig.slope_rad = u(0.5, 0.9);
  rig.rim_radius_m = u(0.015, 0.02);
  rig.distance_m = u(0.04, 0.09);
  rig.shift_x_m = u(-0.001, 0.001);
  rig.shift_y_m = u(-0.001, 0.001);
  rig.tilt_x_rad = u(-0.035, 0.035);
  rig.tilt_y_rad = u(-0.035, 0.035);
  rig.eye_height_m = u(0.1, 0.6);
  rig.lean_x_rad = u(-0.03, 0.03);
  rig.lean_y_rad = u(-0.03, 0.03);
  rig.heading_rad = u(-3.1, 3.1);
  rig.mirrored = u(0, 1) < 0.5;
  return rig;
}

TEST(TruthTrace, FloorToPixelAndBackAgreeThoughTheyShareNoFormula) {
  // pixel_of minimises the light's path over the surface; floor_at intersects and reflects.
  // 1e-6 px: both are good to some 1e-10.
  int seen = 0;
  for (std::uint64_t seed = 1; seed <= 300; ++seed) {
    const SceneRig rig = random_rig(seed);
    const ImagedRim rim = imaged_rim(rig);
    for (std::uint64_t k = 0; k < 20; ++k) {
      const double azimuth = 2.0 * std::numbers::pi * uniform(seed + 7777, 2 * k);
      const double radius = uniform(seed + 7777, 2 * k + 1) * 0.999 * rim_radius_px(rim, azimuth);
      const ImagePoint pixel{rim.centre.u_px + radius * std::cos(azimuth),
                             rim.centre.v_px + radius * std::sin(azimuth)};
      for (const double height : {0.0, 0.037}) {
        const auto spot = floor_at(rig, pixel, height);
        if (!spot || spot->range_m > 20.0) continue;
        const auto back = pixel_of(rig, *spot, height);
        ASSERT_TRUE(back) << "seed " << seed << " k " << k;
        ++seen;
        EXPECT_NEAR(back->u_px, pixel.u_px, 1e-6) << "seed " << seed << " range " << spot->range_m;
        EXPECT_NEAR(back->v_px, pixel.v_px, 1e-6) << "seed " << seed << " range " << spot->range_m;
      }
    }
  }
  EXPECT_GT(seen, 5000);
}

/// The same rig in the terms of calib/optics, which was written apart from vision/scene.
optics::RigGeometry<double> in_calibration_terms(const SceneRig& rig) {
  // The raw picture's v axis; a picture that has been turned over counts v the other way.
  const double over = rig.mirrored ? 1.0 : -1.0;
  optics::RigGeometry<double> out;
  out.focal_px = rig.focal_px;
  out.cu_px = 0.5 * (rig.width_px - 1) + rig.principal_du_px;
  out.cv_px = 0.5 * (rig.height_px - 1) + over * rig.principal_dv_px;
  out.distance_m = rig.distance_m;
  out.mirror.kind =
      rig.kind == MirrorKind::conic ? optics::MirrorKind::conic : optics::MirrorKind::cone;
  out.mirror.vertex_radius_m = rig.vertex_radius_m;
  out.mirror.conic_constant = rig.conic_constant;
  out.mirror.slope_rad = rig.slope_rad;
  const Vec3 axis = rotation_by({rig.tilt_x_rad, rig.tilt_y_rad, 0.0})({0.0, 0.0, 1.0});
  out.tilt_x = axis.x / axis.z;
  out.tilt_y = over * axis.y / axis.z;
  out.shift_x_m = rig.shift_x_m;
  out.shift_y_m = over * rig.shift_y_m;
  out.eye_height_m = rig.eye_height_m;
  const Vec3 up_in_chassis =
      rotation_by({rig.lean_x_rad, rig.lean_y_rad, 0.0}).inverse()({0.0, 0.0, 1.0});
  const Vec3 up = rotation_by({0.0, 0.0, -rig.heading_rad})(up_in_chassis);
  out.floor_tilt_x = up.x / up.z;
  out.floor_tilt_y = over * up.y / up.z;
  out.heading_rad = rig.heading_rad;
  out.mirrored = rig.mirrored;
  out.rim_radius_m = rig.rim_radius_m;
  return out;
}

TEST(TruthTrace, AgreesWithTheTraceOfTheCalibration) {
  // Two programs for the same optics, each way: 1e-6 px, and 1 um on the floor.
  int seen = 0;
  for (std::uint64_t seed = 1; seed <= 300; ++seed) {
    const SceneRig rig = random_rig(seed);
    const optics::RigGeometry<double> other = in_calibration_terms(rig);
    const ImagePoint tip = imaged_vertex(rig);
    for (std::uint64_t k = 0; k < 20; ++k) {
      const FloorSpot spot{0.1 + 1.5 * uniform(seed + 999, 2 * k),
                           2.0 * std::numbers::pi * uniform(seed + 999, 2 * k + 1) - 3.1};
      const FloorPoint place = to_point(spot);
      for (const double height : {0.0, 0.037}) {
        const auto mine = pixel_of(rig, spot, height);
        if (!mine) continue;
        // Near its tip a tilted cone shows some places twice; each program may take either.
        const double from_tip = std::hypot(mine->u_px - tip.u_px, mine->v_px - tip.v_px);
        if (rig.kind == MirrorKind::cone && from_tip < 40.0) continue;
        const auto theirs = optics::floor_to_pixel(other, place.x_m, place.y_m, height);
        ASSERT_TRUE(theirs) << "seed " << seed << " k " << k;
        ++seen;
        EXPECT_NEAR(mine->u_px, theirs->u_px, 1e-6) << "seed " << seed;
        EXPECT_NEAR(mine->v_px, theirs->v_px, 1e-6) << "seed " << seed;
        const auto back = optics::pixel_to_floor(other, mine->u_px, mine->v_px, height);
        ASSERT_TRUE(back);
        EXPECT_NEAR(std::hypot(back->x_m - place.x_m, back->y_m - place.y_m), 0.0, 1e-6);
      }
    }
  }
  EXPECT_GT(seen, 2000);
}

TEST(TruthTrace, RimEllipsePassesThroughTheProjectedRimCircle) {
  for (std::uint64_t seed = 1; seed <= 100; ++seed) {
    const SceneRig rig = random_rig(seed);
    const Mirror mirror{rig};
    const ImagedRim rim = imaged_rim(rig);
    EXPECT_GE(rim.ellipse.a_px, rim.ellipse.b_px);
    for (int k = 0; k < 12; ++k) {
      const double t = k * std::numbers::pi / 6.0;
      const Vec3 on_rim = mirror.to_camera(
          {rig.rim_radius_m * std::cos(t), rig.rim_radius_m * std::sin(t), mirror.rim_z_m()});
      const ImagePoint p = project(rig, on_rim);
      const double du = p.u_px - rim.centre.u_px;
      const double dv = p.v_px - rim.centre.v_px;
      EXPECT_NEAR(std::hypot(du, dv), rim_radius_px(rim, std::atan2(dv, du)), 1e-8)
          << "seed " << seed;
    }
  }
}

struct Sample {
  double c, k, a, b, e, K, R, z, sag;  // mm
};
/// Hyperboloids of a single viewpoint, Baker and Nayar 1999, computed from the published formulas.
constexpr Sample kSamples[] = {
    {100, 6, 40.8248, 28.8675, 1.224745, -1.5, 20.4124, 99.66554809, 8.84071904},
    {80, 5.5, 31.9090, 24.1209, 1.253566, -1.571429, 18.2337, 81.45095678, 9.54199537},
    {60, 8, 25.9808, 15.0000, 1.154701, -1.333333, 8.6603, 73.30127019, 17.32050808},
    {100, 4, 35.3553, 35.3553, 1.414214, -2, 35.3553, 90.62019202, 5.26485296}};

SceneRig single_viewpoint(const Sample& s) {
  const double a = 0.5 * s.c * std::sqrt((s.k - 2.0) / s.k);
  const double b = 0.5 * s.c * std::sqrt(2.0 / s.k);
  SceneRig rig;
  rig.vertex_radius_m = 1e-3 * b * b / a;
  rig.conic_constant = -(1.0 + b * b / (a * a));
  rig.rim_radius_m = 0.020;
  rig.distance_m = 1e-3 * (0.5 * s.c + a);  // the pinhole in the far focus
  return rig;
}

TEST(TruthTrace, HyperboloidSamplesHold) {
  for (const Sample& s : kSamples) {
    const SceneRig rig = single_viewpoint(s);
    EXPECT_NEAR(1e3 * rig.vertex_radius_m, s.R, 5e-5);
    EXPECT_NEAR(rig.conic_constant, s.K, 5e-7);
    const Mirror mirror{rig};
    EXPECT_NEAR(1e3 * mirror.sag(0.020).z, s.sag, 5e-9);
    // The samples' z counts from the viewpoint, which lies c before the pinhole's far focus; from
    // the pinhole a mirror point stands c/2 + a + sag.
    EXPECT_NEAR(1e3 * (rig.distance_m + mirror.sag(0.020).z), s.z, 5e-9);
    // Every point: distances to the two foci differ by 2a.
    for (double r = 0.0; r <= 0.020; r += 0.002) {
      const double z = rig.distance_m + mirror.sag(r).z;
      const double to_pinhole = std::hypot(r, z);
      const double to_focus = std::hypot(r, z - 1e-3 * s.c);
      EXPECT_NEAR(std::abs(to_pinhole - to_focus), 2e-3 * s.a, 1e-7);
    }
  }
}

TEST(TruthTrace, SingleViewpointRaysPassTheFocus) {
  for (const Sample& s : kSamples) {
    const SceneRig rig = single_viewpoint(s);
    const Vec3 focus{0.0, 0.0, 1e-3 * s.c};
    int rays = 0;
    for (int v = 0; v < rig.height_px; v += 7) {
      for (int u = 0; u < rig.width_px; u += 7) {
        const auto ray = reflected_ray(rig, {static_cast<double>(u), static_cast<double>(v)});
        if (!ray) continue;
        ++rays;
        EXPECT_LT(length(cross(ray->direction, focus - ray->at)), 1e-9);
      }
    }
    EXPECT_GT(rays, 50);
  }
}

TEST(TruthTrace, BearingFollowsHeadingAndHandedness) {
  SceneRig rig;
  rig.heading_rad = 0.5;
  const double cu = 0.5 * (rig.width_px - 1);
  const double cv = 0.5 * (rig.height_px - 1);
  auto spot = floor_at(rig, {cu + 60.0 * std::cos(0.3), cv + 60.0 * std::sin(0.3)});
  ASSERT_TRUE(spot);
  EXPECT_NEAR(spot->bearing_rad, 0.8, 1e-12);
  rig.mirrored = false;
  spot = floor_at(rig, {cu + 60.0 * std::cos(0.3), cv + 60.0 * std::sin(0.3)});
  ASSERT_TRUE(spot);
  EXPECT_NEAR(spot->bearing_rad, 0.2, 1e-12);
}

TEST(TruthTrace, NothingBeyondTheRimAndNothingAboveTheHorizon) {
  const SceneRig rig;
  EXPECT_FALSE(floor_at(rig, {0.0, 0.0}));
  EXPECT_FALSE(pixel_of(rig, {1000.0, 0.0}, 500.0));
}

TEST(SceneRig, BuiltAsDrawnAndWithinTolerance) {
  RigSpec drawing;
  drawing.camera = {320, 240, Uncertain{260, 5}};
  drawing.mirror = MirrorSpec{ConicSpec{{0.040, 0.0008}, {-2.25, 0.08}}, 0.030, {0.060, 0.001}};
  drawing.mounting.eye_height_m = Uncertain{0.160, 0.003};
  const SceneRig drawn = rig_as_drawn(drawing);
  EXPECT_EQ(drawn.vertex_radius_m, 0.040);
  EXPECT_EQ(drawn.tilt_x_rad, 0.0);
  double mean = 0.0;
  double square = 0.0;
  constexpr int kRigs = 400;
  for (unsigned seed = 0; seed < kRigs; ++seed) {
    const SceneRig built = rig_as_built(drawing, seed, 0.01, 0.0003);
    EXPECT_NEAR(std::hypot(built.tilt_x_rad, built.tilt_y_rad), 0.01, 1e-15);
    EXPECT_NEAR(std::hypot(built.shift_x_m, built.shift_y_m), 0.0003, 1e-15);
    const double z = (built.focal_px - 260.0) / 5.0;
    mean += z / kRigs;
    square += z * z / kRigs;
  }
  EXPECT_LT(std::abs(mean), 4.0 / std::sqrt(kRigs));  // 4 standard errors
  EXPECT_LT(std::abs(square - 1.0), 4.0 * std::sqrt(2.0 / kRigs));
  // A measured profile that lies on a conic gives that conic.
  ProfileSpec profile;
  const Mirror mirror{drawn};
  for (double s = 0.003; s <= 0.030; s += 0.003) {
    profile.points_m.emplace_back(s, mirror.sag(s).z);
  }
  drawing.mirror->shape = profile;
  const SceneRig fitted = rig_as_drawn(drawing);
  EXPECT_NEAR(fitted.vertex_radius_m, 0.040, 1e-9);
  EXPECT_NEAR(fitted.conic_constant, -2.25, 1e-7);
}

}  // namespace
}  // namespace rondel::scene
