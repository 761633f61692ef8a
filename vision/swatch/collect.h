#pragma once

#include <opencv2/core.hpp>
#include <string>
#include <vector>

#include "calib/base/progress.h"
#include "calib/colour/choose.h"
#include "calib/venue/spec.h"
#include "vision/frames/frame.h"

namespace rondel::vision {

/// Something in the surroundings that has an object's colours in the same light, but no swatch.
struct LookAlike {
  std::string image;
  int object = 0;  ///< index into the venue's objects
  ImagePoint at;   ///< its centroid
  int area_px = 0;
};

/// Labelled pixels by light, and what was left out of the surroundings.
struct Labelled {
  std::vector<colour::LightSamples> lights;     ///< sorted by name; only lights with swatches
  std::vector<LookAlike> look_alikes;           ///< largest first
  std::vector<std::vector<int>> swatch_pixels;  ///< [light][object], pixels counted
};

/// Pixels of `swatches` in `frames` (those that a swatch names; others are ignored), seen through
/// `mask`. Surroundings are all unmasked pixels of these frames away from any object's swatch, and
/// all of 'surroundings' swatches. A patch with an object's colours that touches a swatch of it
/// belongs to the object; one elsewhere is taken for an unlabelled object and left out, unless a
/// 'surroundings' swatch covers it.
[[nodiscard]] Labelled collect(const std::vector<Frame>& frames,
                               const std::vector<Swatch>& swatches,
                               const std::vector<ObjectSpec>& objects,
                               const cv::Mat& mask,
                               Progress& progress);

}  // namespace rondel::vision
