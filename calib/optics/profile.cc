#include "calib/optics/profile.h"

#include <Eigen/Cholesky>
#include <Eigen/Dense>
#include <Eigen/SVD>
#include <algorithm>
#include <cmath>
#include <limits>
#include <string>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel::optics {
namespace {

constexpr double kBeyondLastPoint = 1.05;
constexpr int kSamples = 200;

/// Values of the four cubic B-splines that live on piece `piece` at local position u in [0, 1].
std::array<double, 4> cubic_basis(double u) {
  const double w = 1.0 - u;
  return {w * w * w / 6.0,
          (3.0 * u * u * u - 6.0 * u * u + 4.0) / 6.0,
          (-3.0 * u * u * u + 3.0 * u * u + 3.0 * u + 1.0) / 6.0,
          u * u * u / 6.0};
}

Eigen::RowVectorXd basis_row(double s_m, double step_m, int pieces) {
  Eigen::RowVectorXd row = Eigen::RowVectorXd::Zero(pieces + 3);
  const int piece = std::clamp(static_cast<int>(s_m / step_m), 0, pieces - 1);
  const double u = s_m / step_m - piece;
  const auto values = cubic_basis(u);
  for (int k = 0; k < 4; ++k) row[piece + k] = values[static_cast<std::size_t>(k)];
  return row;
}

std::vector<std::array<double, 4>> to_pieces(const Eigen::VectorXd& coefficients,
                                             double step_m,
                                             int pieces) {
  std::vector<std::array<double, 4>> result;
  for (int i = 0; i < pieces; ++i) {
    const double p0 = coefficients[i];
    const double p1 = coefficients[i + 1];
    const double p2 = coefficients[i + 2];
    const double p3 = coefficients[i + 3];
    result.push_back({(p0 + 4.0 * p1 + p2) / 6.0,
                      (p2 - p0) / (2.0 * step_m),
                      (p0 - 2.0 * p1 + p2) / (2.0 * step_m * step_m),
                      (p3 - 3.0 * p2 + 3.0 * p1 - p0) / (6.0 * step_m * step_m * step_m)});
  }
  return result;
}

}  // namespace

std::shared_ptr<const Profile> Profile::fit(std::vector<std::pair<double, double>> points_m,
                                            double sag_sd_m) {
  std::sort(points_m.begin(), points_m.end());
  int distinct = 0;
  double last = -1.0;
  for (const auto& [s, sag] : points_m) {
    if (!std::isfinite(s) || !std::isfinite(sag) || s < 0.0) {
      throw InputError("",
                       "mirror profile: every point needs a distance from the axis >= 0 and a sag");
    }
    if (s > last) ++distinct;
    last = s;
  }
  if (distinct < 5) {
    throw InputError("",
                     "mirror profile: " + std::to_string(distinct) +
                         " distinct distances; at least 5 are needed");
  }
  const double end = points_m.back().first;
  const double tallest = points_m.back().second;
  if (!(tallest > 0.0)) {
    throw InputError(
        "",
        "mirror profile: the last point's sag must be above 0; sag grows from the vertex "
        "away from the camera");
  }
  const int n = static_cast<int>(points_m.size());
  const int pieces = std::clamp(distinct - 3, 3, 16);
  const double step = end / pieces;
  const int width = pieces + 3;

  // Everything in units of the tallest sag. The vertex is a measurement that cannot be off.
  constexpr double kVertexWeight = 1e4;
  Eigen::MatrixXd rows(n + 1, width);
  Eigen::VectorXd sags(n + 1);
  for (int i = 0; i < n; ++i) {
    rows.row(i) = basis_row(points_m[static_cast<std::size_t>(i)].first, step, pieces);
    sags[i] = points_m[static_cast<std::size_t>(i)].second / tallest;
  }
  rows.row(n) = kVertexWeight * basis_row(0.0, step, pieces);
  sags[n] = 0.0;
  Eigen::MatrixXd differences = Eigen::MatrixXd::Zero(width - 3, width);
  for (int i = 0; i + 3 < width; ++i) {
    differences(i, i) = -1.0;
    differences(i, i + 1) = 3.0;
    differences(i, i + 2) = -3.0;
    differences(i, i + 3) = 1.0;
  }
  const Eigen::MatrixXd normal = rows.transpose() * rows;
  const Eigen::MatrixXd data_normal = rows.topRows(n).transpose() * rows.topRows(n);
  const Eigen::MatrixXd penalty = differences.transpose() * differences;
  const Eigen::VectorXd right = rows.transpose() * sags;
  const double sd = sag_sd_m / tallest;

  // With a known noise the unbiased risk (Craven and Wahba 1979), else generalised
  // cross-validation.
  double best_score = std::numeric_limits<double>::infinity();
  double best_weight = 1.0;
  for (int k = -48; k <= 32; ++k) {
    const double weight = std::pow(10.0, 0.25 * k);
    const Eigen::LDLT<Eigen::MatrixXd> solver(normal + weight * penalty);
    const Eigen::VectorXd c = solver.solve(right);
    const double rss = (rows.topRows(n) * c - sags.head(n)).squaredNorm();
    const double freedom = solver.solve(data_normal).trace();
    const double left = n - freedom;
    double score = std::numeric_limits<double>::infinity();
    if (sd > 0.0) {
      score = rss / (sd * sd) + 2.0 * freedom;
    } else if (left > 0.5) {
      score = rss / (left * left);
    }
    if (score < best_score) {
      best_score = score;
      best_weight = weight;
    }
  }
  const Eigen::MatrixXd system = normal + best_weight * penalty;
  const Eigen::LDLT<Eigen::MatrixXd> solver(system);
  const Eigen::VectorXd c = solver.solve(right);
  const double freedom = solver.solve(data_normal).trace();
  const double rss = (rows.topRows(n) * c - sags.head(n)).squaredNorm();
  const double used_sd = sd > 0.0 ? sd : std::sqrt(rss / std::max(1.0, n - freedom));

  std::shared_ptr<Profile> profile(new Profile());
  profile->step_m_ = step;
  profile->end_m_ = end;
  profile->reach_m_ = kBeyondLastPoint * end;
  profile->point_sd_m_ = used_sd * tallest;
  profile->pieces_[0] = to_pieces(c * tallest, step, pieces);
  const double at_axis = profile->pieces_[0][0][0];
  for (auto& piece : profile->pieces_[0]) piece[0] -= at_axis;

  // Covariance V = sd^2 system^-1 = L L^T; the modes over the profile are the singular vectors of
  // (samples of the basis) L.
  const Eigen::MatrixXd covariance =
      used_sd * used_sd * solver.solve(Eigen::MatrixXd::Identity(width, width));
  const Eigen::LLT<Eigen::MatrixXd> root(0.5 * (covariance + covariance.transpose()));
  Eigen::MatrixXd samples(kSamples + 1, width);
  for (int i = 0; i <= kSamples; ++i) {
    samples.row(i) = basis_row(profile->reach_m_ * i / kSamples, step, pieces);
  }
  const Eigen::MatrixXd lower = root.matrixL();
  const Eigen::MatrixXd spread = samples * lower;
  const Eigen::JacobiSVD<Eigen::MatrixXd> svd(spread, Eigen::ComputeThinV);
  for (std::size_t m = 0; m < kProfileModes; ++m) {
    Eigen::VectorXd mode = lower * svd.matrixV().col(static_cast<Eigen::Index>(m)) * tallest;
    if (samples.row(kSamples).dot(mode) < 0.0) mode = -mode;  // upwards at the edge, always
    profile->pieces_[m + 1] = to_pieces(mode, step, pieces);
    const double offset = profile->pieces_[m + 1][0][0];
    for (auto& piece : profile->pieces_[m + 1]) piece[0] -= offset;
  }
  for (int i = 0; i <= kSamples; ++i) profile->sd_m_.push_back(spread.row(i).norm() * tallest);

  // Near the axis, where the slope is nothing, noise may turn it: so by tenths.
  for (int i = 1; i <= 10; ++i) {
    const std::array<double, kProfileModes> as_measured{};
    const double from = end * (i - 1) / 10.0;
    const double to = end * i / 10.0;
    if (!(profile->at(to, as_measured).sag_m > profile->at(from, as_measured).sag_m)) {
      throw InputError("",
                       "mirror profile: the smoothed profile does not rise between " +
                           number_text(1e3 * from) + " and " + number_text(1e3 * to) +
                           " mm from the axis; look for a wrong point");
    }
  }
  return profile;
}

