#include "calib/colour/box_search.h"

#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <limits>
#include <queue>
#include <span>

namespace rondel::colour {
namespace {

constexpr int kAxes = 3;
constexpr std::array<int, kAxes> kLevels = {180, 256, 256};

int level_of(Hsv p, int axis) { return axis == 0 ? p.h : (axis == 1 ? p.s : p.v); }

/// Low and high edge of h, s and v in that order.
using Edges = std::array<int, 6>;

/// Smallest count out of `total` whose share is above `score`.
std::uint64_t count_above(double score, std::uint64_t total) {
  const auto t = static_cast<double>(total);
  auto count = static_cast<std::uint64_t>(std::max(0.0, score * t));
  while (count > 0 && static_cast<double>(count - 1) / t > score) --count;
  while (static_cast<double>(count) / t <= score) ++count;
  return count;
}

/// One problem on its grid. Edges are numbers of *occupied* cells: cells with wanted pixels in some
/// light. An edge anywhere else could be moved inwards without losing a wanted pixel. Hue numbers
/// run over the circle twice, low edge in the first round.
class Board {
 public:
  Board(const BoxProblem& problem, const BoxGrid& grid) : size_{grid.h, grid.s, grid.v} {
    for (const Wanted& light : problem.wanted) {
      if (light.total() == 0) continue;
      lights_.push_back(&light);
      totals_.push_back(light.total());
      assert(totals_.back() < (std::uint64_t{1} << 31U));
    }
    for (const Unwanted& unwanted : problem.unwanted) caps_.push_back(unwanted.most);
    count_wanted();
    count_unwanted(problem);
  }

  [[nodiscard]] std::size_t lights() const { return totals_.size(); }
  /// Smallest count inside a box with which light `light` does better than `score`.
  [[nodiscard]] std::uint32_t need(std::size_t light, double score) const {
    const std::uint64_t count = count_above(score, totals_[light]);
    const std::uint64_t already = lights_[light]->already;
    return static_cast<std::uint32_t>(count > already ? count - already : 0);
  }
  /// The score without any box.
  [[nodiscard]] double score_of_none() const {
    double worst = 1.0;
    for (std::size_t l = 0; l < lights(); ++l) worst = std::min(worst, share(l, 0));
    return worst;
  }
  /// Occupied cells along an axis, the hue circle once.
  [[nodiscard]] int cells(int axis) const { return static_cast<int>(cell_[index(axis)].size()); }

  /// An arc of more than a full turn covers what a full turn does.
  [[nodiscard]] Edges clipped(Edges e) const {
    e[1] = std::min(e[1], e[0] + cells(0) - 1);
    return e;
  }

  /// Lights' counts inside, into `counts` (at least lights() long).
  void wanted_in(const Edges& e, std::span<std::uint32_t> counts) const {
    const std::size_t n = lights();
    std::array<const std::uint32_t*, 8> corner{};
    for (unsigned k = 0; k < 8; ++k) {
      const int h = (k & 4U) != 0 ? e[1] + 1 : e[0];
      const int s = (k & 2U) != 0 ? e[3] + 1 : e[2];
      const int v = (k & 1U) != 0 ? e[5] + 1 : e[4];
      corner[k] = wanted_.data() + n * wanted_at(h, s, v);
    }
    for (std::size_t l = 0; l < n; ++l) {
      counts[l] = corner[7][l] - corner[6][l] - corner[5][l] + corner[4][l] - corner[3][l] +
                  corner[2][l] + corner[1][l] - corner[0][l];
    }
  }

  [[nodiscard]] double score(const Edges& e, std::span<std::uint32_t> scratch) const {
    wanted_in(e, scratch);
    double worst = 1.0;
    for (std::size_t l = 0; l < lights(); ++l) {
      worst = std::min(worst, share(l, scratch[l]));
    }
    return worst;
  }

