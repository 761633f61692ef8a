#include "calib/optics/trace.h"

#include <ceres/jet.h>
#include <gtest/gtest.h>

#include <cmath>
#include <functional>
#include <numbers>
#include <vector>

#include "calib/base/geometry.h"
#include "tests/calib/optics/rigs.h"

namespace rondel::optics {
namespace {

using testing::crooked_rig;
using testing::example_rig;

std::vector<std::pair<double, double>> paraboloid_points(double radius_m) {
  std::vector<std::pair<double, double>> points;
  for (int i = 0; i <= 20; ++i) {
    const double s = 0.002 * i;
    points.emplace_back(s, 0.5 * s * s / radius_m);
  }
  return points;
}

/// Rigs of every mirror kind, straight and crooked.
std::vector<RigGeometry<double>> all_kinds(std::mt19937& random) {
  std::vector<RigGeometry<double>> rigs;
  for (const double size : {0.0, 1.0, 3.0}) {
    for (const double k : {0.5, 0.0, -0.6, -1.0, -1.5, -2.25, -3.5}) {
      RigGeometry<double> rig = crooked_rig(random, size);
      rig.mirror.conic_constant = k;
      rigs.push_back(rig);
    }
    RigGeometry<double> cone = crooked_rig(random, size);
    cone.mirror.kind = MirrorKind::cone;
    cone.mirror.slope_rad = 0.5;
    rigs.push_back(cone);
    RigGeometry<double> profile = crooked_rig(random, size);
    profile.mirror.kind = MirrorKind::profile;
    profile.mirror.profile = Profile::fit(paraboloid_points(0.03), 1e-5);
    rigs.push_back(profile);
  }
  return rigs;
}

TEST(Trace, FloorToPixelAndBackCloses) {
  const std::uint32_t seed = 20;
  std::mt19937 random(seed);
  int seen = 0;
  for (const RigGeometry<double>& rig : all_kinds(random)) {
    for (const double range_m : {0.12, 0.3, 0.7, 1.5, 3.0, 8.0}) {
      for (const double height_m : {0.0, 0.037, 0.1}) {
        for (double bearing = -3.0; bearing < 3.1; bearing += 1.1) {
          const double x = range_m * std::cos(bearing);
          const double y = range_m * std::sin(bearing);
          const auto pixel = floor_to_pixel(rig, x, y, height_m);
          if (!pixel) continue;
          // A tilted cone's apex has no place in the picture that its axial trace could start from.
          if (rig.mirror.kind == MirrorKind::cone &&
              std::hypot(pixel->u_px - rig.cu_px, pixel->v_px - rig.cv_px) < 20.0) {
            continue;
          }
          ++seen;
          const auto floor = pixel_to_floor(rig, pixel->u_px, pixel->v_px, height_m);
          ASSERT_TRUE(floor) << "seed " << seed << " range " << range_m;
          const auto again = floor_to_pixel(rig, floor->x_m, floor->y_m, height_m);
          ASSERT_TRUE(again);
          EXPECT_NEAR(again->u_px, pixel->u_px, 1e-6) << "seed " << seed;
          EXPECT_NEAR(again->v_px, pixel->v_px, 1e-6);
          // 1e-9 px at the worst scale here, 3 m a pixel at 8 m.
          EXPECT_NEAR(floor->x_m, x, 1e-7 * range_m);
          EXPECT_NEAR(floor->y_m, y, 1e-7 * range_m);
        }
      }
    }
  }
  EXPECT_GT(seen, 2000);
}

/// Fermat: light takes the path pinhole - mirror - target whose length is stationary. Uses only the
/// sag and distances: no normals, no reflection, no intersection.
ImagePoint fermat_pixel(const RigGeometry<double>& rig, const Vec3<double>& target) {
  const double tilt = std::sqrt(1.0 + rig.tilt_x * rig.tilt_x + rig.tilt_y * rig.tilt_y);
  const Vec3<double> axis{rig.tilt_x / tilt, rig.tilt_y / tilt, 1.0 / tilt};
  // Any two directions across the axis do: the mirror is round.
  Vec3<double> e1{axis.z, 0.0, -axis.x};
  e1 = (1.0 / std::sqrt(dot(e1, e1))) * e1;
  const Vec3<double> e2{
      axis.y * e1.z - axis.z * e1.y, axis.z * e1.x - axis.x * e1.z, axis.x * e1.y - axis.y * e1.x};
  const auto place = [&](double p, double q) {
    const double sag = *sag_m(rig.mirror, std::hypot(p, q));
    return Vec3<double>{rig.shift_x_m, rig.shift_y_m, rig.distance_m} + p * e1 + q * e2 +
           sag * axis;
  };
  const auto length = [&](double p, double q) {
    const Vec3<double> m = place(p, q);
    const Vec3<double> d = target - m;
    return std::sqrt(dot(m, m)) + std::sqrt(dot(d, d));
  };
  double p = 0.015 * dot(target, e1) / std::hypot(target.x, target.y);
  double q = 0.015 * dot(target, e2) / std::hypot(target.x, target.y);
  // Newton on the gradient by differences: the step h trades h^2 truncation against 1e-17 / h^2.
  const double h = 2e-5;
  for (int i = 0; i < 200; ++i) {
    const double gp = (length(p - 2 * h, q) - 8 * length(p - h, q) + 8 * length(p + h, q) -
                       length(p + 2 * h, q)) /
                      (12 * h);
    const double gq = (length(p, q - 2 * h) - 8 * length(p, q - h) + 8 * length(p, q + h) -
                       length(p, q + 2 * h)) /
                      (12 * h);
    const double pp = (length(p + h, q) - 2 * length(p, q) + length(p - h, q)) / (h * h);
    const double qq = (length(p, q + h) - 2 * length(p, q) + length(p, q - h)) / (h * h);
    const double pq = (length(p + h, q + h) - length(p + h, q - h) - length(p - h, q + h) +
                       length(p - h, q - h)) /
                      (4 * h * h);
    const double det = pp * qq - pq * pq;
    double dp = (qq * gp - pq * gq) / det;
    double dq = (pp * gq - pq * gp) / det;
    const double step = std::hypot(dp, dq);
    if (step > 0.003) {
      dp *= 0.003 / step;
      dq *= 0.003 / step;
    }
    p -= dp;
    q -= dq;
    if (step < 1e-13) break;
  }
  const Vec3<double> m = place(p, q);
  return {rig.cu_px + rig.focal_px * m.x / m.z, rig.cv_px + rig.focal_px * m.y / m.z};
}

TEST(Trace, AgreesWithFermatsPrinciple) {
  const std::uint32_t seed = 31;
  std::mt19937 random(seed);
  for (int i = 0; i < 40; ++i) {
    RigGeometry<double> rig = crooked_rig(random, i % 2 == 0 ? 1.0 : 3.0);
    // The floor itself straight: its axes are then the image's, and the target is written down
    // without any rotation.
    rig.floor_tilt_x = rig.floor_tilt_y = rig.heading_rad = 0.0;
    rig.mirrored = true;
    const double range_m = 0.25 * std::pow(10.0, (i % 10) / 10.0);
    const double bearing = 2.4 * i;
    const double x = range_m * std::cos(bearing);
    const double y = range_m * std::sin(bearing);
    const Vec3<double> target{x, y, 0.037 * (i % 3) - rig.eye_height_m};
    const ImagePoint truth = fermat_pixel(rig, target);
    const auto pixel = floor_to_pixel(rig, x, y, 0.037 * (i % 3));
    ASSERT_TRUE(pixel);
    // The gradient is good to 1e-16 / h = 5e-12; over a curvature of 20 / m and 4300 px / m that is
    // 1e-9 px; the fourth-order difference leaves 1e-8 px. A factor of 100 below the claim.
    EXPECT_NEAR(pixel->u_px, truth.u_px, 1e-6) << "seed " << seed << " rig " << i;
    EXPECT_NEAR(pixel->v_px, truth.v_px, 1e-6);
  }
}

TEST(Trace, ChassisTiltIsARotationOfTheWholeRobot) {
  // Written out with a rotation matrix about v's axis, where the code uses none.
  RigGeometry<double> rig = example_rig();
  const double angle = 0.01;
  rig.floor_tilt_x = std::tan(angle);
  const auto floor = pixel_to_floor(rig, 240.0, 150.0, 0.0);
  ASSERT_TRUE(floor);
  RigGeometry<double> straight = example_rig();
  const auto sight = sight_of(straight, 240.0, 150.0);
  ASSERT_TRUE(sight);
  const auto turn = [&](const Vec3<double>& p) {
    return Vec3<double>{std::cos(angle) * p.x - std::sin(angle) * p.z,
                        p.y,
                        std::sin(angle) * p.x + std::cos(angle) * p.z};
  };
  const Vec3<double> from = turn(sight->from_m);
  const Vec3<double> along = turn(sight->along);
  const double t = (-0.160 - from.z) / along.z;
  EXPECT_NEAR(floor->x_m, from.x + t * along.x, 1e-14);
  EXPECT_NEAR(floor->y_m, from.y + t * along.y, 1e-14);
}

TEST(Trace, BearingFollowsTheImageOrTurnsAgainstIt) {
  RigGeometry<double> rig = example_rig();
  rig.heading_rad = 0.3;
  const double azimuth = std::atan2(30.0, 60.0);
  const auto raw = pixel_to_floor(rig, 159.5 + 60.0, 119.5 + 30.0, 0.0);
  ASSERT_TRUE(raw);
  EXPECT_NEAR(std::atan2(raw->y_m, raw->x_m), 0.3 + azimuth, 1e-12);
  rig.mirrored = false;
  const auto flipped = pixel_to_floor(rig, 159.5 + 60.0, 119.5 + 30.0, 0.0);
  ASSERT_TRUE(flipped);
  EXPECT_NEAR(std::atan2(flipped->y_m, flipped->x_m), 0.3 - azimuth, 1e-12);
}

TEST(Trace, FlippingThePictureChangesNothingOnTheFloor) {
  std::mt19937 random(3);
  for (int i = 0; i < 20; ++i) {
    RigGeometry<double> rig = crooked_rig(random, 1.0);
    RigGeometry<double> flipped = rig;
    flipped.mirrored = !rig.mirrored;
    flipped.tilt_y = -rig.tilt_y;
    flipped.shift_y_m = -rig.shift_y_m;
    flipped.floor_tilt_y = -rig.floor_tilt_y;
    const double du = 70.0;
    const double dv = 3.0 * i - 30.0;
    const auto a = pixel_to_floor(rig, rig.cu_px + du, rig.cv_px + dv, 0.02);
    const auto b = pixel_to_floor(flipped, rig.cu_px + du, rig.cv_px - dv, 0.02);
    ASSERT_TRUE(a && b);
    EXPECT_NEAR(a->x_m, b->x_m, 1e-13);
    EXPECT_NEAR(a->y_m, b->y_m, 1e-13);
  }
}

TEST(Trace, HeightMovesTheApparentRangeByAFifth) {
  // Eye 160 mm, mirror 60 mm above it, 37 mm of height read as floor: about 20 % too far.
  const RigGeometry<double> rig = example_rig();
  for (const double range_m : {0.5, 1.0, 2.0}) {
    const auto pixel = floor_to_pixel(rig, range_m, 0.0, 0.037);
    ASSERT_TRUE(pixel);
    const auto floor = pixel_to_floor(rig, pixel->u_px, pixel->v_px, 0.0);
    ASSERT_TRUE(floor);
    EXPECT_GT(floor->x_m / range_m, 1.17);
    EXPECT_LT(floor->x_m / range_m, 1.23);
  }
}

TEST(Trace, AnswersAreFiniteOrAbsentOverTheWholeImage) {
  const std::uint32_t seed = 77;
  std::mt19937 random(seed);
  for (const RigGeometry<double>& rig : all_kinds(random)) {
    int floors = 0;
    for (double u = -40.0; u < 360.0; u += 3.7) {
      for (double v = -40.0; v < 280.0; v += 3.9) {
        const auto floor = pixel_to_floor(rig, u, v, 0.0);
        if (!floor) continue;
        ++floors;
        ASSERT_TRUE(std::isfinite(floor->x_m) && std::isfinite(floor->y_m)) << u << " " << v;
      }
    }
    EXPECT_GT(floors, 500) << "seed " << seed;
  }
}

TEST(Trace, CentreOfTheImageIsStraightBelow) {
  const RigGeometry<double> rig = example_rig();
  const auto floor = pixel_to_floor(rig, 159.5, 119.5, 0.0);
  ASSERT_TRUE(floor);
  EXPECT_NEAR(floor->x_m, 0.0, 1e-15);
  EXPECT_NEAR(floor->y_m, 0.0, 1e-15);
}

TEST(Trace, BeyondTheHorizonAndTheRimThereIsNoFloor) {
  RigGeometry<double> rig = example_rig();
  const auto horizon = horizon_radius_px(rig);
  ASSERT_TRUE(horizon);
  EXPECT_TRUE(pixel_to_floor(rig, rig.cu_px + *horizon - 1e-6, rig.cv_px, 0.0));
  EXPECT_FALSE(pixel_to_floor(rig, rig.cu_px + *horizon + 1e-6, rig.cv_px, 0.0));
  EXPECT_GT(axial_range_m(rig, *horizon - 1e-3, 0.0).value_or(0.0), 100.0);
  EXPECT_FALSE(axial_range_m(rig, *horizon + 1e-3, 0.0));
  rig.rim_radius_m = 0.030;
  EXPECT_FALSE(horizon_radius_px(rig)) << "the rim comes first";
  const double rim_px = 260.0 * 0.030 / (0.060 + *sag_m(rig.mirror, 0.030));
  EXPECT_NEAR(last_radius_px(rig), rim_px, 1e-9);
  EXPECT_TRUE(pixel_to_floor(rig, rig.cu_px + rim_px - 1e-6, rig.cv_px, 0.0));
  EXPECT_FALSE(pixel_to_floor(rig, rig.cu_px + rim_px + 1e-6, rig.cv_px, 0.0));
  const double far_m = *axial_range_m(rig, rim_px - 1e-9, 0.0);
  EXPECT_TRUE(floor_to_pixel(rig, far_m - 0.001, 0.0, 0.0));
  EXPECT_FALSE(floor_to_pixel(rig, far_m + 0.001, 0.0, 0.0));
}

TEST(Trace, AxialRootFindInvertsTheAxialTrace) {
  std::mt19937 random(4);
  for (const RigGeometry<double>& rig : all_kinds(random)) {
    for (const double range_m : {0.15, 0.5, 2.0, 10.0}) {
      const auto radius = axial_radius_px(rig, range_m, 0.0);
      if (!radius) continue;
      const auto back = axial_range_m(rig, *radius, 0.0);
      ASSERT_TRUE(back);
      // Rounding of the radius, 2e-14 px, times at most 10 m / px at 10 m.
      EXPECT_NEAR(*back, range_m, 1e-11 * range_m * (1.0 + range_m));
    }
  }
}

/// The parameters of a rig in one row, for derivative checks.
template <class T>
std::vector<std::reference_wrapper<T>> parameters_of(RigGeometry<T>& rig) {
  return {rig.focal_px,
          rig.cu_px,
          rig.cv_px,
          rig.distance_m,
          rig.mirror.vertex_radius_m,
          rig.mirror.conic_constant,
          rig.mirror.slope_rad,
          rig.mirror.profile_modes[0],
          rig.mirror.profile_modes[1],
          rig.tilt_x,
          rig.tilt_y,
          rig.shift_x_m,
          rig.shift_y_m,
          rig.eye_height_m,
          rig.floor_tilt_x,
          rig.floor_tilt_y,
          rig.heading_rad};
}
constexpr int kParameters = 17;
using Jet = ceres::Jet<double, kParameters>;

double step_for(double value) { return 1e-6 * std::max(0.05, std::abs(value)); }

TEST(Trace, DerivativesAgreeWithDifferencesBothWays) {
  const std::uint32_t seed = 8;
  std::mt19937 random(seed);
  for (const RigGeometry<double>& rig : all_kinds(random)) {
    const double bearing = 0.9;
    const double range_m = 0.8;
    const double x = range_m * std::cos(bearing);
    const double y = range_m * std::sin(bearing);
    RigGeometry<Jet> jets = rig.in<Jet>();
    int index = 0;
    for (Jet& p : parameters_of(jets)) p.v[index++] = 1.0;
    const auto pixel = floor_to_pixel(jets, Jet(x), Jet(y), Jet(0.02));
    if (!pixel) continue;
    const auto floor = pixel_to_floor(jets, Jet(pixel->u_px.a), Jet(pixel->v_px.a), Jet(0.02));
    ASSERT_TRUE(floor);
    for (int i = 0; i < kParameters; ++i) {
      const auto moved = [&](double by) {
        RigGeometry<double> r = rig;
        parameters_of(r)[static_cast<std::size_t>(i)].get() += by;
        return r;
      };
      RigGeometry<double> copy = rig;
      const double h = step_for(parameters_of(copy)[static_cast<std::size_t>(i)].get());
      const auto up = floor_to_pixel(moved(h), x, y, 0.02);
      const auto down = floor_to_pixel(moved(-h), x, y, 0.02);
      ASSERT_TRUE(up && down);
      // Central differences: 1e-9 px of the solver over h >= 5e-8 is 0.02 px per unit of a
      // parameter whose effect is of the order of 1e3 px per unit; the second-order rest is 1e-5.
      const double du = (up->u_px - down->u_px) / (2.0 * h);
      const double dv = (up->v_px - down->v_px) / (2.0 * h);
      EXPECT_NEAR(pixel->u_px.v[i], du, 0.05 + 1e-5 * std::abs(du)) << "parameter " << i;
      EXPECT_NEAR(pixel->v_px.v[i], dv, 0.05 + 1e-5 * std::abs(dv)) << "parameter " << i;
      const auto there = pixel_to_floor(moved(h), pixel->u_px.a, pixel->v_px.a, 0.02);
      const auto here = pixel_to_floor(moved(-h), pixel->u_px.a, pixel->v_px.a, 0.02);
      ASSERT_TRUE(there && here);
      const double dx = (there->x_m - here->x_m) / (2.0 * h);
      const double dy = (there->y_m - here->y_m) / (2.0 * h);
      EXPECT_NEAR(floor->x_m.v[i], dx, 1e-6 + 1e-5 * std::abs(dx)) << "parameter " << i;
      EXPECT_NEAR(floor->y_m.v[i], dy, 1e-6 + 1e-5 * std::abs(dy)) << "parameter " << i;
    }
  }
}

TEST(Trace, DerivativesToTheFloorAndToThePixelAreInverse) {
  std::mt19937 random(9);
  using J2 = ceres::Jet<double, 2>;
  const RigGeometry<double> rig = crooked_rig(random, 1.0);
  const RigGeometry<J2> jets = rig.in<J2>();
  const auto pixel = floor_to_pixel(jets, J2(0.7, 0), J2(-0.4, 1), J2(0.0));
  ASSERT_TRUE(pixel);
  const auto floor = pixel_to_floor(jets, J2(pixel->u_px.a, 0), J2(pixel->v_px.a, 1), J2(0.0));
  ASSERT_TRUE(floor);
  const double one = pixel->u_px.v[0] * floor->x_m.v[0] + pixel->v_px.v[0] * floor->x_m.v[1];
  const double zero = pixel->u_px.v[0] * floor->y_m.v[0] + pixel->v_px.v[0] * floor->y_m.v[1];
  EXPECT_NEAR(one, 1.0, 1e-9);
  EXPECT_NEAR(zero, 0.0, 1e-9);
}

TEST(Trace, RimImageIsTheEllipseOfItsPoints) {
  std::mt19937 random(10);
  for (int i = 0; i < 10; ++i) {
    const RigGeometry<double> rig = crooked_rig(random, 3.0);
    const auto image = rim_image(rig, 0.030);
    ASSERT_TRUE(image);
    const Vec3<double> axis = rig.axis();
    Vec3<double> e1{axis.z, 0.0, -axis.x};
    e1 = (1.0 / std::sqrt(dot(e1, e1))) * e1;
    const Vec3<double> e2{axis.y * e1.z - axis.z * e1.y,
                          axis.z * e1.x - axis.x * e1.z,
                          axis.x * e1.y - axis.y * e1.x};
    const double sag = *sag_m(rig.mirror, 0.030);
    for (double a = 0.0; a < 6.2; a += 0.5) {
      const Vec3<double> p =
          rig.vertex_m() + sag * axis + (0.030 * std::cos(a)) * e1 + (0.030 * std::sin(a)) * e2;
      const double du = rig.cu_px + rig.focal_px * p.x / p.z - image->centre.u_px;
      const double dv = rig.cv_px + rig.focal_px * p.y / p.z - image->centre.v_px;
      const double det = image->s_uu * image->s_vv - image->s_uv * image->s_uv;
      const double q =
          (image->s_vv * du * du - 2.0 * image->s_uv * du * dv + image->s_uu * dv * dv) / det;
      EXPECT_NEAR(q, 1.0, 1e-10);
    }
  }
}

TEST(Trace, HalfADegreeOfTiltMovesTheRimByThreeQuartersOfAPixel) {
  // By hand: the rim's plane is sag = 9.76 mm behind the vertex, so its middle moves by
  // f sag tan(0.5 deg) / (d + sag) = 0.32 px; the near side grows and the far side shrinks, which
  // moves the ellipse's middle by f r^2 tan(0.5 deg) / (d + sag)^2 = 0.42 px more.
  RigGeometry<double> rig = example_rig();
  rig.tilt_x = std::tan(0.5 * std::numbers::pi / 180.0);
  const double sag = *sag_m(rig.mirror, 0.030);
  const double reach = rig.distance_m + sag;
  const double by_hand = 260.0 * rig.tilt_x * (sag / reach + 0.030 * 0.030 / (reach * reach));
  EXPECT_NEAR(rim_image(rig, 0.030)->centre.u_px - rig.cu_px, by_hand, 1e-3);
}

TEST(Trace, CameraSeesItselfWhereItsSightReturns) {
  std::mt19937 random(12);
  for (const double k : {0.5, 0.0, -1.0, -2.25}) {
    RigGeometry<double> rig = crooked_rig(random, 2.0);
    rig.mirror.conic_constant = k;
    const auto pixel = reflection_centre(rig);
    ASSERT_TRUE(pixel);
    const auto sight = sight_of(rig, pixel->u_px, pixel->v_px);
    ASSERT_TRUE(sight);
    // The reflected ray runs back through the origin.
    const double along = -dot(sight->from_m, sight->along) / dot(sight->along, sight->along);
    const Vec3<double> closest = sight->from_m + along * sight->along;
    EXPECT_LT(std::sqrt(dot(closest, closest)), 1e-12) << "K " << k;
  }
  RigGeometry<double> cone = example_rig();
  cone.mirror.kind = MirrorKind::cone;
  cone.mirror.slope_rad = 0.5;
  EXPECT_FALSE(reflection_centre(cone));
}

}  // namespace
}  // namespace rondel::optics
