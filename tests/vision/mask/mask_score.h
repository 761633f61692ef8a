#pragma once

#include <cmath>
#include <opencv2/imgproc.hpp>

#include "vision/scene/render.h"

namespace rondel::trials {

struct MaskScore {
  double iou = 0.0;  ///< of the hidden region inside the rim, a one-pixel seam not counted
  double iou_with_seam = 0.0;
  double floor_masked = 0.0;  ///< share of the visible floor, seam not counted
};

/// `mask` against the truth. The seam: pixels next to the true border of hidden and visible, and
/// the outermost pixel inside the rim.
inline MaskScore score_mask(const cv::Mat& mask,
                            const cv::Mat& truth,
                            const scene::ImagedRim& rim) {
  cv::Mat shrunk;
  cv::Mat grown;
  const cv::Mat square = cv::getStructuringElement(cv::MORPH_RECT, {3, 3});
  cv::erode(truth, shrunk, square);
  cv::dilate(truth, grown, square);
  int both = 0;
  int either = 0;
  int both_inner = 0;
  int either_inner = 0;
  int floor = 0;
  int wrong = 0;
  for (int v = 0; v < truth.rows; ++v) {
    for (int u = 0; u < truth.cols; ++u) {
      const double du = u - rim.centre.u_px;
      const double dv = v - rim.centre.v_px;
      const double r = std::hypot(du, dv);
      const double edge = scene::rim_radius_px(rim, std::atan2(dv, du));
      if (r > edge) continue;
      const bool hidden = truth.at<std::uint8_t>(v, u) == 0;
      const bool masked = mask.at<std::uint8_t>(v, u) == 0;
      both += hidden && masked ? 1 : 0;
      either += hidden || masked ? 1 : 0;
      if (r > edge - 1.0 || shrunk.at<std::uint8_t>(v, u) != grown.at<std::uint8_t>(v, u)) continue;
      both_inner += hidden && masked ? 1 : 0;
      either_inner += hidden || masked ? 1 : 0;
      floor += hidden ? 0 : 1;
      wrong += !hidden && masked ? 1 : 0;
    }
  }
  const auto share = [](int part, int all) { return all > 0 ? part / double(all) : 1.0; };
  return {share(both_inner, either_inner), share(both, either), share(wrong, floor)};
}

}  // namespace rondel::trials
