#pragma once

#include <opencv2/core.hpp>
#include <optional>

#include "calib/venue/spec.h"

namespace rondel::vision {

/// Which pixels a swatch stands for.
struct Cover {
  cv::Mat whole;  ///< CV_8U, 255: all pixels of the shape
  cv::Mat inner;  ///< CV_8U, 255: without the border, where colours are mixed; never empty when
                  ///< `whole` is not
};

/// The pixels of a region of `bgr` (CV_8UC3) that `mask` (CV_8U) lets through. Pixels count when
/// their centre is inside.
///   grow   from the seed outwards over pixels of like colour, with the tolerance at which the
///          patch's border is strongest; `most_area_px` bounds it where the object's size is known,
///          else a twentieth of the image.
[[nodiscard]] Cover cover(const Region& region,
                          const cv::Mat& bgr,
                          const cv::Mat& mask,
                          std::optional<double> most_area_px = std::nullopt);

}  // namespace rondel::vision
