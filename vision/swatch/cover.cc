#include "vision/swatch/cover.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <opencv2/imgproc.hpp>
#include <vector>

namespace rondel::vision {
namespace {

cv::Mat shape_of(const Disc& disc, cv::Size size) {
  cv::Mat out(size, CV_8U, cv::Scalar(0));
  for (int v = 0; v < size.height; ++v) {
    for (int u = 0; u < size.width; ++u) {
      const double du = u - disc.centre.u_px;
      const double dv = v - disc.centre.v_px;
      if (du * du + dv * dv <= disc.radius_px * disc.radius_px) out.at<unsigned char>(v, u) = 255;
    }
  }
  return out;
}

cv::Mat shape_of(const Box& box, cv::Size size) {
  cv::Mat out(size, CV_8U, cv::Scalar(0));
  for (int v = 0; v < size.height; ++v) {
    for (int u = 0; u < size.width; ++u) {
      if (u >= box.low.u_px && u <= box.high.u_px && v >= box.low.v_px && v <= box.high.v_px) {
        out.at<unsigned char>(v, u) = 255;
      }
    }
  }
  return out;
}

/// Even-odd rule.
cv::Mat shape_of(const Polygon& polygon, cv::Size size) {
  cv::Mat out(size, CV_8U, cv::Scalar(0));
  const auto& corners = polygon.corners;
  for (int v = 0; v < size.height; ++v) {
    for (int u = 0; u < size.width; ++u) {
      bool inside = false;
      for (std::size_t i = 0, j = corners.size() - 1; i < corners.size(); j = i++) {
        const ImagePoint a = corners[i];
        const ImagePoint b = corners[j];
        if ((a.v_px > v) == (b.v_px > v)) continue;
        const double at = a.u_px + (v - a.v_px) * (b.u_px - a.u_px) / (b.v_px - a.v_px);
        if (u < at) inside = !inside;
      }
      if (inside) out.at<unsigned char>(v, u) = 255;
    }
  }
  return out;
}

/// How unlike two colours are: the difference of chromaticity counts fully, that of brightness a
/// third, since one object has a bright and a shaded side.
double unlike(const cv::Vec3d& a, const cv::Vec3d& b) {
  const double sum_a = std::max(30.0, a[0] + a[1] + a[2]);
  const double sum_b = std::max(30.0, b[0] + b[1] + b[2]);
  const double dark = std::min(sum_a, sum_b);
  double chroma2 = 0.0;
  for (int c = 0; c < 3; ++c) {
    const double d = dark * (a[c] / sum_a - b[c] / sum_b);
    chroma2 += d * d;
  }
  const double bright = (sum_a - sum_b) / 3.0;
  return std::sqrt(chroma2 + bright * bright / 9.0);
}

/// The patch around `seed` whose pixels are reached over steps between like neighbours and are like
/// the seed, both within the tolerance.
cv::Mat patch(const cv::Mat& bgr, const cv::Mat& mask, cv::Point seed, double tolerance, int most) {
  cv::Mat out(bgr.size(), CV_8U, cv::Scalar(0));
  cv::Vec3d mean;
  int count = 0;
  for (int dv = -1; dv <= 1; ++dv) {
    for (int du = -1; du <= 1; ++du) {
      const cv::Point at{seed.x + du, seed.y + dv};
      if (!cv::Rect({}, bgr.size()).contains(at)) continue;
      mean += bgr.at<cv::Vec3b>(at);
      ++count;
    }
  }
  mean *= 1.0 / count;
  std::vector<cv::Point> open{seed};
  out.at<unsigned char>(seed) = 255;
  int area = 1;
  while (!open.empty() && area <= most) {
    const cv::Point at = open.back();
    open.pop_back();
    const cv::Vec3d here = bgr.at<cv::Vec3b>(at);
    for (const cv::Point step : {cv::Point{1, 0}, {-1, 0}, {0, 1}, {0, -1}}) {
      const cv::Point next = at + step;
      if (!cv::Rect({}, bgr.size()).contains(next) || out.at<unsigned char>(next) != 0 ||
          mask.at<unsigned char>(next) == 0) {
        continue;
      }
      const cv::Vec3d there = bgr.at<cv::Vec3b>(next);
      if (unlike(there, mean) > 2.0 * tolerance || unlike(there, here) > tolerance) continue;
      out.at<unsigned char>(next) = 255;
      open.push_back(next);
      ++area;
    }
  }
  return out;
}

/// How unlike the pixels on either side of a patch's border are, on the mean.
double border_strength(const cv::Mat& bgr, const cv::Mat& mask, const cv::Mat& patch) {
  double sum = 0.0;
  int pairs = 0;
  for (int v = 1; v + 1 < bgr.rows; ++v) {
    for (int u = 1; u + 1 < bgr.cols; ++u) {
      if (patch.at<unsigned char>(v, u) == 0) continue;
      for (const cv::Point step : {cv::Point{1, 0}, {-1, 0}, {0, 1}, {0, -1}}) {
        const cv::Point next = cv::Point{u, v} + step;
        if (patch.at<unsigned char>(next) != 0 || mask.at<unsigned char>(next) == 0) continue;
        sum += unlike(bgr.at<cv::Vec3b>(v, u), bgr.at<cv::Vec3b>(next));
        ++pairs;
      }
    }
  }
  return pairs == 0 ? 0.0 : sum / pairs;
}

cv::Mat grown(const Grow& grow,
              const cv::Mat& bgr,
              const cv::Mat& mask,
              std::optional<double> most_area_px) {
  const cv::Point seed{static_cast<int>(std::lround(grow.seed.u_px)),
                       static_cast<int>(std::lround(grow.seed.v_px))};
  cv::Mat best(bgr.size(), CV_8U, cv::Scalar(0));
  if (!cv::Rect({}, bgr.size()).contains(seed) || mask.at<unsigned char>(seed) == 0) return best;
  best.at<unsigned char>(seed) = 255;
  const int most = static_cast<int>(most_area_px.value_or(0.05 * static_cast<double>(bgr.total())));
  double strongest = 0.0;
  for (double tolerance = 4.0; tolerance <= 50.0; tolerance *= 1.25) {
    const cv::Mat next = patch(bgr, mask, seed, tolerance, most);
    if (cv::countNonZero(next) > most) break;
    const double here = border_strength(bgr, mask, next);
    if (here < strongest) continue;
    strongest = here;
    best = next;
  }
  return best;
}

}  // namespace

Cover cover(const Region& region,
            const cv::Mat& bgr,
            const cv::Mat& mask,
            std::optional<double> most_area_px) {
  Cover out;
  if (const auto* grow = std::get_if<Grow>(&region)) {
    out.whole = grown(*grow, bgr, mask, most_area_px);
    cv::morphologyEx(
        out.whole, out.whole, cv::MORPH_CLOSE, cv::getStructuringElement(cv::MORPH_CROSS, {3, 3}));
  } else if (const auto* disc = std::get_if<Disc>(&region)) {
    out.whole = shape_of(*disc, bgr.size());
  } else if (const auto* box = std::get_if<Box>(&region)) {
    out.whole = shape_of(*box, bgr.size());
  } else {
    out.whole = shape_of(std::get<Polygon>(region), bgr.size());
  }
  out.whole &= mask;
  // The outermost pixels are mixed with what is behind; of a speck everything is.
  cv::erode(out.whole,
            out.inner,
            cv::getStructuringElement(cv::MORPH_CROSS, {3, 3}),
            {-1, -1},
            1,
            cv::BORDER_CONSTANT,
            cv::Scalar(255));
  if (cv::countNonZero(out.inner) == 0) out.inner = out.whole.clone();
  return out;
}

}  // namespace rondel::vision
