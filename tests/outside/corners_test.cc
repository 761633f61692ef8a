// A general-purpose library's own sample data (OpenCV, Apache-2.0), where it is present: corners of
// a chessboard held before a mirror camera, fitted by the sphere model here and by that library's
// own calibration of the same model.
#include <ceres/ceres.h>
#include <ceres/rotation.h>
#include <gtest/gtest.h>

#include <Eigen/Dense>
#include <array>
#include <cmath>
#include <filesystem>
#include <fstream>
#include <map>
#include <memory>
#include <opencv2/ccalib/omnidir.hpp>
#include <opencv2/core.hpp>
#include <sstream>
#include <string>
#include <vector>

#include "calib/optics/sphere_model.h"

namespace rondel::optics {
namespace {

constexpr double kWidthPx = 1280.0;
constexpr double kHeightPx = 960.0;

struct Corner {
  double x, y, u_px, v_px;
};
using View = std::vector<Corner>;

std::vector<View> read_views(const std::filesystem::path& path) {
  std::ifstream file(path);
  std::map<int, View> views;
  std::string line;
  std::getline(file, line);
  while (std::getline(file, line)) {
    for (char& c : line) c = c == ',' ? ' ' : c;
    std::istringstream row(line);
    int view = 0;
    int corner = 0;
    Corner c{};
    if (row >> view >> corner >> c.x >> c.y >> c.u_px >> c.v_px) views[view].push_back(c);
  }
  std::vector<View> result;
  for (auto& [number, view] : views) result.push_back(view);
  return result;
}

struct Pose {
  std::array<double, 3> turn{};  ///< rotation vector, camera from board
  std::array<double, 3> shift{};
};

/// A plane's pose from directions: d x (r1 X + r2 Y + t) = 0 is linear in [r1 r2 t].
Pose pose_of(const View& view, const SphereModel<double>& model) {
  Eigen::MatrixXd a(3 * static_cast<Eigen::Index>(view.size()), 9);
  std::vector<Eigen::Vector3d> directions;
  Eigen::Index row = 0;
  for (const Corner& c : view) {
    const auto d = back_project(model, Pixel<double>{c.u_px, c.v_px});
    const Eigen::Vector3d v = d ? Eigen::Vector3d(d->x, d->y, d->z) : Eigen::Vector3d::Zero();
    directions.push_back(v);
    Eigen::Matrix3d cross;
    cross << 0, -v.z(), v.y(), v.z(), 0, -v.x(), -v.y(), v.x(), 0;
    a.block<3, 3>(row, 0) = c.x * cross;
    a.block<3, 3>(row, 3) = c.y * cross;
    a.block<3, 3>(row, 6) = cross;
    row += 3;
  }
  const Eigen::JacobiSVD<Eigen::MatrixXd> svd(a, Eigen::ComputeThinV);
  Eigen::VectorXd h = svd.matrixV().col(8);
  double sign = 0.0;
  for (std::size_t i = 0; i < view.size(); ++i) {
    sign += directions[i].dot(view[i].x * h.segment<3>(0) + view[i].y * h.segment<3>(3) +
                              h.segment<3>(6));
  }
  if (sign < 0.0) h = -h;
  const double scale = 2.0 / (h.segment<3>(0).norm() + h.segment<3>(3).norm());
  Eigen::Matrix3d r;
  r.col(0) = scale * h.segment<3>(0);
  r.col(1) = scale * h.segment<3>(3);
  r.col(2) = r.col(0).cross(r.col(1));
  const Eigen::JacobiSVD<Eigen::Matrix3d> polar(r, Eigen::ComputeFullU | Eigen::ComputeFullV);
  const Eigen::Matrix3d rotation = polar.matrixU() * polar.matrixV().transpose();
  const Eigen::AngleAxisd turn(rotation);
  Pose pose;
  for (int i = 0; i < 3; ++i) {
    pose.turn[static_cast<std::size_t>(i)] = turn.angle() * turn.axis()[i];
    pose.shift[static_cast<std::size_t>(i)] = scale * h[6 + i];
  }
  return pose;
}

/// xi, gamma_u, gamma_v, skew, cu, cv, k1, k2, p1, p2.
using SphereParameters = std::array<double, 10>;

template <class T>
SphereModel<T> sphere_of(const T* p) {
  SphereModel<T> m;
  m.xi = p[0];
  m.gamma_u_px = p[1];
  m.gamma_v_px = p[2];
  m.skew_px = p[3];
  m.cu_px = p[4];
  m.cv_px = p[5];
  m.k1 = p[6];
  m.k2 = p[7];
  m.p1 = p[8];
  m.p2 = p[9];
  return m;
}

struct SphereCorner {
  Corner corner;
  template <class T>
  bool operator()(const T* parameters, const T* turn, const T* shift, T* residual) const {
    const T on_board[3] = {T(corner.x), T(corner.y), T(0.0)};
    T at[3];
    ceres::AngleAxisRotatePoint(turn, on_board, at);
    const auto pixel = project(sphere_of(parameters),
                               Vec3<T>{at[0] + shift[0], at[1] + shift[1], at[2] + shift[2]});
    if (!pixel) return false;
    residual[0] = pixel->u_px - T(corner.u_px);
    residual[1] = pixel->v_px - T(corner.v_px);
    return true;
  }
};

double rms_px(double cost, const std::vector<View>& views) {
  std::size_t corners = 0;
  for (const View& view : views) corners += view.size();
  return std::sqrt(2.0 * cost / static_cast<double>(corners));
}

/// Our fit from nothing but the image's size: xi = 1, the scale by trying, poses linearly.
double fit_sphere(const std::vector<View>& views, SphereParameters& best) {
  double best_cost = 1e300;
  for (const double gamma : {200.0, 280.0, 400.0, 560.0}) {
    SphereParameters p{
        1.0, gamma, gamma, 0.0, 0.5 * (kWidthPx - 1), 0.5 * (kHeightPx - 1), 0.0, 0.0, 0.0, 0.0};
    std::vector<Pose> poses;
    for (const View& view : views) poses.push_back(pose_of(view, sphere_of(p.data())));
    ceres::Problem problem;
    for (std::size_t v = 0; v < views.size(); ++v) {
      for (const Corner& c : views[v]) {
        problem.AddResidualBlock(
            new ceres::AutoDiffCostFunction<SphereCorner, 2, 10, 3, 3>(new SphereCorner{c}),
            nullptr,
            p.data(),
            poses[v].turn.data(),
            poses[v].shift.data());
      }
    }
    ceres::Solver::Options options;
    options.max_num_iterations = 400;
    options.linear_solver_type = ceres::DENSE_SCHUR;
    options.function_tolerance = 1e-12;
    options.logging_type = ceres::SILENT;
    ceres::Solver::Summary summary;
    ceres::Solve(options, &problem, &summary);
    if (summary.IsSolutionUsable() && summary.final_cost < best_cost) {
      best_cost = summary.final_cost;
      best = p;
    }
  }
  return rms_px(best_cost, views);
}

/// a0, a2 .. a6 (radius in units of kUnitPx), cu, cv, the affine stretch c, d, e, and p1, p2:
/// polynomial omnidirectional model (Scaramuzza, Martinelli and Siegwart 2006).
using TaylorParameters = std::array<double, 13>;
constexpr double kUnitPx = 300.0;

template <class T>
T taylor_depth(const T* p, const T& r) {
  return p[0] + r * r * (p[1] + r * (p[2] + r * (p[3] + r * (p[4] + r * p[5]))));
}

struct TaylorCorner {
  Corner corner;
  template <class T>
  bool operator()(const T* p, const T* turn, const T* shift, T* residual) const {
    using std::sqrt;
    const T on_board[3] = {T(corner.x), T(corner.y), T(0.0)};
    T at[3];
    ceres::AngleAxisRotatePoint(turn, on_board, at);
    for (int k = 0; k < 3; ++k) at[k] += shift[k];
    const T lateral = sqrt(at[0] * at[0] + at[1] * at[1]);
    // The image radius whose line of sight has this slope: bisection on plain numbers, then one
    // Newton step which carries the derivatives.
    std::array<double, 6> plain{};
    for (std::size_t k = 0; k < plain.size(); ++k) plain[k] = value_of(p[k]);
    const double out = value_of(lateral);
    const double down = value_of(at[2]);
    const auto miss = [&](double r) { return r * down - taylor_depth(plain.data(), r) * out; };
    // Outwards from the middle; the slope falls with the radius.
    double low = 0.0;
    double high = 0.0;
    const double sign = miss(1e-6) < 0.0 ? 1.0 : -1.0;
    for (int i = 1; i <= 60; ++i) {
      high = 0.05 * i;
      if (sign * miss(high) >= 0.0) break;
      low = high;
    }
    if (sign * miss(high) < 0.0) return false;
    for (int i = 0; i < 60; ++i) {
      const double middle = 0.5 * (low + high);
      (sign * miss(middle) < 0.0 ? low : high) = middle;
    }
    const double r0 = 0.5 * (low + high);
    const double slope = (miss(r0 + 1e-6) - miss(r0 - 1e-6)) / 2e-6;
    if (!(std::abs(slope) > 1e-9)) return false;
    const T r = T(r0) - (T(r0) * at[2] - taylor_depth(p, T(r0)) * lateral) / T(slope);
    const T nx = r * at[0] / lateral;
    const T ny = r * at[1] / lateral;
    const T x = T(kUnitPx) * (nx + T(2.0) * p[11] * nx * ny + p[12] * (r * r + T(2.0) * nx * nx));
    const T y = T(kUnitPx) * (ny + T(2.0) * p[12] * nx * ny + p[11] * (r * r + T(2.0) * ny * ny));
    residual[0] = p[6] + p[8] * x + p[9] * y - T(corner.u_px);
    residual[1] = p[7] + p[10] * x + y - T(corner.v_px);
    return true;
  }
};

/// Started from the sphere model's curve.
double fit_taylor(const std::vector<View>& views, const SphereParameters& sphere) {
  SphereParameters bare = sphere;
  for (std::size_t k = 6; k < bare.size(); ++k) bare[k] = 0.0;
  const SphereModel<double> model = sphere_of(bare.data());
  Eigen::MatrixXd rows(60, 6);
  Eigen::VectorXd depth(60);
  for (int i = 0; i < 60; ++i) {
    const double r = 0.025 * (i + 1);
    const auto d = back_project(model, Pixel<double>{model.cu_px + kUnitPx * r, model.cv_px});
    rows.row(i) << 1.0, r * r, r * r * r, std::pow(r, 4), std::pow(r, 5), std::pow(r, 6);
    depth[i] = d ? r * d->z / d->x : 0.0;
  }
  const Eigen::VectorXd a = rows.colPivHouseholderQr().solve(depth);
  TaylorParameters p{
      a[0], a[1], a[2], a[3], a[4], a[5], model.cu_px, model.cv_px, 1.0, 0.0, 0.0, 0.0, 0.0};
  std::vector<Pose> poses;
  for (const View& view : views) poses.push_back(pose_of(view, model));
  ceres::Problem problem;
  for (std::size_t v = 0; v < views.size(); ++v) {
    for (const Corner& c : views[v]) {
      problem.AddResidualBlock(
          new ceres::AutoDiffCostFunction<TaylorCorner, 2, 13, 3, 3>(new TaylorCorner{c}),
          nullptr,
          p.data(),
          poses[v].turn.data(),
          poses[v].shift.data());
    }
  }
  ceres::Solver::Options options;
  options.max_num_iterations = 400;
  options.linear_solver_type = ceres::DENSE_QR;
  options.function_tolerance = 1e-12;
  options.logging_type = ceres::SILENT;
  ceres::Solver::Summary summary;
  ceres::Solve(options, &problem, &summary);
  return summary.IsSolutionUsable() ? rms_px(summary.final_cost, views) : 1e300;
}

TEST(RealCorners, SphereAndTaylorModelsFitThemAsWellAsTheLibrary) {
  const std::filesystem::path path =
      std::filesystem::path(RONDEL_SOURCE_DIR) / "../shared/real/corners.csv";
  if (!std::filesystem::exists(path)) GTEST_SKIP() << "no real corners beside the checkout";
  const std::vector<View> all = read_views(path);
  ASSERT_EQ(all.size(), 15U);

  std::vector<cv::Mat> boards;
  std::vector<cv::Mat> images;
  for (const View& view : all) {
    cv::Mat board(1, static_cast<int>(view.size()), CV_64FC3);
    cv::Mat image(1, static_cast<int>(view.size()), CV_64FC2);
    for (int i = 0; i < board.cols; ++i) {
      const Corner& c = view[static_cast<std::size_t>(i)];
      board.at<cv::Vec3d>(i) = {c.x, c.y, 0.0};
      image.at<cv::Vec2d>(i) = {c.u_px, c.v_px};
    }
    boards.push_back(board);
    images.push_back(image);
  }
  cv::Mat camera;
  cv::Mat xi;
  cv::Mat distortion;
  cv::Mat used;
  std::vector<cv::Mat> turns;
  std::vector<cv::Mat> shifts;
  const double theirs = cv::omnidir::calibrate(
      boards,
      images,
      cv::Size(static_cast<int>(kWidthPx), static_cast<int>(kHeightPx)),
      camera,
      xi,
      distortion,
      turns,
      shifts,
      0,
      cv::TermCriteria(cv::TermCriteria::COUNT + cv::TermCriteria::EPS, 500, 1e-10),
      used);
  // The library drops views that its start cannot place; both are held to the same ones.
  std::vector<View> views;
  for (int i = 0; i < static_cast<int>(used.total()); ++i) {
    views.push_back(all[static_cast<std::size_t>(used.at<int>(i))]);
  }
  ASSERT_GE(views.size(), 10U);
  SphereParameters p{};
  const double ours = fit_sphere(views, p);
  const double taylor = fit_taylor(views, p);
  std::cout << views.size() << " views: library " << theirs << " px, sphere here " << ours
            << " px, taylor " << taylor << " px (xi " << p[0] << ", library's " << xi.at<double>(0)
            << ")\n";
  RecordProperty("library_rms_upx", static_cast<int>(1e6 * theirs));
  RecordProperty("sphere_rms_upx", static_cast<int>(1e6 * ours));
  EXPECT_LE(ours, 1.02 * theirs);
  EXPECT_LE(taylor, 1.02 * theirs);
}

}  // namespace
}  // namespace rondel::optics