  [[nodiscard]] bool allowed(const Edges& e) const {
    const int n = cells(0);
    const auto real = [&](int axis, int number) {
      const std::vector<int>& cell = cell_[index(axis)];
      if (axis != 0) return cell[static_cast<std::size_t>(number)];
      const int turn = number >= n ? 1 : 0;
      return cell[static_cast<std::size_t>(number - turn * n)] + turn * grid_cells(0);
    };
    const std::array<int, 6> at = {real(0, e[0]),
                                   real(0, e[1]) + 1,
                                   real(1, e[2]),
                                   real(1, e[3]) + 1,
                                   real(2, e[4]),
                                   real(2, e[5]) + 1};
    for (std::size_t k = 0; k < caps_.size(); ++k) {
      const auto sum = [&](int h, int s, int v) { return unwanted_[k][unwanted_at(h, s, v)]; };
      const std::uint64_t inside = sum(at[1], at[3], at[5]) - sum(at[1], at[3], at[4]) -
                                   sum(at[1], at[2], at[5]) + sum(at[1], at[2], at[4]) -
                                   sum(at[0], at[3], at[5]) + sum(at[0], at[3], at[4]) +
                                   sum(at[0], at[2], at[5]) - sum(at[0], at[2], at[4]);
      if (inside > caps_[k]) return false;
    }
    return true;
  }

  [[nodiscard]] HsvBox box(const Edges& e) const {
    const auto low = [&](int axis, int number) {
      return size_[index(axis)] * cell_[index(axis)][static_cast<std::size_t>(number)];
    };
    const auto high = [&](int axis, int number) {
      return std::min(low(axis, number) + size_[index(axis)], kLevels[index(axis)]) - 1;
    };
    const int n = cells(0);
    HsvBox box;
    box.h = {low(0, e[0] % n), high(0, e[1] % n)};
    if ((box.h.to + 1) % 180 == box.h.from) box.h = {};
    box.s = {low(1, e[2]), high(1, e[3])};
    box.v = {low(2, e[4]), high(2, e[5])};
    return box;
  }

  /// The smallest edges that hold the share `keep` of all lights' pixels on every side.
  [[nodiscard]] Edges middle(double keep) const {
    Edges e{};
    for (int axis = 1; axis < kAxes; ++axis) {
      const std::vector<double> sums = marginal(axis);
      const auto at = [&](double share) {
        const auto it = std::lower_bound(sums.begin(), sums.end(), share * sums.back());
        return static_cast<int>(std::min<std::ptrdiff_t>(it - sums.begin(), cells(axis) - 1));
      };
      e[index(2 * axis)] = at(0.5 - 0.5 * keep);
      e[index(2 * axis + 1)] = at(0.5 + 0.5 * keep);
    }
    // Hue: the shortest arc with that share.
    const std::vector<double> sums = marginal(0);
    const int n = cells(0);
    const auto sum_before = [&](int number) {
      if (number == 0) return 0.0;
      return number <= n ? sums[index(number - 1)] : sums.back() + sums[index(number - n - 1)];
    };
    int shortest = n + 1;
    for (int from = 0; from < n; ++from) {
      for (int to = from; to < from + n && to - from < shortest; ++to) {
        const double inside =
            (to + 1 >= 2 * n ? 2.0 * sums.back() : sum_before(to + 1)) - sum_before(from);
        if (inside < keep * sums.back() * (1.0 - 1e-12)) continue;
        const int length = real_length(from, to);
        if (length < shortest) {
          shortest = length;
          e[0] = from;
          e[1] = to;
        }
        break;
      }
    }
    return e;
  }

  static std::size_t index(int k) { return static_cast<std::size_t>(k); }

 private:
  [[nodiscard]] double share(std::size_t light, std::uint64_t inside) const {
    return static_cast<double>(inside + lights_[light]->already) /
           static_cast<double>(totals_[light]);
  }

  [[nodiscard]] int grid_cells(int axis) const {
    return (kLevels[index(axis)] + size_[index(axis)] - 1) / size_[index(axis)];
  }

  [[nodiscard]] int real_length(int from, int to) const {
    const int n = cells(0);
    const int low = cell_[0][index(from)];
    const int high = cell_[0][index(to % n)] + (to >= n ? grid_cells(0) : 0);
    return high - low + 1;
  }

  /// Running sums along an axis of the mean share over lights.
  [[nodiscard]] std::vector<double> marginal(int axis) const {
    std::vector<double> sums(index(cells(axis)));
    std::vector<std::uint32_t> counts(lights());
    for (int k = 0; k < cells(axis); ++k) {
      Edges e = {0, cells(0) - 1, 0, cells(1) - 1, 0, cells(2) - 1};
      e[index(2 * axis)] = 0;
      e[index(2 * axis + 1)] = k;
      wanted_in(e, counts);
      for (std::size_t l = 0; l < lights(); ++l) {
        sums[index(k)] += static_cast<double>(counts[l]) / static_cast<double>(totals_[l]);
      }
    }
    return sums;
  }

