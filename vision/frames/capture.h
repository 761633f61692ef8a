#pragma once

#include <memory>
#include <opencv2/core.hpp>
#include <optional>
#include <string>

#include "calib/base/progress.h"
#include "vision/frames/load.h"

namespace rondel::vision {

/// What a source's name says that it is.
enum class SourceKind { missing, folder, image, video, device, stream };
[[nodiscard]] SourceKind kind_of_source(const std::string& source);

/// Frames from a video file, a camera device or a stream address, in their order.
class Capture {
 public:
  /// Opens a source of kind video, device or stream and reads its first frame. A camera is asked
  /// for `size`. Throws InputError(source, one line) when it cannot be opened, gives no frame
  /// within ten seconds, or gives frames of another size than `size`.
  Capture(const std::string& source, FrameSize size);
  Capture(const Capture&) = delete;
  Capture& operator=(const Capture&) = delete;
  ~Capture();

  /// The first frame at `time_s` or later, CV_8UC3, BGR; counted from the first frame, in the
  /// video's own time for a file and in real time for a camera or stream. Nothing at the end, when
  /// a camera or stream falls silent, and when `progress` is cancelled.
  [[nodiscard]] std::optional<cv::Mat> next(double time_s, Progress& progress);

 private:
  struct Source;
  std::unique_ptr<Source> source_;
};

}  // namespace rondel::vision
