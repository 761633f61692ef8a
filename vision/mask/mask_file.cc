#include "vision/mask/mask_file.h"

#include <fmt/core.h>

#include <opencv2/imgcodecs.hpp>
#include <system_error>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel::vision {

cv::Mat read_mask(const std::filesystem::path& path, const CameraSpec& camera) {
  std::error_code error;
  if (!std::filesystem::exists(path, error)) {
    throw InputError(path.string(), "is missing; run 'rondel mask' first");
  }
  const std::string bytes = read_file(path);
  cv::Mat mask;
  if (!bytes.empty()) {
    const std::vector<std::uint8_t> buffer(bytes.begin(), bytes.end());
    mask = cv::imdecode(buffer, cv::IMREAD_GRAYSCALE);
  }
  if (mask.empty()) {
    throw InputError(path.string(), "is damaged; delete it and run 'rondel mask' again");
  }
  if (mask.cols != camera.width_px || mask.rows != camera.height_px) {
    throw InputError(
        path.string(),
        fmt::format("is {} x {} pixels, rig.yaml says {} x {}; run 'rondel mask' again",
                    mask.cols,
                    mask.rows,
                    camera.width_px,
                    camera.height_px));
  }
  const int levels = cv::countNonZero(mask == 0) + cv::countNonZero(mask == 255);
  if (levels != mask.cols * mask.rows) {
    throw InputError(path.string(),
                     "holds levels other than 0 and 255; change strokes.csv, not the mask");
  }
  return mask;
}

std::string mask_png(const cv::Mat& mask) {
  std::vector<std::uint8_t> bytes;
  cv::imencode(".png", mask, bytes);
  return {bytes.begin(), bytes.end()};
}

}  // namespace rondel::vision