  [[nodiscard]] std::size_t wanted_at(int h, int s, int v) const {
    return (index(h) * (index(cells(1)) + 1) + index(s)) * (index(cells(2)) + 1) + index(v);
  }
  [[nodiscard]] std::size_t unwanted_at(int h, int s, int v) const {
    return (index(h) * (index(grid_cells(1)) + 1) + index(s)) * (index(grid_cells(2)) + 1) +
           index(v);
  }

  void count_wanted() {
    std::array<std::vector<int>, kAxes> number;
    for (int axis = 0; axis < kAxes; ++axis) {
      number[index(axis)].assign(index(grid_cells(axis)), -1);
    }
    for (const Wanted* light : lights_) {
      for (const HsvCounts::Entry& entry : light->pixels.entries) {
        for (int axis = 0; axis < kAxes; ++axis) {
          number[index(axis)][index(level_of(entry.colour, axis) / size_[index(axis)])] = 0;
        }
      }
    }
    for (int axis = 0; axis < kAxes; ++axis) {
      for (int cell = 0; cell < grid_cells(axis); ++cell) {
        if (number[index(axis)][index(cell)] < 0) continue;
        number[index(axis)][index(cell)] = cells(axis);
        cell_[index(axis)].push_back(cell);
      }
    }
    const std::size_t n = lights();
    wanted_.assign(n * (2 * index(cells(0)) + 1) * (index(cells(1)) + 1) * (index(cells(2)) + 1),
                   0);
    for (std::size_t l = 0; l < n; ++l) {
      for (const HsvCounts::Entry& entry : lights_[l]->pixels.entries) {
        const int h = number[0][index(entry.colour.h / size_[0])];
        const int s = number[1][index(entry.colour.s / size_[1])];
        const int v = number[2][index(entry.colour.v / size_[2])];
        wanted_[n * wanted_at(h + 1, s + 1, v + 1) + l] += entry.count;
        wanted_[n * wanted_at(h + cells(0) + 1, s + 1, v + 1) + l] += entry.count;
      }
    }
    sum_up(wanted_, {2 * index(cells(0)) + 1, index(cells(1)) + 1, index(cells(2)) + 1}, n);
  }

  void count_unwanted(const BoxProblem& problem) {
    const std::array<std::size_t, 3> shape = {
        2 * index(grid_cells(0)) + 1, index(grid_cells(1)) + 1, index(grid_cells(2)) + 1};
    for (const Unwanted& unwanted : problem.unwanted) {
      std::vector<std::uint64_t> sums(shape[0] * shape[1] * shape[2]);
      for (const HsvCounts::Entry& entry : unwanted.pixels.entries) {
        const int h = entry.colour.h / size_[0];
        const int s = entry.colour.s / size_[1];
        const int v = entry.colour.v / size_[2];
        sums[unwanted_at(h + 1, s + 1, v + 1)] += entry.count;
        sums[unwanted_at(h + grid_cells(0) + 1, s + 1, v + 1)] += entry.count;
      }
      sum_up(sums, shape, 1);
      unwanted_.push_back(std::move(sums));
    }
  }

  /// Turns counts of cells into sums over all cells before, along every axis; `n` counts a cell.
  template <class T>
  static void sum_up(std::vector<T>& data, const std::array<std::size_t, 3>& shape, std::size_t n) {
    std::size_t step = n;
    for (int axis = kAxes - 1; axis >= 0; --axis) {
      const std::size_t length = step * shape[index(axis)];
      for (std::size_t start = 0; start < data.size(); start += length) {
        for (std::size_t k = start + step; k < start + length; ++k) data[k] += data[k - step];
      }
      step = length;
    }
  }

  std::array<int, kAxes> size_;
  std::vector<const Wanted*> lights_;
  std::vector<std::uint64_t> totals_;
  std::vector<std::uint64_t> caps_;
  std::array<std::vector<int>, kAxes> cell_;  ///< occupied cells
  std::vector<std::uint32_t> wanted_;
  std::vector<std::vector<std::uint64_t>> unwanted_;
};

/// A set of boxes: each edge anywhere in its interval.
struct BoxSet {
  Edges low{};
  Edges high{};
  double bound = 1.0;
  int freedom = 0;  ///< sum of the intervals' lengths
  bool operator<(const BoxSet& other) const {
    return bound != other.bound ? bound < other.bound : freedom > other.freedom;
  }
};

class Search {
 public:
  Search(const BoxProblem& problem, const BoxSearchOptions& options)
      : options_{options}, board_{problem, options.grid}, scratch_(board_.lights()) {}

