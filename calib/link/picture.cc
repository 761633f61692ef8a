#include "calib/link/picture.h"

#include <cmath>
#include <utility>

namespace rondel::link {
namespace {

constexpr int kBearings = 96;  // samples around a curve of equal range

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

}  // namespace

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

}  // namespace rondel::link
