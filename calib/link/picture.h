#pragma once

#include <cmath>
#include <cstddef>
#include <cstdint>
#include <numbers>
#include <span>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/link/board_tables.h"
#include "calib/link/codebook.h"

// What the layouts are fitted to and judged by: the exact map, sampled in the image.
namespace rondel::link {

inline constexpr double kPi = std::numbers::pi;
inline constexpr int kMostKnots = 254;  ///< curves of equal range that are traced at most

constexpr std::size_t zu(int i) { return static_cast<std::size_t>(i); }

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

/// The exact map at every visible pixel; no curves yet.
[[nodiscard]] Picture survey(const Scene& scene, double height_m);

/// Traces the curves at the book's cell ends, or as many as kMostKnots allows.
void trace_curves(const Scene& scene, const Codebook& book, Picture& picture);

/// What a pixel along the radius is worth at a range, m, mean over the bearings; 0 where the range
/// is not seen.
[[nodiscard]] double pixel_worth(const FloorMap& map, double range_m, double height_m);

}  // namespace rondel::link
