#include "calib/link/build_tables.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <Eigen/SparseCholesky>
#include <algorithm>
#include <cmath>
#include <cstddef>
#include <limits>
#include <map>
#include <numbers>
#include <optional>

#include "calib/base/problem.h"
#include "calib/link/link_plan.h"

namespace rondel::link {
namespace {

constexpr int kBearings = 96;    // samples around a curve of equal range
constexpr int kMostKnots = 254;  // curves of equal range that are traced
constexpr double kPi = std::numbers::pi;

std::size_t zu(int i) { return static_cast<std::size_t>(i); }

/// A point of a curve of equal range, in 1/kSubpixel px from pixel (0, 0).
struct Sample {
  double u_sub = 0.0;
  double v_sub = 0.0;
  double bearing_rad = 0.0;
  bool visible = true;  ///< not behind the mask or outside the image
};

/// The image at one height: exact map of every pixel, and curves of equal range.
struct Picture {
  double height_m = 0.0;
  std::vector<float> range_m;  ///< row by row; below 0: shows no floor, or is masked
  std::vector<float> bearing_rad;
  std::vector<float> pixel_m;    ///< how much the range changes with a pixel
  std::vector<float> pixel_rad;  ///< how much the bearing does
  std::vector<double> knots_m;
  std::vector<std::vector<Sample>> curves;  ///< one for each knot
};

struct Scene {
  const FloorMap* map = nullptr;
  int width = 0;
  int height = 0;
  std::span<const std::uint8_t> mask;
  [[nodiscard]] bool visible(int u, int v) const {
    return mask.empty() || mask[zu(v) * zu(width) + zu(u)] != 0;
  }
  [[nodiscard]] bool near_visible(double u, double v) const {
    const int iu = static_cast<int>(std::lround(u));
    const int iv = static_cast<int>(std::lround(v));
    for (int dv = -1; dv <= 1; ++dv) {
      for (int du = -1; du <= 1; ++du) {
        const int x = iu + du;
        const int y = iv + dv;
        if (x >= 0 && y >= 0 && x < width && y < height && visible(x, y)) return true;
      }
    }
    return false;
  }
};

/// Steepest change per pixel of a field at a pixel, from its neighbours on the floor.
template <class Difference>
double slope_at(const Scene& scene, const Picture& picture, int u, int v, const Difference& diff) {
  const auto at = [&](int x, int y) { return zu(y) * zu(scene.width) + zu(x); };
  const auto good = [&](int x, int y) {
    return x >= 0 && y >= 0 && x < scene.width && y < scene.height &&
           picture.range_m[at(x, y)] >= 0.0F;
  };
  double sum = 0.0;
  for (const auto& [du, dv] : {std::pair{1, 0}, std::pair{0, 1}}) {
    const bool above = good(u + du, v + dv);
    const bool below = good(u - du, v - dv);
    if (!above && !below) continue;
    const std::size_t to = above ? at(u + du, v + dv) : at(u, v);
    const std::size_t from = below ? at(u - du, v - dv) : at(u, v);
    const double change = diff(to, from) / (above && below ? 2.0 : 1.0);
    sum += change * change;
  }
  return std::sqrt(sum);
}

/// Only the visible pixels' values are kept.
Picture survey(const Scene& scene, double height_m) {
  Picture picture;
  picture.height_m = height_m;
  const std::size_t pixels = zu(scene.width) * zu(scene.height);
  picture.range_m.assign(pixels, -1.0F);
  picture.bearing_rad.assign(pixels, 0.0F);
  picture.pixel_m.assign(pixels, 0.0F);
  picture.pixel_rad.assign(pixels, 0.0F);
  for (int v = 0; v < scene.height; ++v) {
    for (int u = 0; u < scene.width; ++u) {
      if (!scene.visible(u, v)) continue;
      const auto spot =
          scene.map->floor_at({static_cast<double>(u), static_cast<double>(v)}, height_m);
      if (!spot) continue;
      const std::size_t i = zu(v) * zu(scene.width) + zu(u);
      picture.range_m[i] = static_cast<float>(spot->range_m);
      picture.bearing_rad[i] = static_cast<float>(spot->bearing_rad);
    }
  }
  for (int v = 0; v < scene.height; ++v) {
    for (int u = 0; u < scene.width; ++u) {
      const std::size_t i = zu(v) * zu(scene.width) + zu(u);
      if (picture.range_m[i] < 0.0F) continue;
      picture.pixel_m[i] =
          static_cast<float>(slope_at(scene, picture, u, v, [&](std::size_t a, std::size_t b) {
            return static_cast<double>(picture.range_m[a]) -
                   static_cast<double>(picture.range_m[b]);
          }));
      picture.pixel_rad[i] =
          static_cast<float>(slope_at(scene, picture, u, v, [&](std::size_t a, std::size_t b) {
            return wrap_angle(static_cast<double>(picture.bearing_rad[a]) -
                              static_cast<double>(picture.bearing_rad[b]));
          }));
    }
  }
  return picture;
}

void trace_curves(const Scene& scene, const Codebook& book, Picture& picture) {
  picture.knots_m = book.edges_m;
  if (book.size() > kMostKnots) {
    picture.knots_m.clear();
    const double ratio = book.edges_m.back() / book.edges_m.front();
    for (int k = 0; k <= kMostKnots; ++k) {
      picture.knots_m.push_back(book.edges_m.front() *
                                std::pow(ratio, static_cast<double>(k) / kMostKnots));
    }
    picture.knots_m.back() = book.edges_m.back();
  }
  for (const double range_m : picture.knots_m) {
    std::vector<Sample> curve;
    for (int b = 0; b < kBearings; ++b) {
      const double bearing = wrap_angle(2.0 * kPi * b / kBearings);
      const auto at = scene.map->pixel_of({range_m, bearing}, picture.height_m);
      if (!at) continue;
      curve.push_back({kSubpixel * at->u_px,
                       kSubpixel * at->v_px,
                       bearing,
                       scene.near_visible(at->u_px, at->v_px)});
    }
    picture.curves.push_back(std::move(curve));
  }
}

double pixel_worth(const FloorMap& map, double range_m, double height_m) {
  double sum = 0.0;
  int count = 0;
  for (int b = 0; b < 16; ++b) {
    const double bearing = wrap_angle(2.0 * kPi * b / 16);
    const auto near = map.pixel_of({0.99 * range_m, bearing}, height_m);
    const auto far = map.pixel_of({1.01 * range_m, bearing}, height_m);
    if (!near || !far) continue;
    const double px = std::hypot(far->u_px - near->u_px, far->v_px - near->v_px);
    if (px <= 0.0) continue;
    sum += 0.02 * range_m / px;
    ++count;
  }
  return count > 0 ? sum / count : 0.0;
}

// ---- the centre, the turn, the harmonics -----------------------------------------------------

/// What is hidden still steadies the fit where nothing is visible.
double weight_of(const Sample& sample) { return sample.visible ? 1.0 : 1e-4; }

double power(double x, int p) { return p == 0 ? 1.0 : p == 1 ? x : x * x; }

/// Least squares for d^2 + A(s) d_u + B(s) d_v = one number per curve, A and B polynomials of
/// `degree` in s = d^2 / scale; returns A's and B's coefficients.
std::array<std::array<double, 3>, 2> fit_range_harmonics(
    const std::vector<const Picture*>& pictures, double cu, double cv, double scale, int degree) {
  const int unknowns = 2 * (degree + 1);
  Eigen::MatrixXd normal = Eigen::MatrixXd::Zero(unknowns, unknowns);
  Eigen::VectorXd right = Eigen::VectorXd::Zero(unknowns);
  for (const Picture* picture : pictures) {
    for (const auto& curve : picture->curves) {
      if (curve.size() < 4) continue;
      Eigen::MatrixXd rows(static_cast<Eigen::Index>(curve.size()), unknowns + 1);
      Eigen::VectorXd weight(rows.rows());
      for (Eigen::Index i = 0; i < rows.rows(); ++i) {
        const Sample& sample = curve[static_cast<std::size_t>(i)];
        const double du = sample.u_sub - cu;
        const double dv = sample.v_sub - cv;
        const double d2 = du * du + dv * dv;
        for (int p = 0; p <= degree; ++p) {
          rows(i, p) = du * power(d2 / scale, p);
          rows(i, degree + 1 + p) = dv * power(d2 / scale, p);
        }
        rows(i, unknowns) = -d2;
        weight(i) = weight_of(sample) / d2;  // a pixel is worth 2 d in d^2
      }
      const Eigen::RowVectorXd mean = weight.transpose() * rows / weight.sum();
      rows.rowwise() -= mean;
      const Eigen::MatrixXd left = rows.leftCols(unknowns);
      normal += left.transpose() * weight.asDiagonal() * left;
      right += left.transpose() * weight.asDiagonal() * rows.col(unknowns);
    }
  }
  const Eigen::VectorXd x = normal.completeOrthogonalDecomposition().solve(right);
  std::array<std::array<double, 3>, 2> out{};
  for (int p = 0; p <= degree; ++p) {
    out[0][zu(p)] = x(p);
    out[1][zu(p)] = x(degree + 1 + p);
  }
  return out;
}

struct Turn {
  bool mirrored = true;
  double heading_rad = 0.0;
  /// Direction in the image at which `bearing_rad` is seen.
  [[nodiscard]] double azimuth(double bearing_rad) const {
    return mirrored ? bearing_rad - heading_rad : heading_rad - bearing_rad;
  }
};

/// Least squares for the displacement (E(s), F(s)) after which directions are those of the
/// bearings, and for what the heading is off.
struct BearingFit {
  std::array<std::array<double, 3>, 2> displacement{};
  double azimuth_off_rad = 0.0;
};
BearingFit fit_bearing_harmonics(const std::vector<const Picture*>& pictures,
                                 const Turn& turn,
                                 double cu,
                                 double cv,
                                 double scale,
                                 int degree,
                                 bool with_heading) {
  const int unknowns = 2 * (degree + 1) + 1;
  Eigen::MatrixXd normal = Eigen::MatrixXd::Zero(unknowns, unknowns);
  Eigen::VectorXd right = Eigen::VectorXd::Zero(unknowns);
  Eigen::VectorXd row(unknowns);
  for (const Picture* picture : pictures) {
    for (const auto& curve : picture->curves) {
      for (const Sample& sample : curve) {
        const double du = sample.u_sub - cu;
        const double dv = sample.v_sub - cv;
        const double d2 = du * du + dv * dv;
        const double d = std::sqrt(d2);
        if (d < 1.0) continue;
        const double azimuth = turn.azimuth(sample.bearing_rad);
        for (int p = 0; p <= degree; ++p) {
          row(p) = std::sin(azimuth) * power(d2 / scale, p) / d;
          row(degree + 1 + p) = -std::cos(azimuth) * power(d2 / scale, p) / d;
        }
        row(unknowns - 1) = with_heading ? 1.0 : 0.0;
        const double off = (du * std::sin(azimuth) - dv * std::cos(azimuth)) / d;
        normal += weight_of(sample) * row * row.transpose();
        right -= weight_of(sample) * off * row;
      }
    }
  }
  const Eigen::VectorXd x = normal.completeOrthogonalDecomposition().solve(right);
  BearingFit fit;
  for (int p = 0; p <= degree; ++p) {
    fit.displacement[0][zu(p)] = x(p);
    fit.displacement[1][zu(p)] = x(degree + 1 + p);
  }
  fit.azimuth_off_rad = x(unknowns - 1);
  return fit;
}

Turn find_turn(const std::vector<const Picture*>& pictures, double cu, double cv) {
  double best = -1.0;
  Turn turn;
  for (const bool mirrored : {true, false}) {
    double c = 0.0;
    double s = 0.0;
    for (const Picture* picture : pictures) {
      for (const auto& curve : picture->curves) {
        for (const Sample& sample : curve) {
          const double azimuth = std::atan2(sample.v_sub - cv, sample.u_sub - cu);
          const double heading =
              mirrored ? sample.bearing_rad - azimuth : sample.bearing_rad + azimuth;
          c += std::cos(heading);
          s += std::sin(heading);
        }
      }
    }
    if (std::hypot(c, s) <= best) continue;
    best = std::hypot(c, s);
    turn = {mirrored, std::atan2(s, c)};
  }
  return turn;
}

/// A polynomial in s / scale as the boards compute it, in 1/256 of its unit. False where the
/// numbers do not fit the boards' 16 bits.
bool to_board(const std::array<double, 3>& c,
              double scale,
              int slow_shift,
              std::int32_t s_most,
              std::array<std::int16_t, 3>& out) {
  const double per_s = std::ldexp(1.0, slow_shift) / scale;  // of s as the board has it
  const std::array<double, 3> wanted = {
      256.0 * c[0], 65536.0 * c[1] * per_s, 65536.0 * 65536.0 * c[2] * per_s * per_s};
  for (std::size_t i = 0; i < 3; ++i) {
    if (!(std::abs(wanted[i]) < 32767.0)) return false;
    out[i] = static_cast<std::int16_t>(std::lround(wanted[i]));
  }
  for (std::int32_t i = 0; i <= 64; ++i) {
    const double s = static_cast<double>(s_most) * i / 64.0;
    const double inner = out[1] + out[2] * s / 65536.0;
    if (std::abs(inner) > 32000.0 || std::abs(out[0] + inner * s / 256.0) > 32000.0) return false;
  }
  return true;
}

// ---- a layout for a height -------------------------------------------------------------------

/// Everything that goes into choosing a layout.
struct Bench {
  const Scene* scene = nullptr;
  const Codebook* book = nullptr;
  const BoardTables* tables = nullptr;  ///< with centre, turn and tangents
  Turn turn;
  double scale = 1.0;         ///< of d^2 in the fits
  std::int32_t s_most = 0;    ///< largest s the boards can meet
  std::uint32_t d2_most = 0;  ///< largest d^2
};

/// straightened_square between the places the board can tell apart.
double smooth_square(const BoardTables& tables, const RangeLayout& layout, double u, double v) {
  const double u0 = std::floor(u);
  const double v0 = std::floor(v);
  const auto q = [&](int i, int j) {
    return static_cast<double>(
        straightened_square(tables, layout, static_cast<int>(u0) + i, static_cast<int>(v0) + j));
  };
  const double top = q(0, 0) + (u - u0) * (q(1, 0) - q(0, 0));
  const double bottom = q(0, 1) + (u - u0) * (q(1, 1) - q(0, 1));
  return top + (v - v0) * (bottom - top);
}

/// Between the least and the greatest of some values.
struct Middle {
  double low = std::numeric_limits<double>::infinity();
  double high = -std::numeric_limits<double>::infinity();
  void add(double value) {
    low = std::min(low, value);
    high = std::max(high, value);
  }
};

/// Breakpoints of the codes: in the middle between the least and the greatest q on each curve.
void set_edges(const Bench& bench, const Picture& picture, bool wide, RangeLayout& layout) {
  const BoardTables& tables = *bench.tables;
  const int codes = bench.book->size();
  const double never = std::numeric_limits<double>::infinity();
  std::vector<std::vector<double>> by_sector(zu(layout.sectors));
  for (std::size_t k = 1; k < picture.knots_m.size(); ++k) {
    // Of each sector: what is visible, else what is hidden; else of the whole curve.
    const std::size_t all = by_sector.size();
    std::vector<std::array<Middle, 2>> middles(all + 1);
    for (const Sample& sample : picture.curves[k]) {
      const double q = smooth_square(tables, layout, sample.u_sub, sample.v_sub);
      const double turn = sample.bearing_rad / (2.0 * kPi);
      // A sample counts for every sector from which a bearing code may reach it.
      std::size_t last = all;
      for (const double shift : {-0.5, 0.5}) {
        double part = turn + (0.5 + shift) / tables.link.bearing_codes;
        part -= std::floor(part);
        const std::size_t i = std::min(zu(static_cast<int>(part * layout.sectors)), all - 1);
        if (i != last) middles[i][sample.visible ? 0 : 1].add(q);
        last = i;
      }
      middles[all][sample.visible ? 0 : 1].add(q);
    }
    for (std::size_t i = 0; i < all; ++i) {
      double q = never;
      for (const Middle& middle :
           {middles[i][0], middles[i][1], middles[all][0], middles[all][1]}) {
        if (middle.low > middle.high) continue;
        q = 0.5 * (middle.low + middle.high);
        break;
      }
      by_sector[i].push_back(std::max(q, by_sector[i].empty() ? 0.0 : by_sector[i].back()));
    }
  }
  // The coarsest shift that costs no more than a fifth of a 1/kSubpixel px, whole bytes first.
  const std::uint32_t most = bench.d2_most;
  const double first = std::sqrt(std::max(1.0, by_sector[0][0]));
  layout.wide = wide;
  layout.edge_shift = 0;
  if (!wide) {
    while ((most >> layout.edge_shift) > 65534U) ++layout.edge_shift;
    if (layout.edge_shift <= 8 && 256.0 / (4.0 * first) <= 0.4) layout.edge_shift = 8;
  }
  layout.edges.clear();
  for (const auto& q_of_knot : by_sector) {
    for (int k = 1; k <= codes; ++k) {
      double q = 0.0;
      if (codes <= kMostKnots) {
        q = q_of_knot[zu(k) - 1];
      } else {
        const double range_m = bench.book->edges_m[zu(k)];
        const auto above =
            std::lower_bound(picture.knots_m.begin() + 1, picture.knots_m.end() - 1, range_m);
        const auto i = static_cast<std::size_t>(above - picture.knots_m.begin());
        const double q0 = i >= 2 ? q_of_knot[i - 2] : q_of_knot[0];
        const double part =
            (range_m - picture.knots_m[i - 1]) / (picture.knots_m[i] - picture.knots_m[i - 1]);
        q = i >= 2 ? q0 + part * (q_of_knot[i - 1] - q0) : q_of_knot[0];
      }
      const double steps = std::ldexp(q, -layout.edge_shift);
      const double limit = wide ? 4294967295.0 : 65535.0;
      layout.edges.push_back(static_cast<std::uint32_t>(std::min(std::round(steps), limit)));
    }
  }
}

/// Radius in the image, mean over bearings, of each knot.
std::vector<double> mean_radii(const Picture& picture, double cu, double cv) {
  std::vector<double> radii;
  for (const auto& curve : picture.curves) {
    double sum = 0.0;
    for (const Sample& sample : curve) sum += std::hypot(sample.u_sub - cu, sample.v_sub - cv);
    radii.push_back(curve.empty() ? -1.0 : sum / static_cast<double>(curve.size()));
  }
  return radii;
}

/// Displacements at the nodes, least squares over the visible pixels, smooth where there are none.
bool fit_grid(const Bench& bench, const Picture& picture, RangeLayout& layout) {
  const Scene& scene = *bench.scene;
  const double cu = bench.tables->centre_u_sub;
  const double cv = bench.tables->centre_v_sub;
  const int step_px = 1 << layout.grid_log2_px;
  layout.grid_columns = (scene.width + step_px - 1) / step_px + 1;
  layout.grid_rows = (scene.height + step_px - 1) / step_px + 1;
  const int nodes = layout.grid_columns * layout.grid_rows;
  std::vector<Eigen::Triplet<double>> rows;
  std::vector<std::array<double, 2>> wanted;
  const auto add = [&](std::initializer_list<std::pair<int, double>> terms, double du, double dv) {
    for (const auto& [node, weight] : terms) {
      rows.emplace_back(static_cast<int>(wanted.size()), node, weight);
    }
    wanted.push_back({du, dv});
  };
  const std::vector<double> radii = mean_radii(picture, cu, cv);
  for (int v = 0; v < scene.height; v += 2) {
    for (int u = 0; u < scene.width; u += 2) {
      const std::size_t i = zu(v) * zu(scene.width) + zu(u);
      const double range_m = static_cast<double>(picture.range_m[i]);
      if (range_m < picture.knots_m.front() || range_m > picture.knots_m.back()) continue;
      const auto above =
          std::upper_bound(picture.knots_m.begin() + 1, picture.knots_m.end() - 1, range_m);
      const auto k = static_cast<std::size_t>(above - picture.knots_m.begin());
      if (radii[k] < 0.0 || radii[k - 1] < 0.0) continue;
      const double part =
          (range_m - picture.knots_m[k - 1]) / (picture.knots_m[k] - picture.knots_m[k - 1]);
      const double radius = radii[k - 1] + part * (radii[k] - radii[k - 1]);
      const double azimuth = bench.turn.azimuth(static_cast<double>(picture.bearing_rad[i]));
      const int column = u / step_px;
      const int row = v / step_px;
      const double fu = static_cast<double>(u % step_px) / step_px;
      const double fv = static_cast<double>(v % step_px) / step_px;
      const int node = row * layout.grid_columns + column;
      add({{node, (1 - fu) * (1 - fv)},
           {node + 1, fu * (1 - fv)},
           {node + layout.grid_columns, (1 - fu) * fv},
           {node + layout.grid_columns + 1, fu * fv}},
          cu + radius * std::cos(azimuth) - kSubpixel * u,
          cv + radius * std::sin(azimuth) - kSubpixel * v);
    }
  }
  if (wanted.empty()) return false;
  constexpr double kSmooth = 0.05;
  for (int row = 0; row < layout.grid_rows; ++row) {
    for (int column = 0; column < layout.grid_columns; ++column) {
      const int node = row * layout.grid_columns + column;
      const auto bend = [&](int by) {
        add({{node - by, kSmooth}, {node, -2.0 * kSmooth}, {node + by, kSmooth}}, 0.0, 0.0);
      };
      if (column > 0 && column + 1 < layout.grid_columns) bend(1);
      if (row > 0 && row + 1 < layout.grid_rows) bend(layout.grid_columns);
      // Weakly against what neither pixels nor neighbours decide.
      add({{node, 1e-3}}, 0.0, 0.0);
    }
  }
  Eigen::SparseMatrix<double> left(static_cast<Eigen::Index>(wanted.size()), nodes);
  left.setFromTriplets(rows.begin(), rows.end());
  Eigen::MatrixXd right(static_cast<Eigen::Index>(wanted.size()), 2);
  for (std::size_t i = 0; i < wanted.size(); ++i) {
    right(static_cast<Eigen::Index>(i), 0) = wanted[i][0];
    right(static_cast<Eigen::Index>(i), 1) = wanted[i][1];
  }
  const Eigen::SparseMatrix<double> normal = left.transpose() * left;
  const Eigen::SimplicialLDLT<Eigen::SparseMatrix<double>> solver(normal);
  const Eigen::MatrixXd x = solver.solve(left.transpose() * right);
  layout.grid.clear();
  for (Eigen::Index node = 0; node < x.rows(); ++node) {
    for (Eigen::Index i = 0; i < 2; ++i) {
      if (!(std::abs(x(node, i)) < 127.0)) return false;
      layout.grid.push_back(static_cast<std::int8_t>(std::lround(x(node, i))));
    }
  }
  return true;
}

struct Score {
  double share = 0.0;
  double relative = 0.0;
};

/// What `codes` are off at a pixel, over what the target allows.
struct PixelError {
  double range_m = 0.0;
  double range_share = 0.0;
  double bearing_rad = 0.0;
  double bearing_share = 0.0;
};
PixelError error_at(const BoardTables& tables,
                    const Codebook& book,
                    const Picture& picture,
                    std::size_t i,
                    Codes codes,
                    const ErrorTarget& target) {
  const double range_m = static_cast<double>(picture.range_m[i]);
  PixelError error;
  const double read_m =
      codes.range_code == tables.beyond_code()
          ? book.edges_m.back()
          : tables.range_units[zu(codes.range_code)] * tables.range_unit_um * 1e-6;
  error.range_m = std::abs(read_m - range_m);
  const double code_m = book.relative_error(book.code_of(range_m)) * range_m;
  error.range_share = error.range_m / (target.codebook * code_m +
                                       target.pixels * static_cast<double>(picture.pixel_m[i]));
  error.bearing_rad =
      std::abs(wrap_angle(bearing_cdeg(tables, codes.bearing_code) * 0.01 * kRadPerDeg -
                          static_cast<double>(picture.bearing_rad[i])));
  error.bearing_share =
      error.bearing_rad / (target.codebook * kPi / tables.link.bearing_codes +
                           target.pixels * static_cast<double>(picture.pixel_rad[i]));
  return error;
}

Score score_of(const Bench& bench,
               const Picture& picture,
               const RangeLayout& layout,
               const ErrorTarget& target) {
  BoardTables trial = *bench.tables;
  trial.layouts = {layout};
  trial.objects = {{"", picture.height_m, 0}};
  Score score;
  for (int v = 0; v < bench.scene->height; ++v) {
    for (int u = 0; u < bench.scene->width; ++u) {
      const std::size_t i = zu(v) * zu(bench.scene->width) + zu(u);
      const double range_m = static_cast<double>(picture.range_m[i]);
      if (range_m < bench.book->edges_m.front() || range_m > bench.book->edges_m.back()) continue;
      const Codes codes = encode(trial, 0, kSubpixel * u, kSubpixel * v);
      const PixelError error = error_at(trial, *bench.book, picture, i, codes, target);
      score.share = std::max({score.share, error.range_share, error.bearing_share});
      score.relative = std::max(score.relative, error.range_m / range_m);
    }
  }
  return score;
}

struct Tried {
  RangeLayout layout;
  Candidate candidate;
};

std::vector<Tried> try_layouts(const Bench& bench,
                               const Picture& picture,
                               const ErrorTarget& target) {
  std::vector<Tried> tried;
  const BoardTables& tables = *bench.tables;
  const double cu = tables.centre_u_sub;
  const double cv = tables.centre_v_sub;
  const std::vector<const Picture*> one = {&picture};
  const auto keep = [&](RangeLayout layout, const std::string& name) {
    for (const bool wide : {false, true}) {
      set_edges(bench, picture, wide, layout);
      if (wide && tried.back().layout.edge_shift == 0) break;
      const Score score = score_of(bench, picture, layout, target);
      if (wide && score.share > 0.99 * tried.back().candidate.worst_share) break;
      tried.push_back({layout,
                       {name + (wide ? ", 32 bit" : ""),
                        table_bytes(layout),
                        score.share,
                        score.relative,
                        false}});
      // More bits help only where rounding is what is wrong.
      if (!wide && (score.share <= 1.0 || score.share > 1.3)) break;
    }
  };
  keep({}, "none");
  for (const int degree : {1, 2}) {
    RangeLayout layout;
    layout.kind = Straightening::harmonic;
    layout.degree = degree;
    const auto range = fit_range_harmonics(one, cu, cv, bench.scale, degree);
    const auto bearing =
        fit_bearing_harmonics(one, bench.turn, cu, cv, bench.scale, degree, false).displacement;
    bool fits = true;
    for (std::size_t i = 0; i < 2; ++i) {
      fits = to_board(range[i], bench.scale, tables.slow_shift, bench.s_most, layout.harmonic[i]) &&
             fits;
      fits =
          to_board(
              bearing[i], bench.scale, tables.slow_shift, bench.s_most, layout.harmonic[i + 2]) &&
          fits;
    }
    if (!fits) continue;
    keep(layout, fmt::format("harmonic {}", degree));
    layout.kind = Straightening::sectors;
    layout.harmonic[0] = layout.harmonic[1] = {};
    for (const int sectors : {4, 8, 16, 32}) {
      if (degree == 2 || 2 * sectors > tables.link.bearing_codes) break;
      layout.sectors = sectors;
      keep(layout, fmt::format("sectors {}", sectors));
    }
  }
  for (const int log2 : {6, 5, 4, 3}) {
    if ((bench.scene->width >> log2) > 40) break;
    RangeLayout layout;
    layout.kind = Straightening::grid;
    layout.grid_log2_px = log2;
    if (fit_grid(bench, picture, layout)) keep(layout, fmt::format("grid {} px", 1 << log2));
  }
  std::stable_sort(tried.begin(), tried.end(), [](const Tried& a, const Tried& b) {
    return a.candidate.bytes < b.candidate.bytes;
  });
  return tried;
}

// ---- the parts that need no picture ----------------------------------------------------------

void set_codes(const Codebook& book, BoardTables& tables) {
  // The finest unit of 1, 2 or 5 times a power of ten that brings far_m into 16 bits.
  std::uint32_t unit = 10;
  for (int i = 0; book.edges_m.back() * 1e6 / unit > 65535.0; ++i) {
    unit = i % 3 == 1 ? unit * 5 / 2 : unit * 2;
  }
  tables.range_unit_um = unit;
  for (const double code_m : book.codes_m) {
    tables.range_units.push_back(static_cast<std::uint16_t>(std::lround(code_m * 1e6 / unit)));
  }
}

void set_bearings(BoardTables& tables) {
  int cells = tables.link.bearing_codes;
  while (cells % 8 != 0) {
    cells *= 2;
    ++tables.fine_log2;
  }
  const bool centred = tables.fine_log2 == 0;
  const int count = centred ? cells / 8 : cells / 8 - 1;
  for (int i = 0; i < count; ++i) {
    const double angle = 2.0 * kPi * (centred ? i + 0.5 : i + 1.0) / cells;
    tables.tangents.push_back(static_cast<std::uint16_t>(std::lround(65536.0 * std::tan(angle))));
  }
}

/// Integers of free length along the heading, exact for quarter turns.
void set_turn(const Turn& turn, int longest_sub, BoardTables& tables) {
  int log2 = 14;
  while ((static_cast<std::int64_t>(longest_sub) << log2 >> 8) > 32000) --log2;
  const double length = std::ldexp(1.0, log2);
  const double heading = turn.mirrored ? -turn.heading_rad : turn.heading_rad;
  tables.mirrored = turn.mirrored;
  tables.turn_c = static_cast<std::int16_t>(std::lround(length * std::cos(heading)));
  tables.turn_s = static_cast<std::int16_t>(std::lround(length * std::sin(heading)));
}

void refuse_budget(const std::vector<std::vector<Tried>>& tried,
                   const std::vector<HeightTradeOff>& heights,
                   const VenueSpec& venue,
                   int bearing_bytes,
                   int needed,
                   const std::string& where) {
  int least = bearing_bytes;
  double best_share = 0.0;
  for (const auto& layouts : tried) {
    least += layouts.front().candidate.bytes;
    // What the same part of the budget would buy for each height.
    const int part = (venue.budget.table_bytes - bearing_bytes) / static_cast<int>(tried.size());
    double share = std::numeric_limits<double>::infinity();
    for (const Tried& t : layouts) {
      if (t.candidate.bytes <= part) share = std::min(share, t.candidate.worst_share);
    }
    best_share = std::max(best_share, share);
  }
  std::string what = fmt::format("budget.table_bytes = {}: {} {} of object height need",
                                 venue.budget.table_bytes,
                                 heights.size(),
                                 heights.size() == 1 ? "value" : "values");
  if (needed > 0) {
    what += fmt::format(" {} bytes to keep the error target; set at least that", needed);
  } else {
    what += " a finer layout than any that was tried";
  }
  if (std::isfinite(best_share)) {
    what += fmt::format(", or accept {:.2f} times the target's error, the best within the budget",
                        best_share);
  } else {
    what += fmt::format(", or fewer range codes: range_bits: {} would take about {} bytes",
                        std::max(3, venue.link.range_bits - 1),
                        bearing_bytes + (least - bearing_bytes) / 2);
  }
  throw InputError(where, what);
}

}  // namespace

std::vector<MaskRun> mask_runs(std::span<const std::uint8_t> mask, int width_px, int height_px) {
  std::vector<MaskRun> runs;
  if (mask.empty()) return runs;
  for (int v = 0; v < height_px; ++v) {
    for (int u = 0; u < width_px; ++u) {
      if (mask[zu(v) * zu(width_px) + zu(u)] == 0) continue;
      const int from = u;
      while (u < width_px && mask[zu(v) * zu(width_px) + zu(u)] != 0) ++u;
      runs.push_back({static_cast<std::uint16_t>(v),
                      static_cast<std::uint16_t>(from),
                      static_cast<std::uint16_t>(u)});
    }
  }
  return runs;
}

colour::ClassTable fit_class_table(const colour::ClassTable& table,
                                   int objects,
                                   int bytes,
                                   const std::string& where) {
  BoardTables sizes;
  sizes.objects.resize(zu(objects));
  const int bits = class_bits(sizes);
  // Halves one channel; each entry's class by majority of the two, the lower one on a tie.
  const auto reduce = [](const colour::ClassTable& from,
                         int channel,
                         std::vector<std::array<std::uint16_t, 256>>& votes) {
    colour::ClassTable to = from;
    int& b = channel == 0 ? to.bits_r : channel == 1 ? to.bits_g : to.bits_b;
    --b;
    const int drop = channel == 0 ? from.bits_g + from.bits_b : channel == 1 ? from.bits_b : 0;
    std::vector<std::array<std::uint16_t, 256>> merged(votes.size() / 2);
    for (std::size_t i = 0; i < votes.size(); ++i) {
      const std::size_t low = i & ((std::size_t{1} << drop) - 1);
      const std::size_t at = (i >> (drop + 1) << drop) | low;
      for (std::size_t k = 0; k < 256; ++k) {
        merged[at][k] = static_cast<std::uint16_t>(merged[at][k] + votes[i][k]);
      }
    }
    votes.swap(merged);
    return to;
  };
  colour::ClassTable best = table;
  if (static_cast<int>(best.classes.size()) * bits / 8 <= bytes) return best;
  std::vector<std::array<std::uint16_t, 256>> votes(table.classes.size());
  for (std::size_t i = 0; i < votes.size(); ++i) votes[i][table.classes[i]] = 1;
  const auto kept = [](const std::vector<std::array<std::uint16_t, 256>>& v) {
    std::size_t sum = 0;
    for (const auto& vote : v) sum += *std::max_element(vote.begin(), vote.end());
    return sum;
  };
  while (static_cast<int>(votes.size()) * bits / 8 > bytes) {
    std::optional<colour::ClassTable> chosen;
    std::vector<std::array<std::uint16_t, 256>> chosen_votes;
    std::size_t most = 0;
    for (int channel = 0; channel < 3; ++channel) {
      const int left = channel == 0 ? best.bits_r : channel == 1 ? best.bits_g : best.bits_b;
      if (left <= 1) continue;
      std::vector<std::array<std::uint16_t, 256>> trial = votes;
      const colour::ClassTable reduced = reduce(best, channel, trial);
      const std::size_t agree = kept(trial);
      if (chosen && agree <= most) continue;
      most = agree;
      chosen = reduced;
      chosen_votes.swap(trial);
    }
    if (!chosen) {
      throw InputError(
          where,
          fmt::format("budget.colour_bytes = {}: too small for any class table; set at least {}",
                      bytes,
                      8 * bits / 8));
    }
    best = *chosen;
    votes.swap(chosen_votes);
  }
  best.classes.resize(votes.size());
  for (std::size_t i = 0; i < votes.size(); ++i) {
    best.classes[i] = static_cast<std::uint8_t>(std::max_element(votes[i].begin(), votes[i].end()) -
                                                votes[i].begin());
  }
  return best;
}

Codebook codebook_of(const BoardTables& tables) {
  const LinkSpec& link = tables.link;
  if (link.measure == CodebookMeasure::relative || link.measure == CodebookMeasure::absolute) {
    return make_codebook(link, nullptr);
  }
  Codebook book;
  book.edges_m.push_back(link.near_m);
  for (const std::uint16_t units : tables.range_units) {
    const double code_m = units * tables.range_unit_um * 1e-6;
    if (!book.codes_m.empty()) {
      const double last = book.codes_m.back();
      book.edges_m.push_back(link.measure == CodebookMeasure::rms
                                 ? 0.5 * (last + code_m)
                                 : 2.0 * last * code_m / (last + code_m));
    }
    book.codes_m.push_back(code_m);
  }
  book.edges_m.push_back(link.far_m);
  return book;
}

BuiltTables build_tables(const FloorMap& map,
                         const VenueSpec& venue,
                         const CameraSpec& camera,
                         std::span<const std::uint8_t> mask,
                         const colour::ClassTable& classes,
                         std::span<const colour::ThresholdSet> sets,
                         const ErrorTarget& target,
                         const std::string& where,
                         Progress& progress) {
  if (venue.objects.empty()) {
    throw InputError(where, "objects: none; tables are made for the objects the robot looks for");
  }
  if (std::max(camera.width_px, camera.height_px) > kMostPixels) {
    throw InputError("rig.yaml",
                     fmt::format("camera: {} x {} px; boards compute with sides of at most {} px",
                                 camera.width_px,
                                 camera.height_px,
                                 kMostPixels));
  }
  BuiltTables built;
  BoardTables& tables = built.tables;
  tables.venue = venue.name;
  tables.prefix = venue.prefix;
  tables.width_px = camera.width_px;
  tables.height_px = camera.height_px;
  tables.link = venue.link;
  tables.hsv_scale = venue.hsv_scale;
  tables.sets.assign(sets.begin(), sets.end());
  tables.mask = mask_runs(mask, camera.width_px, camera.height_px);

  std::map<double, std::vector<std::string>> heights;
  for (const ObjectSpec& object : venue.objects)
    heights[object.seen_height_m()].push_back(object.name);
  for (const ObjectSpec& object : venue.objects) {
    const auto at = heights.find(object.seen_height_m());
    tables.objects.push_back(
        {object.name, at->first, static_cast<int>(std::distance(heights.begin(), at))});
  }
  const double lowest_m = heights.begin()->first;
  built.book = make_codebook(venue.link, [&](double range_m) {
    return std::max(1e-6, venue.noise.mark_px * pixel_worth(map, range_m, lowest_m));
  });
  set_codes(built.book, tables);
  set_bearings(tables);

  const Scene scene{&map, camera.width_px, camera.height_px, mask};
  std::vector<Picture> pictures;
  const int work = 2 * static_cast<int>(heights.size());
  for (const auto& [height_m, names] : heights) {
    progress.at("tables: tracing", static_cast<int>(pictures.size()), work);
    pictures.push_back(survey(scene, height_m));
    trace_curves(scene, built.book, pictures.back());
    const bool any = std::any_of(pictures.back().curves.begin(),
                                 pictures.back().curves.end(),
                                 [](const auto& c) { return c.size() >= 8; });
    if (!any) {
      throw InputError(
          where,
          fmt::format("link: the image shows nothing of {:g} to {:g} m at {:.0f} mm above the "
                      "floor; set near_m and far_m to ranges that are visible",
                      venue.link.near_m,
                      venue.link.far_m,
                      1e3 * height_m));
    }
  }
  std::vector<const Picture*> all;
  for (const Picture& picture : pictures) all.push_back(&picture);

  // The centre that suits all heights best: moved by what the harmonics of degree 0 say.
  double cu = 0.5 * kSubpixel * (camera.width_px - 1);
  double cv = 0.5 * kSubpixel * (camera.height_px - 1);
  const double longest = kSubpixel * std::hypot(camera.width_px + 2, camera.height_px + 2);
  const double scale = 0.25 * longest * longest;
  for (int round = 0; round < 6; ++round) {
    const auto harmonics = fit_range_harmonics(all, cu, cv, scale, 0);
    cu = std::clamp(cu - 0.5 * harmonics[0][0], 0.0, 1.0 * kSubpixel * camera.width_px);
    cv = std::clamp(cv - 0.5 * harmonics[1][0], 0.0, 1.0 * kSubpixel * camera.height_px);
  }
  tables.centre_u_sub = static_cast<int>(std::lround(cu));
  tables.centre_v_sub = static_cast<int>(std::lround(cv));
  cu = tables.centre_u_sub;
  cv = tables.centre_v_sub;

  Turn turn = find_turn(all, cu, cv);
  for (int round = 0; round < 3; ++round) {
    const double off = fit_bearing_harmonics(all, turn, cu, cv, scale, 2, true).azimuth_off_rad;
    turn.heading_rad -= turn.mirrored ? off : -off;
  }
  // Nearly a quarter turn is one: it saves the board four products.
  const double quarter = std::round(turn.heading_rad / (0.5 * kPi)) * 0.5 * kPi;
  if (std::abs(turn.heading_rad - quarter) < 0.1 * kRadPerDeg) turn.heading_rad = quarter;

  Bench bench{&scene, &built.book, &tables, turn, scale, 0, 0};
  int longest_sub = 0;
  for (const int u : {-kSubpixel, kSubpixel * camera.width_px}) {
    for (const int v : {-kSubpixel, kSubpixel * camera.height_px}) {
      const std::int64_t du = u - tables.centre_u_sub;
      const std::int64_t dv = v - tables.centre_v_sub;
      bench.d2_most = std::max(bench.d2_most, static_cast<std::uint32_t>(du * du + dv * dv));
      longest_sub =
          std::max({longest_sub, static_cast<int>(std::abs(du)), static_cast<int>(std::abs(dv))});
    }
  }
  set_turn(turn, 2 * (longest_sub + 128), tables);
  while ((bench.d2_most >> tables.slow_shift) > 32767U) tables.slow_shift += 8;
  // Beyond the last curve of equal range the harmonics stay as they are there.
  double last_d2 = 0.0;
  for (const Picture& picture : pictures) {
    for (const auto& curve : picture.curves) {
      for (const Sample& sample : curve) {
        if (!sample.visible) continue;
        last_d2 =
            std::max(last_d2, std::pow(sample.u_sub - cu, 2) + std::pow(sample.v_sub - cv, 2));
      }
    }
  }
  bench.s_most =
      static_cast<std::int32_t>(std::min(1.0 * bench.d2_most, last_d2)) >> tables.slow_shift;
  tables.slow_most = bench.s_most;

  std::vector<std::vector<Tried>> tried;
  const int bearing_bytes = table_bytes(tables);
  int needed = bearing_bytes;
  bool possible = true;
  auto height = heights.begin();
  for (const Picture& picture : pictures) {
    progress.at("tables: trying layouts", static_cast<int>(pictures.size() + tried.size()), work);
    tried.push_back(try_layouts(bench, picture, target));
    HeightTradeOff trade{picture.height_m, (height++)->second, {}};
    const auto chosen = std::find_if(tried.back().begin(), tried.back().end(), [](const Tried& t) {
      return t.candidate.meets();
    });
    possible = possible && chosen != tried.back().end();
    if (chosen != tried.back().end()) {
      needed += chosen->candidate.bytes;
      chosen->candidate.chosen = true;
      tables.layouts.push_back(chosen->layout);
    }
    for (const Tried& t : tried.back()) trade.candidates.push_back(t.candidate);
    built.heights.push_back(std::move(trade));
  }
  if (!possible || needed > venue.budget.table_bytes) {
    refuse_budget(tried, built.heights, venue, bearing_bytes, possible ? needed : 0, where);
  }
  if (!classes.classes.empty()) {
    tables.classes = fit_class_table(
        classes, static_cast<int>(venue.objects.size()), venue.budget.colour_bytes, where);
    std::size_t same = 0;
    for (int r = 0; r < 256; r += 8) {
      for (int g = 0; g < 256; g += 4) {
        for (int b = 0; b < 256; b += 8) {
          const auto at = [&](const colour::ClassTable& t) {
            return t.at(static_cast<std::uint8_t>(r),
                        static_cast<std::uint8_t>(g),
                        static_cast<std::uint8_t>(b));
          };
          same += at(tables.classes) == at(classes) ? 1U : 0U;
        }
      }
    }
    built.class_agreement = static_cast<double>(same) / 65536.0;
  }
  for (int i = 0; i <= 60; ++i) {
    const double range_m =
        venue.link.near_m * std::pow(venue.link.far_m / venue.link.near_m, i / 60.0);
    const double pixel_m = pixel_worth(map, range_m, lowest_m);
    if (pixel_m <= 0.0) continue;
    built.resolutions.push_back(
        {range_m, pixel_m, built.book.relative_error(built.book.code_of(range_m)) * range_m});
  }
  const std::vector<std::uint8_t> packed = pack(tables);
  tables.identity = unpack(packed, tables.prefix + ".bin").identity;
  progress.at("tables: trying layouts", work, work);
  return built;
}

RoundTrip verify(const BoardTables& tables,
                 const FloorMap& map,
                 int object,
                 std::span<const std::uint8_t> mask,
                 const ErrorTarget& target) {
  const Scene scene{&map, tables.width_px, tables.height_px, mask};
  const Codebook book = codebook_of(tables);
  const Picture picture = survey(scene, tables.objects[zu(object)].height_m);
  RoundTrip trip;
  double squares = 0.0;
  for (int v = 0; v < scene.height; ++v) {
    for (int u = 0; u < scene.width; ++u) {
      const std::size_t i = zu(v) * zu(scene.width) + zu(u);
      const double range_m = static_cast<double>(picture.range_m[i]);
      if (range_m < book.edges_m.front() || range_m > book.edges_m.back()) continue;
      const Codes codes = encode(tables, object, kSubpixel * u, kSubpixel * v);
      const PixelError error = error_at(tables, book, picture, i, codes, target);
      ++trip.pixels;
      const double share = std::max(error.range_share, error.bearing_share);
      trip.outside += share > 1.0 ? 1 : 0;
      if (share > trip.worst_share) {
        trip.worst_share = share;
        trip.worst_at = {static_cast<double>(u), static_cast<double>(v)};
      }
      trip.worst_relative_error = std::max(trip.worst_relative_error, error.range_m / range_m);
      trip.worst_bearing_rad = std::max(trip.worst_bearing_rad, error.bearing_rad);
      squares += std::pow(error.range_m / range_m, 2);
    }
  }
  trip.rms_relative_error = trip.pixels > 0 ? std::sqrt(squares / trip.pixels) : 0.0;
  return trip;
}

}  // namespace rondel::link