  BoxFound run() {
    BoxFound found;
    found.bound = 0.0;
    if (board_.lights() == 0 || board_.cells(0) == 0) return found;
    need_.resize(board_.lights());
    raise(board_.score_of_none());
    for (const double keep : {1.0, 0.99, 0.96, 0.9, 0.8, 0.6, 0.4, 0.2, 0.05}) {
      climb(board_.middle(keep));
    }

    std::priority_queue<BoxSet> open;
    BoxSet all;
    all.low = {0, 0, 0, 0, 0, 0};
    all.high = {board_.cells(0) - 1,
                2 * board_.cells(0) - 2,
                board_.cells(1) - 1,
                board_.cells(1) - 1,
                board_.cells(2) - 1,
                board_.cells(2) - 1};
    if (narrow(all)) open.push(all);
    bool stopped = false;
    while (!open.empty() && open.top().bound > best_score_) {
      if (++found.nodes > options_.most_nodes ||
          (found.nodes % 256 == 0 && options_.stop && options_.stop())) {
        stopped = true;
        break;
      }
      BoxSet set = open.top();
      open.pop();
      if (!narrow(set)) continue;  // the best score has risen since
      const int edge = widest(set);
      if (edge < 0) {
        slide(set);
        continue;
      }
      const std::size_t e = Board::index(edge);
      const int middle = set.low[e] + (set.high[e] - set.low[e]) / 2;
      BoxSet upper = set;
      set.high[e] = middle;
      upper.low[e] = middle + 1;
      if (narrow(set)) open.push(set);
      if (narrow(upper)) open.push(upper);
    }
    found.score = best_score_;
    found.bound = stopped && !open.empty() ? std::max(best_score_, open.top().bound) : best_score_;
    if (best_) found.box = board_.box(*best_);
    return found;
  }

 private:
  static Edges largest(const BoxSet& set) {
    return {set.low[0], set.high[1], set.low[2], set.high[3], set.low[4], set.high[5]};
  }
  static Edges smallest(const BoxSet& set) {
    return {set.high[0], set.low[1], set.high[2], set.low[3], set.high[4], set.low[5]};
  }
  static bool empty(const Edges& e) { return e[0] > e[1] || e[2] > e[3] || e[4] > e[5]; }

  /// From now on only more than `score` counts.
  void raise(double score) {
    best_score_ = score;
    for (std::size_t l = 0; l < need_.size(); ++l) need_[l] = board_.need(l, score);
  }

  [[nodiscard]] bool better(const Edges& e) {
    if (empty(e)) return false;
    board_.wanted_in(board_.clipped(e), scratch_);
    bool all = true;
    for (std::size_t l = 0; l < need_.size(); ++l) all &= scratch_[l] >= need_[l];
    return all;
  }

  void take(const Edges& e) {
    if (!better(e)) return;
    best_ = board_.clipped(e);
    raise(board_.score(*best_, scratch_));
  }

