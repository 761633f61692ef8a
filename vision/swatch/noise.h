#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "calib/colour/lights.h"

namespace rondel::vision {

/// The noise that frames of one light show, by channel in linear light: from what the neighbours of
/// a pixel do not predict (a Laplacian's complement, Immerkaer 1996), its median over pixels of
/// like brightness, so that edges do not count. Frames are CV_8UC3; pixels where `mask` is 0 are
/// left out. Smoothing by demosaicing or JPEG is part of what frames show.
[[nodiscard]] colour::SensorNoise noise_of(const std::vector<cv::Mat>& frames, const cv::Mat& mask);

}  // namespace rondel::vision
