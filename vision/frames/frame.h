#pragma once

#include <filesystem>
#include <opencv2/core.hpp>
#include <string>

namespace rondel {

/// One captured image with where it came from.
struct Frame {
  std::string image;  ///< path relative to the venue folder, '/'-separated
  std::string light;  ///< sub-folder of frames/; empty for images directly in frames/
  cv::Mat bgr;        ///< CV_8UC3
};

}  // namespace rondel