  /// Narrows every edge's interval to where a box could be both allowed and better than the best.
  /// False when nothing is left, or when what is left has been settled.
  bool narrow(BoxSet& set) {
    const int turn = board_.cells(0);
    for (bool changed = true; changed;) {
      changed = false;
      for (std::size_t low = 0; low < 6; low += 2) {
        // The low edge is not above the high edge.
        changed |=
            raise_to(set.low[low + 1], set.low[low]) | lower_to(set.high[low], set.high[low + 1]);
      }
      changed |= lower_to(set.high[1], set.high[0] + turn - 1) |
                 raise_to(set.low[0], set.low[1] - turn + 1);
      for (std::size_t e = 0; e < 6; ++e) {
        if (set.low[e] > set.high[e]) return false;
      }
      Edges large = largest(set);
      if (!better(large)) return false;
      for (std::size_t e = 0; e < 6; ++e) {
        if (set.low[e] == set.high[e]) continue;
        // How far in the edge may come before the largest box is no better than the best.
        const bool is_low = e % 2 == 0;
        int in = is_low ? set.high[e] : set.low[e];
        Edges probe = large;
        probe[e] = in;
        if (!better(probe)) {
          int good = large[e];
          while (std::abs(in - good) > 1) {
            probe[e] = good + (in - good) / 2;
            (better(probe) ? good : in) = probe[e];
          }
          changed |= is_low ? lower_to(set.high[e], good) : raise_to(set.low[e], good);
        }
      }
      Edges small = smallest(set);
      if (empty(small)) continue;
      if (!board_.allowed(small)) return false;
      for (std::size_t e = 0; e < 6; ++e) {
        if (set.low[e] == set.high[e]) continue;
        // How far out it may go before the smallest box breaks a cap.
        const bool is_low = e % 2 == 0;
        int out = is_low ? set.low[e] : set.high[e];
        Edges probe = small;
        probe[e] = out;
        if (e == 0) probe[e] = out = std::max(out, small[1] - turn + 1);
        if (e == 1) probe[e] = out = std::min(out, small[0] + turn - 1);
        if (!board_.allowed(probe)) {
          int good = small[e];
          while (std::abs(out - good) > 1) {
            probe[e] = good + (out - good) / 2;
            (board_.allowed(probe) ? good : out) = probe[e];
          }
          changed |= is_low ? raise_to(set.low[e], good) : lower_to(set.high[e], good);
        }
      }
    }
    const Edges large = board_.clipped(largest(set));
    set.bound = board_.score(large, scratch_);
    set.freedom = 0;
    for (std::size_t e = 0; e < 6; ++e) set.freedom += set.high[e] - set.low[e];
    if (!board_.allowed(large)) return true;
    take(large);
    return false;
  }

  static bool raise_to(int& value, int floor) {
    if (value >= floor) return false;
    value = floor;
    return true;
  }
  static bool lower_to(int& value, int ceiling) {
    if (value <= ceiling) return false;
    value = ceiling;
    return true;
  }

  /// The hue or saturation edge with the longest interval; -1 when they are all settled.
  static int widest(const BoxSet& set) {
    int edge = -1;
    int length = 0;
    for (int e = 0; e < 4; ++e) {
      const int here = set.high[Board::index(e)] - set.low[Board::index(e)];
      if (here > length) {
        length = here;
        edge = e;
      }
    }
    return edge;
  }

  /// Hue and saturation are settled: both edges of value in one sweep.
  void slide(const BoxSet& set) {
    sweep(smallest(set), 2, set.low, set.high, [&](const Edges& e) { take(e); });
  }

  /// Shows `visit` every box that has for its low edge on `axis` the highest allowed high edge,
  /// which only rises with the low edge.
  template <class Visit>
  void sweep(Edges e, std::size_t axis, const Edges& low, const Edges& high, const Visit& visit) {
    const std::size_t a = 2 * axis;
    int top = low[a] - 1;
    for (int from = low[a]; from <= high[a]; ++from) {
      e[a] = from;
      const int end = axis == 0 ? std::min(high[a + 1], from + board_.cells(0) - 1) : high[a + 1];
      for (top = std::max(top, from - 1); top < end; ++top) {
        e[a + 1] = top + 1;
        if (!board_.allowed(e)) break;
      }
      if (top < std::max(from, low[a + 1])) continue;
      e[a + 1] = top;
      visit(e);
    }
  }

  /// One axis after the other to its best allowed interval, until nothing improves.
  void climb(Edges e) {
    double best = -1.0;
    for (bool improved = true; improved;) {
      improved = false;
      for (std::size_t axis = 0; axis < kAxes; ++axis) {
        const int cells = board_.cells(static_cast<int>(axis));
        Edges high{};
        high[2 * axis] = cells - 1;
        high[2 * axis + 1] = axis == 0 ? 2 * cells - 2 : cells - 1;
        Edges here = e;
        sweep(e, axis, {}, high, [&](const Edges& candidate) {
          const double score = board_.score(candidate, scratch_);
          if (score <= best) return;
          best = score;
          here = candidate;
          improved = true;
        });
        e = here;
      }
    }
    if (best > best_score_) take(e);
  }

