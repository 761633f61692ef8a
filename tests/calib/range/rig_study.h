#pragma once

#include <Eigen/Dense>
#include <cmath>
#include <functional>
#include <limits>
#include <numbers>
#include <optional>
#include <random>
#include <thread>
#include <vector>

#include "calib/optics/trace.h"
#include "calib/range/fit.h"

namespace rondel::range::study {

/// The drawing all rigs of the study are built from.
inline RigSpec drawing() {
  RigSpec rig;
  rig.camera.width_px = 320;
  rig.camera.height_px = 240;
  rig.camera.focal_px = Uncertain{260.0, 0.02 * 260.0};
  MirrorSpec mirror;
  mirror.shape = ConicSpec{{0.040, 0.02 * 0.040}, {-2.25, 0.08}, 0.0};
  mirror.rim_radius_m = 0.030;
  mirror.distance_m = {0.060, 0.001};
  rig.mirror = mirror;
  rig.mounting.eye_height_m = Uncertain{0.160, 0.003};
  rig.mounting.mirrored = true;
  rig.mounting.heading_rad = 0.0;
  return rig;
}

enum class Family { straight, as_built };

/// The numbers a rig is drawn from: mean, one standard deviation, and where they go.
struct Draw {
  double mean, sd;
  double optics::RigGeometry<double>::*member;
  double optics::Mirror<double>::*mirror_member = nullptr;
};
inline std::vector<Draw> draws(Family family) {
  using R = optics::RigGeometry<double>;
  using M = optics::Mirror<double>;
  std::vector<Draw> list = {{260.0, 5.2, &R::focal_px},
                            {159.5, 8.0, &R::cu_px},
                            {119.5, 8.0, &R::cv_px},
                            {0.060, 0.001, &R::distance_m},
                            {0.160, 0.003, &R::eye_height_m},
                            {0.0, 1.0 * kRadPerDeg, &R::heading_rad},
                            {0.040, 0.0008, nullptr, &M::vertex_radius_m},
                            {-2.25, 0.08, nullptr, &M::conic_constant}};
  if (family == Family::as_built) {
    list.push_back({0.0, 0.5 * kRadPerDeg, &R::tilt_x});
    list.push_back({0.0, 0.5 * kRadPerDeg, &R::tilt_y});
    list.push_back({0.0, 0.3e-3, &R::shift_x_m});
    list.push_back({0.0, 0.3e-3, &R::shift_y_m});
    list.push_back({0.0, 0.3 * kRadPerDeg, &R::floor_tilt_x});
    list.push_back({0.0, 0.3 * kRadPerDeg, &R::floor_tilt_y});
  }
  return list;
}
inline double& value(optics::RigGeometry<double>& rig, const Draw& d) {
  return d.member != nullptr ? rig.*d.member : rig.mirror.*d.mirror_member;
}
inline optics::RigGeometry<double> draw_rig(Family family, std::mt19937& random) {
  std::normal_distribution<double> normal;
  optics::RigGeometry<double> rig;
  for (const Draw& d : draws(family)) value(rig, d) = d.mean + d.sd * normal(random);
  return rig;
}

struct Noise {
  double mark_px = 0.5;
  double tape_m = 0.003;
  double rim_px = 0.2;
};

/// Ranges in geometric steps, bearings by the golden angle.
inline std::vector<FloorSpot> plan(int marks) {
  std::vector<FloorSpot> spots;
  for (int i = 0; i < marks; ++i) {
    const double t = marks > 1 ? static_cast<double>(i) / (marks - 1) : 0.5;
    spots.push_back(
        {0.25 * std::pow(10.0, t), wrap_angle(i * std::numbers::pi * (3.0 - std::sqrt(5.0)))});
  }
  return spots;
}

inline std::optional<ImagePoint> seen(const optics::RigGeometry<double>& rig,
                                      FloorSpot spot,
                                      double height_m) {
  const FloorPoint p = to_point(spot);
  const auto pixel = optics::floor_to_pixel(rig, p.x_m, p.y_m, height_m);
  if (!pixel) return std::nullopt;
  return ImagePoint{pixel->u_px, pixel->v_px};
}

inline FitInput observe(const optics::RigGeometry<double>& rig,
                        const std::vector<FloorSpot>& spots,
                        const Noise& noise,
                        std::mt19937& random,
                        double height_m = 0.0) {
  std::normal_distribution<double> normal;
  FitInput input;
  input.rig = drawing();
  const auto rim = optics::rim_image(rig, 0.030);
  const double var = noise.rim_px * noise.rim_px;
  input.rim_centre = ObservedPoint{{rim->centre.u_px + noise.rim_px * normal(random),
                                    rim->centre.v_px + noise.rim_px * normal(random)},
                                   {var, 0.0, var}};
  for (const FloorSpot& spot : spots) {
    const auto pixel = seen(rig, spot, height_m);
    if (!pixel) continue;
    const FloorPoint p = to_point(spot);
    const FloorSpot taped =
        to_spot({p.x_m + noise.tape_m * normal(random), p.y_m + noise.tape_m * normal(random)});
    MarkInput mark;
    mark.line = static_cast<int>(input.marks.size()) + 2;
    mark.pixel = {pixel->u_px + noise.mark_px * normal(random),
                  pixel->v_px + noise.mark_px * normal(random)};
    mark.pixel_sd_px = noise.mark_px;
    mark.tape_sd_m = noise.tape_m;
    mark.range_m = taped.range_m;
    mark.bearing_rad = taped.bearing_rad;
    mark.height_m = height_m;
    mark.floor_mark = height_m == 0.0;
    input.marks.push_back(mark);
  }
  return input;
}

/// The floor over which errors are averaged.
inline std::vector<FloorSpot> floor_cells() {
  std::vector<FloorSpot> cells;
  for (int i = 0; i < 10; ++i) {
    for (int k = 0; k < 10; ++k) {
      cells.push_back({0.3 * std::pow(2.5 / 0.3, i / 9.0),
                       wrap_angle(0.1 + 2.0 * std::numbers::pi * k / 10.0)});
    }
  }
  return cells;
}

struct Score {
  double square = 0.0;  ///< of relative range errors
  int cells = 0;
  int covered = 0;  ///< true range inside the 95 % band
  int lost = 0;     ///< cells without an answer
  void operator+=(const Score& o) {
    square += o.square;
    cells += o.cells;
    covered += o.covered;
    lost += o.lost;
  }
  [[nodiscard]] double rms() const { return std::sqrt(square / std::max(1, cells)); }
  [[nodiscard]] double coverage() const {
    return static_cast<double>(covered) / std::max(1, cells);
  }
};

inline Score score(const RangeCurve& curve,
                   const optics::RigGeometry<double>& rig,
                   double height_m = 0.0,
                   double used_height_m = 0.0) {
  Score s;
  for (const FloorSpot& cell : floor_cells()) {
    const auto pixel = seen(rig, cell, height_m);
    if (!pixel) continue;
    const auto e = curve.floor_with_band(*pixel, used_height_m);
    if (!e) {
      ++s.lost;
      continue;
    }
    s.square += std::pow(e->spot.range_m / cell.range_m - 1.0, 2);
    ++s.cells;
    s.covered += e->band95_low_m <= cell.range_m && cell.range_m <= e->band95_high_m ? 1 : 0;
  }
  return s;
}

/// The posterior Cramer-Rao bound (van Trees 1968) of the RMS relative range error, for one rig: by
/// numerical derivatives of the trace alone.
inline double bound_square(Family family,
                           const optics::RigGeometry<double>& rig,
                           const std::vector<FloorSpot>& spots,
                           const Noise& noise) {
  const std::vector<Draw> list = draws(family);
  const auto n = static_cast<Eigen::Index>(list.size());
  // In units of each number's own spread.
  Eigen::MatrixXd information = Eigen::MatrixXd::Identity(n, n);
  const auto derivative =
      [&](const std::function<Eigen::Vector2d(const optics::RigGeometry<double>&)>& f) {
        Eigen::MatrixXd j(2, n);
        for (Eigen::Index k = 0; k < n; ++k) {
          constexpr double kStep = 1e-3;
          auto above = rig;
          auto below = rig;
          const Draw& d = list[static_cast<std::size_t>(k)];
          value(above, d) += kStep * d.sd;
          value(below, d) -= kStep * d.sd;
          j.col(k) = (f(above) - f(below)) / (2.0 * kStep);
        }
        return j;
      };
  const auto add = [&](const Eigen::MatrixXd& j, const Eigen::Matrix2d& w) {
    information += j.transpose() * w.inverse() * j;
  };
  add(derivative([](const optics::RigGeometry<double>& r) {
        const auto rim = optics::rim_image(r, 0.030);
        return Eigen::Vector2d(rim->centre.u_px, rim->centre.v_px);
      }),
      noise.rim_px * noise.rim_px * Eigen::Matrix2d::Identity());
  for (const FloorSpot& spot : spots) {
    const FloorPoint p = to_point(spot);
    const auto at = [](const optics::RigGeometry<double>& r, double x, double y) {
      const auto pixel = optics::floor_to_pixel(r, x, y, 0.0);
      return pixel ? Eigen::Vector2d(pixel->u_px, pixel->v_px)
                   : Eigen::Vector2d::Constant(std::numeric_limits<double>::quiet_NaN());
    };
    constexpr double kStep = 1e-5;
    Eigen::Matrix2d by_place;
    by_place.col(0) =
        (at(rig, p.x_m + kStep, p.y_m) - at(rig, p.x_m - kStep, p.y_m)) / (2.0 * kStep);
    by_place.col(1) =
        (at(rig, p.x_m, p.y_m + kStep) - at(rig, p.x_m, p.y_m - kStep)) / (2.0 * kStep);
    const Eigen::MatrixXd j =
        derivative([&](const optics::RigGeometry<double>& r) { return at(r, p.x_m, p.y_m); });
    if (!j.allFinite() || !by_place.allFinite()) continue;
    add(j,
        noise.mark_px * noise.mark_px * Eigen::Matrix2d::Identity() +
            noise.tape_m * noise.tape_m * by_place * by_place.transpose());
  }
  const Eigen::MatrixXd covariance = information.inverse();
  double sum = 0.0;
  int cells = 0;
  for (const FloorSpot& cell : floor_cells()) {
    const auto pixel = seen(rig, cell, 0.0);
    if (!pixel) continue;
    const Eigen::MatrixXd j = derivative([&](const optics::RigGeometry<double>& r) {
      const auto place = optics::pixel_to_floor(r, pixel->u_px, pixel->v_px, 0.0);
      return place ? Eigen::Vector2d(std::log(std::hypot(place->x_m, place->y_m)), 0.0)
                   : Eigen::Vector2d::Constant(std::numeric_limits<double>::quiet_NaN());
    });
    if (!j.allFinite()) continue;
    sum += (j.row(0) * covariance * j.row(0).transpose()).value();
    ++cells;
  }
  return sum / std::max(1, cells);
}

/// What people do in a spreadsheet: range as a polynomial of the radius about the rim's centre,
/// ordinary least squares. RMS relative error over the floor.
inline Score polynomial_score(const FitInput& input,
                              int degree,
                              const optics::RigGeometry<double>& rig) {
  const auto n = static_cast<Eigen::Index>(input.marks.size());
  Eigen::MatrixXd rows(n, degree + 1);
  Eigen::VectorXd range(n);
  const ImagePoint c = input.rim_centre->at;
  const auto fill = [&](double radius, auto&& row) {
    double power = 1.0;
    for (int k = 0; k <= degree; ++k) {
      row[k] = power;
      power *= radius / 100.0;
    }
  };
  for (Eigen::Index i = 0; i < n; ++i) {
    const MarkInput& m = input.marks[static_cast<std::size_t>(i)];
    fill(std::hypot(m.pixel.u_px - c.u_px, m.pixel.v_px - c.v_px), rows.row(i));
    range[i] = m.range_m;
  }
  const Eigen::VectorXd a = rows.colPivHouseholderQr().solve(range);
  Score s;
  for (const FloorSpot& cell : floor_cells()) {
    const auto pixel = seen(rig, cell, 0.0);
    if (!pixel) continue;
    Eigen::RowVectorXd row(degree + 1);
    fill(std::hypot(pixel->u_px - c.u_px, pixel->v_px - c.v_px), row);
    s.square += std::pow(row.dot(a) / cell.range_m - 1.0, 2);
    ++s.cells;
  }
  return s;
}

/// Calls work(index) for 0 .. count - 1 on all cores.
inline void on_all_cores(int count, const std::function<void(int)>& work) {
  const unsigned workers = std::max(1U, std::thread::hardware_concurrency());
  std::vector<std::thread> threads;
  for (unsigned w = 0; w < workers; ++w) {
    threads.emplace_back([&, w] {
      for (int i = static_cast<int>(w); i < count; i += static_cast<int>(workers)) work(i);
    });
  }
  for (std::thread& t : threads) t.join();
}

}  // namespace rondel::range::study