std::size_t Profile::piece_of(double s_m) const {
  const double index = s_m / step_m_;
  const std::size_t last = pieces_[0].size() - 1;
  if (!(index > 0.0)) return 0;
  return std::min(static_cast<std::size_t>(index), last);
}

double Profile::sag_sd_m(double s_m) const {
  const double place = std::clamp(s_m / reach_m_, 0.0, 1.0) * kSamples;
  const auto low = std::min(static_cast<std::size_t>(place), sd_m_.size() - 2);
  const double part = place - static_cast<double>(low);
  return (1.0 - part) * sd_m_[low] + part * sd_m_[low + 1];
}

double Profile::vertex_radius_m() const {
  const double bend = 2.0 * pieces_[0][0][2];
  return bend > 0.0 ? 1.0 / bend : std::numeric_limits<double>::infinity();
}

std::optional<double> Profile::meet(double from_x,
                                    double from_y,
                                    double from_z,
                                    double along_x,
                                    double along_y,
                                    double along_z,
                                    const std::array<double, kProfileModes>& modes) const {
  if (!(along_z > 0.0) || !(from_z < 0.0)) return std::nullopt;
  // From the vertex plane to where the ray leaves the profile's cylinder or its height.
  double low = -from_z / along_z;
  const double edge = at(reach_m_, modes).sag_m;
  double high = (edge - from_z) / along_z;
  const double a = along_x * along_x + along_y * along_y;
  const double b = from_x * along_x + from_y * along_y;
  const double c = from_x * from_x + from_y * from_y - reach_m_ * reach_m_;
  if (a > 0.0) {
    const double discriminant = b * b - a * c;
    if (!(discriminant > 0.0)) return std::nullopt;
    high = std::min(high, (std::sqrt(discriminant) - b) / a);
  }
  if (!(high > low)) return std::nullopt;
  struct Gap {
    double value, slope;
  };
  const auto gap = [&](double t) -> Gap {
    const double x = from_x + t * along_x;
    const double y = from_y + t * along_y;
    const double s = std::min(std::hypot(x, y), reach_m_);
    const auto surface = at(s, modes);
    const double out = s > 0.0 ? (x * along_x + y * along_y) / s : 0.0;
    return {from_z + t * along_z - surface.sag_m, along_z - surface.slope * out};
  };
  if (gap(low).value > 0.0 || gap(high).value < 0.0) return std::nullopt;
  double t = 0.5 * (low + high);
  for (int i = 0; i < 100; ++i) {
    const Gap g = gap(t);
    (g.value < 0.0 ? low : high) = t;
    double next = t - g.value / g.slope;
    if (!(next > low && next < high)) next = 0.5 * (low + high);
    const double moved = std::abs(next - t);
    t = next;
    if (moved <= 1e-15 * t) break;
  }
  const double s = std::hypot(from_x + t * along_x, from_y + t * along_y);
  if (s < 1e-9 || s > reach_m_) return std::nullopt;
  return t;
}

}  // namespace rondel::optics