  const BoxSearchOptions& options_;
  Board board_;
  std::vector<std::uint32_t> scratch_;
  std::vector<std::uint32_t> need_;
  double best_score_ = 0.0;
  std::optional<Edges> best_;
};

// ---- single levels
// -------------------------------------------------------------------------------

/// Counts along one axis of the pixels that the box's other two axes let through.
std::vector<std::uint64_t> along(const HsvCounts& pixels, const HsvBox& box, int axis) {
  std::vector<std::uint64_t> counts(
      static_cast<std::size_t>(kLevels[static_cast<std::size_t>(axis)]));
  HsvBox open = box;
  if (axis == 0) open.h = {};
  if (axis == 1) open.s = {0, 255};
  if (axis == 2) open.v = {0, 255};
  for (const HsvCounts::Entry& entry : pixels.entries) {
    if (open.contains(entry.colour)) {
      counts[static_cast<std::size_t>(level_of(entry.colour, axis))] += entry.count;
    }
  }
  return counts;
}

/// One axis of a box as low and high edge; the high edge of a hue arc that passes 0 is above 179.
std::array<int, 2> interval(const HsvBox& box, int axis) {
  if (axis == 1) return box.s;
  if (axis == 2) return box.v;
  return {box.h.from, box.h.from <= box.h.to ? box.h.to : box.h.to + 180};
}

void set_interval(HsvBox& box, int axis, std::array<int, 2> to) {
  if (axis == 1) box.s = to;
  if (axis == 2) box.v = to;
  if (axis != 0) return;
  if (to[1] - to[0] >= 179) {
    box.h = {};
  } else {
    box.h = {((to[0] % 180) + 180) % 180, ((to[1] % 180) + 180) % 180};
  }
}

/// Counts along an axis, ready for sums over intervals that may pass the end of the hue circle.
struct Sums {
  int levels = 0;
  std::vector<std::uint64_t> before;  ///< over levels -levels .. 2 levels
  Sums(const std::vector<std::uint64_t>& counts, bool circle)
      : levels(static_cast<int>(counts.size())), before(3 * counts.size() + 1) {
    for (std::size_t k = 0; k < 3 * counts.size(); ++k) {
      const bool own = k >= counts.size() && k < 2 * counts.size();
      before[k + 1] = before[k] + (circle || own ? counts[k % counts.size()] : 0);
    }
  }
  [[nodiscard]] std::uint64_t in(int from, int to) const {
    return before[static_cast<std::size_t>(to + 1 + levels)] -
           before[static_cast<std::size_t>(from + levels)];
  }
};

struct AxisView {
  std::vector<Sums> wanted;
  std::vector<std::uint64_t> already;
  std::vector<std::uint64_t> totals;
  std::vector<Sums> unwanted;
  std::vector<std::uint64_t> caps;

