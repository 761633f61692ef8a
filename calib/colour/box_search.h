#pragma once

#include <cstdint>
#include <functional>
#include <optional>
#include <vector>

#include "calib/colour/counts.h"
#include "calib/colour/threshold_set.h"

namespace rondel::colour {

/// Pixels that a box should leave out.
struct Unwanted {
  HsvCounts pixels;
  std::uint64_t most = 0;  ///< so many of them may be inside
};

/// An object's pixels in one light.
struct Wanted {
  HsvCounts pixels;
  std::uint64_t already = 0;  ///< further pixels that another box has
  [[nodiscard]] std::uint64_t total() const { return pixels.total() + already; }
};

/// What one box is to be found for. A box's score is its worst recall over `wanted`.
struct BoxProblem {
  std::vector<Wanted> wanted;      ///< one entry a light; those without any pixel are left out
  std::vector<Unwanted> unwanted;  ///< caps that hold all at once
  [[nodiscard]] double score(const HsvBox& box) const;
  [[nodiscard]] bool allowed(const HsvBox& box) const;
};

/// The grid on which the search is exact: edges at multiples of these levels. Each from 1 to 4.
struct BoxGrid {
  int h = 4;
  int s = 4;
  int v = 4;
};

struct BoxSearchOptions {
  BoxGrid grid;
  std::uint64_t most_nodes = 20'000'000;  ///< then the search stops with a gap
  std::function<bool()> stop;             ///< asked now and then
};

/// What a search found and what it has proven.
struct BoxFound {
  std::optional<HsvBox> box;  ///< none: no box on the grid with any recall keeps the caps
  double score = 0.0;         ///< worst light's recall of `box`
  double bound = 1.0;         ///< no box on the grid scores more
  std::uint64_t nodes = 0;
  [[nodiscard]] double gap() const { return bound - score; }
};

/// The box on the grid with the highest score that keeps all caps; hue arcs may pass 0.
///
/// Branch and bound over sets of boxes given by intervals of their six edges, with counts from
/// integral histograms (efficient subwindow search, Lampert, Blaschko and Hofmann 2008). Beside the
/// bound from the largest box of a set, each edge's interval is narrowed from both ends: an edge so
/// far in that the largest box falls under the best score so far, or so far out that the smallest
/// box breaks a cap, is left out. Finished searches have bound == score.
[[nodiscard]] BoxFound find_box(const BoxProblem& problem, const BoxSearchOptions& options = {});

/// `box` with its edges moved by single levels: first to where the score is highest, one axis after
/// the other, each edge within a cell of where it was in every round; then to the widest margin
/// that loses no score: halfway between the outermost wanted pixel and where the caps would break
/// (what they still allow is shared by the edges). An edge with nothing outside goes to the end of
/// the scale.
[[nodiscard]] HsvBox refine(const BoxProblem& problem, HsvBox box, const BoxGrid& grid = {});

}  // namespace rondel::colour
