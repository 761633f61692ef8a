#include "vision/rim/radial_edges.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace rondel::vision {
namespace {

/// Distance from `from` to the image's last whole sampling place in direction (cu, cv).
double way_out_px(const cv::Mat& grey, ImagePoint from, double cu, double cv) {
  constexpr double kBorderPx = 1.0;  // bilinear samples need a neighbour
  double way = 1e9;
  if (cu > 1e-12) way = std::min(way, (grey.cols - 1 - kBorderPx - from.u_px) / cu);
  if (cu < -1e-12) way = std::min(way, (kBorderPx - from.u_px) / cu);
  if (cv > 1e-12) way = std::min(way, (grey.rows - 1 - kBorderPx - from.v_px) / cv);
  if (cv < -1e-12) way = std::min(way, (kBorderPx - from.v_px) / cv);
  return std::max(0.0, way);
}

/// Steps of level by ray and place along it; absent beyond the image.
class Steps {
 public:
  Steps(std::size_t rays, std::size_t places)
      : rays_(rays), places_(places), step_(rays * places, 0.0F), there_(rays * places, 0.0F) {}

  void set(std::size_t ray, std::size_t place, double step) {
    step_[ray * places_ + place] = static_cast<float>(step);
    there_[ray * places_ + place] = 1.0F;
  }

  void spread(double rays) {
    const auto half = static_cast<std::size_t>(std::ceil(2.5 * rays));
    std::vector<float> sum(step_.size(), 0.0F);
    std::vector<float> weight(step_.size(), 0.0F);
    for (std::size_t ray = 0; ray < rays_; ++ray) {
      for (std::size_t k = 0; k <= 2 * half; ++k) {
        const std::size_t other = (ray + rays_ + k - half) % rays_;
        const double x = (static_cast<double>(k) - static_cast<double>(half)) / rays;
        const auto w = static_cast<float>(std::exp(-0.5 * x * x));
        for (std::size_t r = 0; r < places_; ++r) {
          sum[ray * places_ + r] += w * step_[other * places_ + r];
          weight[ray * places_ + r] += w * there_[other * places_ + r];
        }
      }
    }
    for (std::size_t i = 0; i < step_.size(); ++i) {
      step_[i] = there_[i] > 0.0F ? sum[i] / weight[i] : 0.0F;
    }
  }

  /// The stillest quarter tells: most of a busy picture is edges. 0.319 is a normal error's
  /// quartile.
  [[nodiscard]] double noise() const {
    std::vector<float> steps;
    for (std::size_t i = 0; i < step_.size(); i += 3) {
      if (there_[i] > 0.0F) steps.push_back(std::abs(step_[i]));
    }
    constexpr double kLeast = 0.05;
    if (steps.empty()) return kLeast;
    const auto quarter = steps.begin() + static_cast<std::ptrdiff_t>(steps.size() / 4);
    std::nth_element(steps.begin(), quarter, steps.end());
    return std::max(kLeast, double{*quarter} / 0.319);
  }

  /// Calls `visit(place, step)` for each extremum of at least `least`.
  template <class Visit>
  void peaks(std::size_t ray, double least, Visit visit) const {
    const float* row = step_.data() + ray * places_;
    const float* there = there_.data() + ray * places_;
    for (std::size_t r = 1; r + 1 < places_; ++r) {
      const double s = std::abs(double{row[r]});
      const double before = std::abs(double{row[r - 1]});
      const double after = std::abs(double{row[r + 1]});
      if (s < least || s <= before || s < after || there[r - 1] + there[r + 1] < 2.0F) continue;
      const double bend = before - 2.0 * s + after;
      const double shift = bend < 0.0 ? std::clamp(0.5 * (before - after) / bend, -0.5, 0.5) : 0.0;
      visit(static_cast<double>(r) + shift, double{row[r]});
    }
  }

 private:
  std::size_t rays_;
  std::size_t places_;
  std::vector<float> step_;
  std::vector<float> there_;
};

}  // namespace

double level_at(const cv::Mat& grey, ImagePoint at) {
  const int u = static_cast<int>(std::floor(at.u_px));
  const int v = static_cast<int>(std::floor(at.v_px));
  const double fu = at.u_px - u;
  const double fv = at.v_px - v;
  const float* low = grey.ptr<float>(v) + u;
  const float* high = grey.ptr<float>(v + 1) + u;
  return (1.0 - fv) * ((1.0 - fu) * double{low[0]} + fu * double{low[1]}) +
         fv * ((1.0 - fu) * double{high[0]} + fu * double{high[1]});
}

