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

}  // namespace

double RadialEdges::azimuth_rad(std::size_t ray) const {
  return 2.0 * std::numbers::pi * static_cast<double>(ray) / static_cast<double>(rays.size());
}

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

RadialEdges radial_edges(const cv::Mat& grey, ImagePoint from, int rays, int most) {
  RadialEdges edges;
  edges.from = from;
  edges.rays.resize(static_cast<std::size_t>(rays));
  edges.end_px.resize(static_cast<std::size_t>(rays));
  std::vector<double> steps_seen;
  std::vector<double> level;
  std::vector<double> step;
  for (std::size_t ray = 0; ray < edges.rays.size(); ++ray) {
    const double azimuth = edges.azimuth_rad(ray);
    const double cu = std::cos(azimuth);
    const double cv = std::sin(azimuth);
    const double end = way_out_px(grey, from, cu, cv);
    edges.end_px[ray] = end;
    const int count = static_cast<int>(end);
    level.clear();
    for (int r = 0; r <= count; ++r) {
      level.push_back(level_at(grey, {from.u_px + r * cu, from.v_px + r * cv}));
    }
    step.assign(level.size(), 0.0);
    for (std::size_t r = 1; r + 1 < level.size(); ++r) {
      step[r] = 0.5 * (level[r + 1] - level[r - 1]);
      if (r % 3 == 0) steps_seen.push_back(std::abs(step[r]));
    }
    for (std::size_t r = 2; r + 2 < step.size(); ++r) {
      const double s = std::abs(step[r]);
      if (s <= std::abs(step[r - 1]) || s < std::abs(step[r + 1])) continue;
      const double before = std::abs(step[r - 1]);
      const double after = std::abs(step[r + 1]);
      const double bend = before - 2.0 * s + after;
      const double shift = bend < 0.0 ? 0.5 * (before - after) / bend : 0.0;
      edges.rays[ray].push_back({static_cast<double>(r) + shift, step[r]});
    }
  }
  if (steps_seen.empty()) return edges;
  const auto middle = steps_seen.begin() + static_cast<std::ptrdiff_t>(steps_seen.size() / 2);
  std::nth_element(steps_seen.begin(), middle, steps_seen.end());
  edges.noise = std::max(0.05, 1.4826 * *middle);
  for (std::vector<RadialEdge>& ray : edges.rays) {
    std::erase_if(ray, [&](const RadialEdge& e) { return std::abs(e.step) < 3.0 * edges.noise; });
    if (ray.size() > static_cast<std::size_t>(most)) {
      std::nth_element(
          ray.begin(), ray.begin() + most, ray.end(), [](const RadialEdge& a, const RadialEdge& b) {
            return std::abs(a.step) > std::abs(b.step);
          });
      ray.resize(static_cast<std::size_t>(most));
    }
    std::sort(ray.begin(), ray.end(), [](const RadialEdge& a, const RadialEdge& b) {
      return a.radius_px < b.radius_px;
    });
  }
  return edges;
}

std::vector<EdgePoint> edges_near(
    const cv::Mat& grey, const Ellipse& ellipse, double reach_px, int rays, double least_step) {
  std::vector<EdgePoint> points;
  constexpr double kSpacingPx = 0.5;
  const int half = static_cast<int>(std::ceil(reach_px / kSpacingPx)) + 2;
  std::vector<double> level(static_cast<std::size_t>(2 * half + 1));
  std::vector<double> step(level.size());
  for (int ray = 0; ray < rays; ++ray) {
    const double azimuth = 2.0 * std::numbers::pi * ray / rays;
    const double cu = std::cos(azimuth);
    const double cv = std::sin(azimuth);
    const double radius = ellipse.radius_px(azimuth);
    const double outer = radius + half * kSpacingPx;
    if (outer > way_out_px(grey, ellipse.centre(), cu, cv)) continue;
    for (int k = -half; k <= half; ++k) {
      const double r = radius + k * kSpacingPx;
      level[static_cast<std::size_t>(k + half)] =
          level_at(grey, {ellipse.p[0] + r * cu, ellipse.p[1] + r * cv});
    }
    // Steps over two pixels: bilinear samples of neighbours are too alike for less.
    for (std::size_t k = 2; k + 2 < level.size(); ++k)
      step[k] = 0.5 * (level[k + 2] - level[k - 2]);
    std::size_t best = 0;
    for (std::size_t k = 3; k + 3 < level.size(); ++k) {
      const double s = std::abs(step[k]);
      if (s >= std::abs(step[k - 1]) && s >= std::abs(step[k + 1]) &&
          (best == 0 || s > std::abs(step[best]))) {
        best = k;
      }
    }
    if (best == 0 || std::abs(step[best]) < least_step) continue;
    const double before = std::abs(step[best - 1]);
    const double after = std::abs(step[best + 1]);
    const double bend = before - 2.0 * std::abs(step[best]) + after;
    const double shift = bend < 0.0 ? std::clamp(0.5 * (before - after) / bend, -1.0, 1.0) : 0.0;
    const double r = radius + (static_cast<double>(best) - half + shift) * kSpacingPx;
    points.push_back({{ellipse.p[0] + r * cu, ellipse.p[1] + r * cv}, azimuth, step[best]});
  }
  return points;
}

}  // namespace rondel::vision
