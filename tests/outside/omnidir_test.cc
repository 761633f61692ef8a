// The unified sphere model against a general-purpose library's own: OpenCV's contrib module
// `omnidir` (Debian package libopencv-contrib-dev), and that library's own sample corners.
#include <gtest/gtest.h>

#include <cmath>
#include <opencv2/ccalib/omnidir.hpp>
#include <opencv2/core.hpp>
#include <vector>

#include "calib/optics/sphere_model.h"

namespace rondel::optics {
namespace {

TEST(OmnidirProjectPoints, AgreesOverAGrid) {
  int compared = 0;
  for (const double xi : {0.0, 0.6, 0.9428, 1.0, 1.7}) {
    SphereModel<double> model;
    model.xi = xi;
    model.gamma_u_px = 310.0;
    model.gamma_v_px = 305.0;
    model.skew_px = 1.3;
    model.cu_px = 322.4;
    model.cv_px = 239.1;
    model.k1 = -0.12;
    model.k2 = 0.021;
    model.p1 = 0.0013;
    model.p2 = -0.0007;
    std::vector<cv::Vec3d> points;
    for (double x = -2.0; x <= 2.0; x += 0.5) {
      for (double y = -2.0; y <= 2.0; y += 0.5) {
        for (const double z : {-0.2, 0.3, 1.0, 4.0}) points.emplace_back(x + 0.01, y, z);
      }
    }
    const cv::Matx33d camera(model.gamma_u_px,
                             model.skew_px,
                             model.cu_px,
                             0.0,
                             model.gamma_v_px,
                             model.cv_px,
                             0.0,
                             0.0,
                             1.0);
    std::vector<cv::Vec2d> theirs;
    cv::omnidir::projectPoints(points,
                               theirs,
                               cv::Vec3d(0.0, 0.0, 0.0),
                               cv::Vec3d(0.0, 0.0, 0.0),
                               camera,
                               xi,
                               cv::Vec4d(model.k1, model.k2, model.p1, model.p2));
    for (std::size_t i = 0; i < points.size(); ++i) {
      const Vec3<double> at{points[i][0], points[i][1], points[i][2]};
      const double length = std::sqrt(dot(at, at));
      const auto ours = project(model, at);
      if (at.z / length + xi <= 0.0 || (xi > 1.0 && 1.0 + xi * at.z / length <= 0.0)) {
        EXPECT_FALSE(ours) << "the library projects what the model cannot see";
        continue;
      }
      ASSERT_TRUE(ours);
      ++compared;
      EXPECT_NEAR(ours->u_px, theirs[i][0], 1e-6 * std::max(1.0, std::abs(theirs[i][0]) / 1e3));
      EXPECT_NEAR(ours->v_px, theirs[i][1], 1e-6 * std::max(1.0, std::abs(theirs[i][1]) / 1e3));
    }
  }
  EXPECT_GT(compared, 1200);
}

}  // namespace
}  // namespace rondel::optics