RadialEdges radial_edges(
    const cv::Mat& grey, ImagePoint from, int rays, int most, double spread_rays) {
  RadialEdges edges;
  edges.from = from;
  const auto count = static_cast<std::size_t>(rays);
  edges.rays.resize(count);
  std::size_t longest = 0;
  for (std::size_t ray = 0; ray < count; ++ray) {
    const double azimuth = 2.0 * std::numbers::pi * static_cast<double>(ray) / rays;
    edges.cos_azimuth.push_back(std::cos(azimuth));
    edges.sin_azimuth.push_back(std::sin(azimuth));
    edges.end_px.push_back(
        way_out_px(grey, from, edges.cos_azimuth.back(), edges.sin_azimuth.back()));
    longest = std::max(longest, static_cast<std::size_t>(edges.end_px.back()) + 1);
  }
  Steps steps(count, longest);
  std::vector<double> level;
  for (std::size_t ray = 0; ray < count; ++ray) {
    const auto length = static_cast<std::size_t>(edges.end_px[ray]) + 1;
    level.resize(length);
    for (std::size_t r = 0; r < length; ++r) {
      const auto away = static_cast<double>(r);
      level[r] = level_at(
          grey,
          {from.u_px + away * edges.cos_azimuth[ray], from.v_px + away * edges.sin_azimuth[ray]});
    }
    for (std::size_t r = 1; r + 1 < length; ++r) {
      steps.set(ray, r, 0.5 * (level[r + 1] - level[r - 1]));
    }
  }
  steps.spread(spread_rays);
  edges.noise = steps.noise();
  for (std::size_t ray = 0; ray < count; ++ray) {
    auto& found = edges.rays[ray];
    steps.peaks(ray, 3.0 * edges.noise, [&](double r, double step) { found.push_back({r, step}); });
    if (found.size() <= static_cast<std::size_t>(most)) continue;
    std::nth_element(found.begin(),
                     found.begin() + most,
                     found.end(),
                     [](const RadialEdge& a, const RadialEdge& b) {
                       return std::abs(a.step) > std::abs(b.step);
                     });
    found.resize(static_cast<std::size_t>(most));
    std::sort(found.begin(), found.end(), [](const RadialEdge& a, const RadialEdge& b) {
      return a.radius_px < b.radius_px;
    });
  }
  return edges;
}

NearEdges edges_near(const cv::Mat& grey,
                     const Ellipse& ellipse,
                     double reach_px,
                     double least_step,
                     int rays,
                     double spread_rays) {
  constexpr double kSpacingPx = 0.5;
  const int half = static_cast<int>(std::ceil(reach_px / kSpacingPx)) + 3;
  const auto count = static_cast<std::size_t>(rays);
  const auto length = static_cast<std::size_t>(2 * half + 1);
  NearEdges edges;
  edges.from = ellipse.centre();
  edges.rays.resize(count);
  Steps steps(count, length);
  std::vector<double> level(length);
  for (std::size_t ray = 0; ray < count; ++ray) {
    const double azimuth = 2.0 * std::numbers::pi * static_cast<double>(ray) / rays;
    const double cu = std::cos(azimuth);
    const double cv = std::sin(azimuth);
    const double radius = ellipse.radius_px(azimuth);
    edges.cos_azimuth.push_back(cu);
    edges.sin_azimuth.push_back(cv);
    const bool inside = radius + half * kSpacingPx <= way_out_px(grey, edges.from, cu, cv);
    edges.start_px.push_back(inside ? radius : -1.0);
    if (!inside) continue;
    for (std::size_t k = 0; k < length; ++k) {
      const double r = radius + (static_cast<double>(k) - half) * kSpacingPx;
      level[k] = level_at(grey, {edges.from.u_px + r * cu, edges.from.v_px + r * cv});
    }
    // Over two pixels: bilinear samples of neighbours are too alike for less.
    for (std::size_t k = 2; k + 2 < length; ++k) {
      steps.set(ray, k, 0.5 * (level[k + 2] - level[k - 2]));
    }
  }
  steps.spread(spread_rays);
  for (std::size_t ray = 0; ray < count; ++ray) {
    if (edges.start_px[ray] < 0.0) continue;
    steps.peaks(ray, least_step, [&](double k, double step) {
      edges.rays[ray].push_back({edges.start_px[ray] + (k - half) * kSpacingPx, step});
    });
  }
  return edges;
}

}  // namespace rondel::vision
