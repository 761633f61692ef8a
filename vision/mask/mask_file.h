#pragma once

#include <filesystem>
#include <opencv2/core.hpp>

#include "calib/venue/spec.h"

namespace rondel::vision {

/// Reads results/mask.png: CV_8U of the camera's size, 255 may show floor, 0 not. InputError naming
/// the file when it is missing, damaged, of another size, or holds other levels.
[[nodiscard]] cv::Mat read_mask(const std::filesystem::path& path, const CameraSpec& camera);

/// The mask as PNG bytes.
[[nodiscard]] std::string mask_png(const cv::Mat& mask);

}  // namespace rondel::vision
