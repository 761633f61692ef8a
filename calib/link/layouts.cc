#include "calib/link/layouts.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

#include "calib/link/normal_equations.h"

namespace rondel::link {
namespace {

/// `c`[0] + `c`[1] s, s = d^2 / scale, as the boards compute it. False where it does not fit their
/// 8 bits.
bool to_board(const std::array<double, 2>& c,
              double scale,
              const BoardTables& tables,
              std::array<std::int8_t, 2>& out) {
  double first = c[0];
  double slope = 128.0 * std::ldexp(c[1], tables.slow_shift) / scale;
  const double change = slope * tables.slow_most / 128.0;
  if (!(std::abs(first) < 126.0 && std::abs(slope) < 127.0 && std::abs(first + change) < 126.0)) {
    return false;
  }
  // What changes by less than a fifth of a pixel from its middle is not worth a product.
  if (std::abs(change) < 3.0) {
    first += 0.5 * change;
    slope = 0.0;
  }
  const bool rounded_down = std::lround(slope) != 0;  // by the boards' shift
  out = {static_cast<std::int8_t>(std::lround(first + (rounded_down ? 0.5 : 0.0))),
         static_cast<std::int8_t>(std::lround(slope))};
  return true;
}
/// straightened_square between the places the board can tell apart.
double smooth_square(const BoardTables& tables, const RangeLayout& layout, double u, double v) {
  const double u0 = std::floor(u);
  const double v0 = std::floor(v);
  const auto q = [&](int i, int j) {
    return straightened_square(tables, layout, static_cast<int>(u0) + i, static_cast<int>(v0) + j);
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
  for (std::size_t k = 0; k < picture.knots_m.size(); ++k) {
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
    // What the bend can add: twice 128 x 128.
    const std::uint32_t bend =
        layout.kind == Straightening::harmonic ? 32768U << tables.near_shift : 0U;
    const std::uint32_t limit = layout.kind == Straightening::harmonic ? 32766U : 65534U;
    while (((most + bend) >> layout.edge_shift) > limit) ++layout.edge_shift;
    if (layout.edge_shift <= 8 && 256.0 / (4.0 * first) <= 0.4) layout.edge_shift = 8;
  }
  layout.edges.clear();
  for (const auto& q_of_knot : by_sector) {
    for (int k = 1; k <= codes; ++k) {
      double q = 0.0;
      if (codes <= kMostKnots) {
        q = q_of_knot[zu(k)];
      } else {
        const double range_m = bench.book->edges_m[zu(k)];
        const auto above =
            std::lower_bound(picture.knots_m.begin() + 1, picture.knots_m.end() - 1, range_m);
        const auto i = static_cast<std::size_t>(above - picture.knots_m.begin());
        const double part =
            (range_m - picture.knots_m[i - 1]) / (picture.knots_m[i] - picture.knots_m[i - 1]);
        q = std::isfinite(q_of_knot[i])
                ? q_of_knot[i - 1] + part * (q_of_knot[i] - q_of_knot[i - 1])
                : never;
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
  // Rows tie neighbours, and bends the next but one.
  NormalEquations normal(nodes, 2 * layout.grid_columns);
  bool any = false;
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
      const std::array<std::pair<int, double>, 4> corners = {
          std::pair{node, (1 - fu) * (1 - fv)},
          std::pair{node + 1, fu * (1 - fv)},
          std::pair{node + layout.grid_columns, (1 - fu) * fv},
          std::pair{node + layout.grid_columns + 1, fu * fv}};
      // The boards round the displacement down.
      normal.add(corners,
                 {cu + radius * std::cos(azimuth) - kSubpixel * u + 0.5,
                  cv + radius * std::sin(azimuth) - kSubpixel * v + 0.5},
                 1.0);
      any = true;
    }
  }
  if (!any) return false;
  constexpr double kSmooth = 0.0025;
  constexpr double kLeast = 1e-6;  // against what neither pixels nor neighbours decide
  for (int row = 0; row < layout.grid_rows; ++row) {
    for (int column = 0; column < layout.grid_columns; ++column) {
      const int node = row * layout.grid_columns + column;
      const auto bend = [&](int by) {
        const std::array<std::pair<int, double>, 3> three = {
            std::pair{node - by, 1.0}, std::pair{node, -2.0}, std::pair{node + by, 1.0}};
        normal.add(three, {0.0, 0.0}, kSmooth);
      };
      if (column > 0 && column + 1 < layout.grid_columns) bend(1);
      if (row > 0 && row + 1 < layout.grid_rows) bend(layout.grid_columns);
      const std::array<std::pair<int, double>, 1> self = {std::pair{node, 1.0}};
      normal.add(self, {0.0, 0.0}, kLeast);
    }
  }
  layout.grid.clear();
  for (const std::array<double, 2>& node : normal.solve()) {
    for (const double moved : node) {
      if (!(std::abs(moved) < 127.0)) return false;
      layout.grid.push_back(static_cast<std::int8_t>(std::lround(moved)));
    }
  }
  return true;
}
}  // namespace

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

namespace {

struct Score {
  double share = 0.0;
  double relative = 0.0;
};

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
}  // namespace

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
  const auto range = fit_range_harmonics(one, cu, cv, bench.scale, 1);
  const auto bearing = fit_bearing_harmonics(one, bench.turn, cu, cv, bench.scale, false);
  RangeLayout harmonic;
  harmonic.kind = Straightening::harmonic;
  bool fits = true;
  for (std::size_t i = 0; i < 2; ++i) {
    fits = to_board(range[i], bench.scale, tables, harmonic.harmonic[i]) && fits;
    fits = to_board(bearing.displacement[i], bench.scale, tables, harmonic.harmonic[i + 2]) && fits;
  }
  if (fits) {
    keep(harmonic, "harmonic");
    harmonic.kind = Straightening::sectors;
    harmonic.harmonic[0] = harmonic.harmonic[1] = {};
    for (const int sectors : {4, 8, 16, 32}) {
      if (2 * sectors > tables.link.bearing_codes) break;
      harmonic.sectors = sectors;
      keep(harmonic, fmt::format("sectors {}", sectors));
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

}  // namespace rondel::link
