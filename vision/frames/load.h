#pragma once

#include <filesystem>
#include <opencv2/core.hpp>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/problem.h"
#include "calib/base/progress.h"
#include "calib/venue/spec.h"
#include "vision/frames/frame.h"

namespace rondel::vision {

/// More pixels than this are refused before anything is decoded.
inline constexpr double kMostPixels = 64e6;

/// Whether a file of this name is taken for an image: .png .jpg .jpeg .bmp .ppm .pgm and raw dumps
/// .565 .rgb565, in either case.
[[nodiscard]] bool is_image_name(const std::filesystem::path& path);

/// Width and height an image must have; 0: whatever it has.
struct FrameSize {
  int width_px = 0;
  int height_px = 0;
};

/// Decodes an image file's bytes to BGR, CV_8UC3, pixels as they are stored (a camera's rotation
/// tag is not followed). `name` gives the format by its ending and names the file in messages. Raw
/// RGB565 dumps need `size`: width * height * 2 bytes, row by row, in `order`.
/// Throws InputError(name, one line) for what is empty, truncated, damaged, of another format than
/// its name says, of more than kMostPixels, or of another size than `size`.
[[nodiscard]] cv::Mat decode_image(std::string_view bytes,
                                   const std::string& name,
                                   FrameSize size = {},
                                   ByteOrder order = ByteOrder::high_first);

/// The same from a file. Problems name the path.
[[nodiscard]] cv::Mat load_image(const std::filesystem::path& path,
                                 FrameSize size = {},
                                 ByteOrder order = ByteOrder::high_first);

/// Of the rig's size and byte order.
[[nodiscard]] cv::Mat load_image(const std::filesystem::path& path, const CameraSpec& camera);

/// A frame to load.
struct FrameToLoad {
  std::string image;
  std::string light;
  std::filesystem::path path;
};

struct LoadedFrames {
  std::vector<Frame> frames;      ///< in the order asked for, without those left out
  std::vector<Problem> left_out;  ///< one for each image that cannot be used, in the same order
};

/// Loads all in parallel. Bad images are left out and named; the caller decides whether it can
/// honestly go on without them.
[[nodiscard]] LoadedFrames load_frames(std::span<const FrameToLoad> files,
                                       const CameraSpec& camera,
                                       Progress& progress);

/// `image`, CV_8UC3, as a raw RGB565 dump (each channel's top bits).
[[nodiscard]] std::string encode_rgb565(const cv::Mat& bgr, ByteOrder order);

/// "3 of 40 images were left out: frames/a.png (is empty); ...": at most five by name. Empty when
/// none were.
[[nodiscard]] std::string left_out_text(const LoadedFrames& loaded);

}  // namespace rondel::vision
