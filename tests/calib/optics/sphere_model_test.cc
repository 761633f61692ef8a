#include "calib/optics/sphere_model.h"

#include <gtest/gtest.h>

#include <cmath>
#include <random>

#include "calib/optics/conic_forms.h"

namespace rondel::optics {
namespace {

SphereModel<double> model_with(double xi) {
  SphereModel<double> m;
  m.xi = xi;
  m.gamma_u_px = 210.0;
  m.gamma_v_px = 208.0;
  m.skew_px = 0.7;
  m.cu_px = 160.0;
  m.cv_px = 121.0;
  return m;
}

TEST(SphereModel, LiftAndProjectAreInverse) {
  std::mt19937 random(2);
  std::normal_distribution<double> normal;
  for (const double xi : {0.0, 0.5, 0.94, 1.0, 1.8}) {
    const SphereModel<double> model = model_with(xi);
    int seen = 0;
    for (int i = 0; i < 500; ++i) {
      Vec3<double> d{normal(random), normal(random), normal(random)};
      const double length = std::sqrt(dot(d, d));
      // Closer to the last ray of the model than this the lift loses digits with its square root.
      if (xi * d.z / length + 1.0 < 0.02 || d.z / length + xi < 0.02) continue;
      const auto pixel = project(model, d);
      if (!pixel) continue;
      ++seen;
      const auto back = back_project(model, *pixel);
      ASSERT_TRUE(back);
      EXPECT_NEAR(back->x, d.x / length, 1e-11) << "xi " << xi;
      EXPECT_NEAR(back->y, d.y / length, 1e-11);
      EXPECT_NEAR(back->z, d.z / length, 1e-11);
    }
    EXPECT_GT(seen, 150) << "xi " << xi;
  }
}

TEST(SphereModel, BehindItsLastRayThereIsNothing) {
  EXPECT_FALSE(project(model_with(0.5), Vec3<double>{0.1, 0.0, -1.0}));
  EXPECT_TRUE(project(model_with(0.5), Vec3<double>{1.0, 0.0, -0.2}));
  EXPECT_FALSE(project(model_with(1.8), Vec3<double>{0.1, 0.0, -1.0}));
  EXPECT_FALSE(project(model_with(0.9), Vec3<double>{0.0, 0.0, 0.0}));
  EXPECT_FALSE(back_project(model_with(1.8), Pixel<double>{900.0, 121.0}));
}

TEST(SphereModel, IsAHyperboloidWithThePinholeInItsFocus) {
  // Two computations of one rig: the physical trace, and the sphere with xi = 2e/(1+e^2). Both
  // radii grow from 0, so one common scale, taken at one ray, must fit all others.
  const double e = 1.5;
  const OpticalConic form = from_eccentricity({e, 0.0}, {0.040, 0.0});
  const double a = 0.040 / (e * e - 1.0);
  const double c = 2.0 * a * e;  // between the foci
  RigGeometry<double> rig;
  rig.focal_px = 260.0;
  rig.distance_m = 0.5 * c + a;
  rig.mirror.vertex_radius_m = form.vertex_radius_m.value;
  rig.mirror.conic_constant = form.conic_constant.value;
  rig.eye_height_m = 0.16;
  SphereModel<double> model;
  model.xi = 2.0 * e / (1.0 + e * e);
  model.gamma_u_px = model.gamma_v_px = 1.0;
  const double focus_height_m = rig.eye_height_m + c;
  double scale = 0.0;
  for (const double range_m : {0.2, 0.5, 1.0, 3.0, 20.0}) {
    const auto truth = axial_radius_px(rig, range_m, 0.0);
    const auto unit = project(model, Vec3<double>{range_m, 0.0, focus_height_m});
    ASSERT_TRUE(truth && unit);
    if (scale == 0.0) scale = *truth / unit->u_px;
    EXPECT_NEAR(scale * unit->u_px, *truth, 1e-9) << "range " << range_m;
  }
}

}  // namespace
}  // namespace rondel::optics
