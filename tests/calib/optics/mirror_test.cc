#include "calib/optics/mirror.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <random>

#include "calib/optics/conic_forms.h"
#include "calib/optics/trace.h"

namespace rondel::optics {
namespace {

Mirror<double> conic(double radius_m, double constant) {
  Mirror<double> m;
  m.vertex_radius_m = radius_m;
  m.conic_constant = constant;
  return m;
}

/// The first crossing of the ray and z = sag(s), by marching and bisection on the sag alone.
std::optional<Vec3<double>> march(const Mirror<double>& mirror,
                                  const Vec3<double>& from,
                                  const Vec3<double>& along) {
  const auto gap = [&](double t) -> std::optional<double> {
    const Vec3<double> p = from + t * along;
    const auto sag = sag_m(mirror, std::hypot(p.x, p.y));
    if (!sag) return std::nullopt;
    return p.z - *sag;
  };
  double before = 0.0;
  for (int i = 1; i <= 20000; ++i) {
    const double t = i * 1e-5;
    const auto g = gap(t);
    if (g && *g >= 0.0) {
      double low = before;
      double high = t;
      for (int k = 0; k < 80; ++k) {
        const double middle = 0.5 * (low + high);
        const auto m = gap(middle);
        (m && *m >= 0.0 ? high : low) = middle;
      }
      return from + high * along;
    }
    before = t;
  }
  return std::nullopt;
}

TEST(Mirror, MeetsRaysWhereTheSagSaysForAnyConic) {
  std::mt19937 random(11);
  std::uniform_real_distribution<double> uniform(-1.0, 1.0);
  for (const double k : {1.0, 0.4, 0.0, -0.5, -0.9999999, -1.0, -1.0000001, -1.5, -2.25, -4.0}) {
    const Mirror<double> mirror = conic(0.040, k);
    int hits = 0;
    for (int i = 0; i < 200; ++i) {
      const Vec3<double> from{0.002 * uniform(random), 0.002 * uniform(random), -0.060};
      const Vec3<double> along{0.45 * uniform(random), 0.45 * uniform(random), 1.0};
      const auto hit = meet(mirror, from, along);
      const auto truth = march(mirror, from, along);
      // Beyond a sphere's outline both must miss; a graze within the marching step may differ.
      if (!truth) {
        if (hit) {
          EXPECT_NEAR(std::hypot(hit->at_m.x, hit->at_m.y), 0.04 / std::sqrt(1.0 + k), 1e-3)
              << "K " << k << " ray " << i;
        }
        continue;
      }
      ASSERT_TRUE(hit) << "K " << k << " ray " << i;
      ++hits;
      // Bisection ends at 1e-5 m / 2^80; what is left is rounding of sag, 1e-16 / slope.
      EXPECT_NEAR(hit->at_m.x, truth->x, 1e-12) << "K " << k;
      EXPECT_NEAR(hit->at_m.y, truth->y, 1e-12);
      EXPECT_NEAR(hit->at_m.z, truth->z, 1e-12);
    }
    EXPECT_GT(hits, 100) << "K " << k;
  }
}

TEST(Mirror, ConeIsMetOnItsRealHalf) {
  Mirror<double> mirror;
  mirror.kind = MirrorKind::cone;
  mirror.slope_rad = 0.6;
  const Vec3<double> from{0.001, -0.0005, -0.05};
  for (const double x : {-0.3, -0.05, 0.02, 0.4}) {
    const Vec3<double> along{x, 0.1, 1.0};
    const auto hit = meet(mirror, from, along);
    const auto truth = march(mirror, from, along);
    ASSERT_TRUE(hit && truth);
    EXPECT_NEAR(hit->at_m.x, truth->x, 1e-12);
    EXPECT_NEAR(hit->at_m.z, truth->z, 1e-12);
    EXPECT_LT(hit->normal.z, 0.0);
  }
  EXPECT_FALSE(meet(mirror, Vec3<double>{0.0, 0.0, -0.05}, Vec3<double>{0.0, 0.0, 1.0}))
      << "the apex has no normal";
}

TEST(Mirror, NormalIsThatOfTheSag) {
  for (const double k : {0.5, 0.0, -1.0, -2.25}) {
    const Mirror<double> mirror = conic(0.04, k);
    const auto hit = meet(mirror, Vec3<double>{0.0, 0.0, -0.06}, Vec3<double>{0.2, 0.1, 1.0});
    ASSERT_TRUE(hit);
    const double s = std::hypot(hit->at_m.x, hit->at_m.y);
    // Central difference: error h^2/6 sag''' plus 1e-16/h, below 1e-8 at h = 1e-6.
    const double h = 1e-6;
    const double slope = (*sag_m(mirror, s + h) - *sag_m(mirror, s - h)) / (2.0 * h);
    EXPECT_NEAR(std::hypot(hit->normal.x, hit->normal.y) / -hit->normal.z, slope, 1e-8);
    EXPECT_NEAR(hit->normal.x * hit->at_m.y, hit->normal.y * hit->at_m.x, 1e-15);
  }
}

TEST(Mirror, ReflectionKeepsTheAngleAndThePlane) {
  const Vec3<double> along{0.3, -0.2, 1.0};
  const Vec3<double> normal{0.5, 0.1, -2.0};
  const Vec3<double> out = reflect(along, normal);
  EXPECT_NEAR(dot(out, out), dot(along, along), 1e-15);
  EXPECT_NEAR(dot(out, normal), -dot(along, normal), 1e-15);
  const Vec3<double> change = out - along;  // along the normal
  EXPECT_NEAR(change.x * normal.z, change.z * normal.x, 1e-15);
  EXPECT_NEAR(change.y * normal.z, change.z * normal.y, 1e-15);
}

/// Hyperboloids with the pinhole in the far focus; lengths in mm. Source: computed from Baker and
/// Nayar 1999: a = (c/2) sqrt((k-2)/k), b = (c/2) sqrt(2/k).
struct Sample {
  double c, k, a, b, e, conic_constant, radius, xi, z_at_20, sag_at_20;
};
constexpr Sample kSamples[] = {
    {100, 6, 40.8248, 28.8675, 1.224745, -1.5, 20.4124, 0.979796, 99.66554809, 8.84071904},
    {80, 5.5, 31.9090, 24.1209, 1.253566, -1.571429, 18.2337, 0.974996, 81.45095678, 9.54199537},
    {60, 8, 25.9808, 15.0000, 1.154701, -1.333333, 8.6603, 0.989743, 73.30127019, 17.32050808},
    {100, 4, 35.3553, 35.3553, 1.414214, -2, 35.3553, 0.942809, 90.62019202, 5.26485296},
};

TEST(Mirror, HyperboloidSamplesOfBakerAndNayar) {
  for (const Sample& s : kSamples) {
    const double a = 0.5 * s.c * std::sqrt((s.k - 2.0) / s.k);
    const double b = 0.5 * s.c * std::sqrt(2.0 / s.k);
    const OpticalConic form = from_hyperbola({1e-3 * a, 0.0}, {1e-3 * b, 0.0});
    // The samples print four to six decimals; half of the last one is the tolerance.
    EXPECT_NEAR(a, s.a, 5e-5);
    EXPECT_NEAR(b, s.b, 5e-5);
    EXPECT_NEAR(form.conic_constant.value, s.conic_constant, 5e-7);
    EXPECT_NEAR(1e3 * form.vertex_radius_m.value, s.radius, 5e-5);
    EXPECT_NEAR(std::sqrt(-form.conic_constant.value), s.e, 5e-7);
    EXPECT_NEAR(2.0 * s.e / (1.0 + s.e * s.e), s.xi, 1e-6);
    const Mirror<double> mirror = conic(form.vertex_radius_m.value, form.conic_constant.value);
    EXPECT_NEAR(1e3 * *sag_m(mirror, 0.020), s.sag_at_20, 5e-9);
    EXPECT_NEAR(0.5 * s.c + a + 1e3 * *sag_m(mirror, 0.020), s.z_at_20, 5e-9);
  }
}

TEST(Mirror, DistancesToTheFociDifferByTwoA) {
  for (const Sample& s : kSamples) {
    const double a = 0.5e-3 * s.c * std::sqrt((s.k - 2.0) / s.k);
    const double b = 0.5e-3 * s.c * std::sqrt(2.0 / s.k);
    const OpticalConic form = from_hyperbola({a, 0.0}, {b, 0.0});
    const Mirror<double> mirror = conic(form.vertex_radius_m.value, form.conic_constant.value);
    const double c = 1e-3 * s.c;
    for (const double r : {0.001, 0.010, 0.020, 0.040}) {
      const double z = *sag_m(mirror, r);
      const double to_near = std::hypot(r, z - (0.5 * c - a));
      const double to_far = std::hypot(r, z + (0.5 * c + a));
      EXPECT_NEAR(to_far - to_near, 2.0 * a, 1e-15);
    }
  }
}

TEST(Mirror, FocusDirectrixPropertyHoldsForAnyEccentricity) {
  for (const double e : {0.3, 1.0, 1.5, 3.0}) {
    const double focus = 0.012;
    const double directrix = focus / e;
    const OpticalConic form = from_focus({e, 0.0}, {focus, 0.0});
    const Mirror<double> mirror = conic(form.vertex_radius_m.value, form.conic_constant.value);
    for (const double s : {0.0, 0.003, 0.009, 0.011}) {
      const auto z = sag_m(mirror, s);
      ASSERT_TRUE(z);
      EXPECT_NEAR(std::hypot(s, *z - focus), e * (*z + directrix), 1e-15) << "e " << e;
    }
  }
}

TEST(Mirror, AllSightsOfASingleViewpointRigPassTheFocus) {
  for (const Sample& s : kSamples) {
    const double a = 0.5e-3 * s.c * std::sqrt((s.k - 2.0) / s.k);
    const double b = 0.5e-3 * s.c * std::sqrt(2.0 / s.k);
    const OpticalConic form = from_hyperbola({a, 0.0}, {b, 0.0});
    RigGeometry<double> rig;
    rig.focal_px = 300.0;
    rig.distance_m = 0.5e-3 * s.c + a;
    rig.mirror = conic(form.vertex_radius_m.value, form.conic_constant.value);
    rig.eye_height_m = 0.2;
    for (double u = -60.0; u <= 60.0; u += 7.0) {
      const auto sight = sight_of(rig, u, 11.0);
      ASSERT_TRUE(sight);
      const Vec3<double> to_focus = Vec3<double>{0.0, 0.0, 1e-3 * s.c} - sight->from_m;
      const double along = dot(sight->along, to_focus) / dot(sight->along, sight->along);
      const Vec3<double> off = to_focus - along * sight->along;
      EXPECT_LT(std::sqrt(dot(off, off)), 1e-9) << "u " << u;
    }
    // The horizontal sight through the focus leaves the mirror one vertex radius (the semi-latus
    // rectum) off the axis, at the focus' height.
    const auto horizon = horizon_radius_px(rig);
    ASSERT_TRUE(horizon);
    EXPECT_NEAR(*horizon, 300.0 * form.vertex_radius_m.value / (1e-3 * s.c), 1e-9);
  }
}

TEST(Mirror, SagEndsAtTheWidestPlace) {
  EXPECT_TRUE(sag_m(conic(0.04, 0.0), 0.0399));
  EXPECT_FALSE(sag_m(conic(0.04, 0.0), 0.0401));
  EXPECT_NEAR(*sag_m(conic(0.04, 0.0), 0.024), 0.008, 1e-16) << "3-4-5 triangle";
  EXPECT_NEAR(*sag_m(conic(0.04, -1.0), 0.02), 0.005, 1e-17) << "s^2 / 2R";
}

}  // namespace
}  // namespace rondel::optics