  AxisView(const BoxProblem& problem, const HsvBox& box, int axis) {
    for (const Wanted& light : problem.wanted) {
      if (light.total() == 0) continue;
      wanted.emplace_back(along(light.pixels, box, axis), axis == 0);
      already.push_back(light.already);
      totals.push_back(light.total());
    }
    for (const Unwanted& one : problem.unwanted) {
      unwanted.emplace_back(along(one.pixels, box, axis), axis == 0);
      caps.push_back(one.most);
    }
  }
  [[nodiscard]] double score(int from, int to) const {
    double worst = 1.0;
    for (std::size_t l = 0; l < wanted.size(); ++l) {
      worst = std::min(worst,
                       static_cast<double>(wanted[l].in(from, to) + already[l]) /
                           static_cast<double>(totals[l]));
    }
    return worst;
  }
  [[nodiscard]] bool allowed(int from, int to) const {
    for (std::size_t k = 0; k < unwanted.size(); ++k) {
      if (unwanted[k].in(from, to) > caps[k]) return false;
    }
    return true;
  }
  [[nodiscard]] bool any_wanted(int level) const {
    return std::any_of(
        wanted.begin(), wanted.end(), [&](const Sums& s) { return s.in(level, level) > 0; });
  }
  /// Whether levels [low, high] beside the box [from, to] hold at most one part in `parts` of what
  /// the box leaves of every cap.
  [[nodiscard]] bool affordable(int low, int high, int from, int to, int parts) const {
    for (std::size_t k = 0; k < unwanted.size(); ++k) {
      const std::uint64_t inside = unwanted[k].in(from, to);
      const std::uint64_t left = caps[k] > inside ? caps[k] - inside : 0;
      if (unwanted[k].in(low, high) > left / static_cast<std::uint64_t>(parts)) return false;
    }
    return true;
  }
};

/// Moves both edges of one axis by up to a cell to the highest score.
bool sharpen(const BoxProblem& problem, HsvBox& box, int axis, int cell) {
  const AxisView view(problem, box, axis);
  const auto [from, to] = interval(box, axis);
  const int levels = kLevels[static_cast<std::size_t>(axis)];
  double best = view.score(from, to);
  std::array<int, 2> at = {from, to};
  for (int low = from - cell; low <= from + cell; ++low) {
    for (int high = to - cell; high <= to + cell; ++high) {
      if (low > high || (axis != 0 && (low < 0 || high >= levels))) continue;
      if (axis == 0 && (high - low >= levels || low < -levels || high >= 2 * levels)) continue;
      const double score = view.score(low, high);
      if (score > best && view.allowed(low, high)) {
        best = score;
        at = {low, high};
      }
    }
  }
  const bool moved = at[0] != from || at[1] != to;
  if (moved) set_interval(box, axis, at);
  return moved;
}

/// Puts each edge of one axis halfway between the wanted pixel nearest to it and the level at which
/// it would let in more than its share of what the caps still allow.
void widen(const BoxProblem& problem, HsvBox& box, int axis, int edges_left) {
  const AxisView view(problem, box, axis);
  const auto [from, to] = interval(box, axis);
  const int levels = kLevels[static_cast<std::size_t>(axis)];
  std::array<int, 2> at = {from, to};
  const int free_levels = axis == 0 ? levels - (to - from + 1) : levels;
  for (int side = 0; side < 2; ++side) {
    const int out = side == 0 ? -1 : 1;
    const int edge = side == 0 ? from : to;
    const int end = axis == 0 ? edge + out * free_levels : (side == 0 ? 0 : levels - 1);
    const auto affordable = [&](int level) {
      return side == 0 ? view.affordable(level, from - 1, from, to, edges_left)
                       : view.affordable(to + 1, level, from, to, edges_left);
    };
    int last = edge;
    while (last != end && affordable(last + out)) last += out;
    if (last == end) {
      // Nothing out there. On the circle the two edges share what is free.
      at[static_cast<std::size_t>(side)] = axis == 0 ? edge + out * (free_levels / 2) : end;
      continue;
    }
    int nearest = last;  // the outermost wanted pixel
    const int other = side == 0 ? to : from;
    while (nearest != other && !view.any_wanted(nearest)) nearest -= out;
    at[static_cast<std::size_t>(side)] = nearest + (last - nearest) / 2;
  }
  // On a circle that is nearly all the box's, the edges must not run past each other.
  if (axis == 0 && at[1] - at[0] >= levels) return;
  if (at[0] > at[1]) return;
  if (view.score(at[0], at[1]) >= view.score(from, to) && view.allowed(at[0], at[1])) {
    set_interval(box, axis, at);
  }
}

}  // namespace

double BoxProblem::score(const HsvBox& box) const {
  double worst = 1.0;
  const ThresholdSet set{"", {box}};
  for (const Wanted& light : wanted) {
    if (light.total() == 0) continue;
    worst = std::min(worst,
                     static_cast<double>(count_in(light.pixels, set) + light.already) /
                         static_cast<double>(light.total()));
  }
  return worst;
}

bool BoxProblem::allowed(const HsvBox& box) const {
  const ThresholdSet set{"", {box}};
  return std::all_of(unwanted.begin(), unwanted.end(), [&](const Unwanted& one) {
    return count_in(one.pixels, set) <= one.most;
  });
}

BoxFound find_box(const BoxProblem& problem, const BoxSearchOptions& options) {
  assert(options.grid.h >= 1 && options.grid.s >= 1 && options.grid.v >= 1);
  return Search(problem, options).run();
}

HsvBox refine(const BoxProblem& problem, HsvBox box, const BoxGrid& grid) {
  const std::array<int, kAxes> cell = {grid.h, grid.s, grid.v};
  for (int round = 0; round < 8; ++round) {
    bool moved = false;
    for (int axis = 0; axis < kAxes; ++axis) {
      moved |= sharpen(problem, box, axis, cell[static_cast<std::size_t>(axis)]);
    }
    if (!moved) break;
  }
  for (int axis = 0; axis < kAxes; ++axis) widen(problem, box, axis, 2 * (kAxes - axis));
  return box;
}

}  // namespace rondel::colour
