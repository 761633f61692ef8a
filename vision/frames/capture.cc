#include "vision/frames/capture.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <chrono>
#include <cstdlib>
#include <filesystem>
#include <mutex>
#include <opencv2/core/utils/logger.hpp>
#include <opencv2/videoio.hpp>
#include <system_error>
#include <utility>
#include <vector>

#include "calib/venue/words.h"

namespace rondel::vision {
namespace {

namespace fs = std::filesystem;
using Clock = std::chrono::steady_clock;

constexpr int kWait_ms = 10000;
constexpr std::array kSchemes = {"rtsp", "rtsps", "http", "https", "rtp", "udp", "tcp", "rtmp"};

/// "rtsp" of "rtsp://camera/1"; "" where the source is no address.
std::string scheme_of(const std::string& source) {
  const std::size_t at = source.find("://");
  return at == std::string::npos ? "" : source.substr(0, at);
}

/// The libraries below print what goes wrong in their own words; ours are said once, in one line.
void silence_libraries() {
  static std::once_flag once;
  std::call_once(once, [] {
    cv::utils::logging::setLogLevel(cv::utils::logging::LOG_LEVEL_SILENT);
    ::setenv("OPENCV_FFMPEG_LOGLEVEL", "-8", 0);
  });
}

cv::VideoCapture opened(const std::string& source, SourceKind kind, FrameSize size) {
  silence_libraries();
  cv::VideoCapture capture;
  try {
    if (kind == SourceKind::device) {
      capture.open(source, cv::CAP_V4L2);
      if (capture.isOpened() && size.width_px > 0) {
        capture.set(cv::CAP_PROP_FRAME_WIDTH, size.width_px);
        capture.set(cv::CAP_PROP_FRAME_HEIGHT, size.height_px);
      }
    } else if (kind == SourceKind::stream) {
      const std::vector<int> waits = {
          cv::CAP_PROP_OPEN_TIMEOUT_MSEC, kWait_ms, cv::CAP_PROP_READ_TIMEOUT_MSEC, kWait_ms};
      capture.open(source, cv::CAP_FFMPEG, waits);
    } else {
      // The absolute path keeps a name with a colon from being read as an address.
      capture.open(fs::absolute(source).string(), cv::CAP_FFMPEG);
    }
  } catch (const cv::Exception&) {
    capture.release();
  }
  return capture;
}

const char* why_not_opened(SourceKind kind) {
  switch (kind) {
    case SourceKind::device:
      return "cannot be opened as a camera; is another program using it, and are you in the group "
             "'video'?";
    case SourceKind::stream:
      return "gives no pictures; check the address, the network and the camera's stream settings";
    default:
      return "is no video that can be read; check the file, or take its frames as images in a "
             "folder";
  }
}

}  // namespace

SourceKind kind_of_source(const std::string& source) {
  if (!scheme_of(source).empty()) return SourceKind::stream;
  std::error_code error;
  const fs::file_status status = fs::status(source, error);
  if (fs::is_directory(status)) return SourceKind::folder;
  if (fs::is_character_file(status)) return SourceKind::device;
  if (!fs::is_regular_file(status)) return SourceKind::missing;
  return is_image_name(source) ? SourceKind::image : SourceKind::video;
}

struct Capture::Source {
  std::string name;
  FrameSize size;
  bool live = false;
  cv::VideoCapture capture;
  std::optional<cv::Mat> first;
  Clock::time_point begin;
  double begin_s = 0.0;  ///< a file's own time of its first frame
  double frame_s = 0.0;  ///< a file's time from frame to frame
  int count = 0;         ///< frames passed since the first

  /// Grabs the next frame; its time from the first, s. Nothing at the end.
  std::optional<double> grab() {
    try {
      if (!capture.grab()) return std::nullopt;
    } catch (const cv::Exception&) {
      return std::nullopt;
    }
    ++count;
    if (live) return std::chrono::duration<double>(Clock::now() - begin).count();
    const double stamp_s = 1e-3 * capture.get(cv::CAP_PROP_POS_MSEC) - begin_s;
    // Some files carry no times; then their frame rate counts.
    return stamp_s > 0.0 ? stamp_s : count * frame_s;
  }

  void check_size(int width_px, int height_px) const {
    if ((size.width_px > 0 && width_px != size.width_px) ||
        (size.height_px > 0 && height_px != size.height_px)) {
      throw InputError(name,
                       fmt::format("gives frames of {} x {} pixels; rig.yaml says {} x {}",
                                   width_px,
                                   height_px,
                                   size.width_px,
                                   size.height_px));
    }
  }

  std::optional<cv::Mat> retrieve() {
    cv::Mat bgr;
    try {
      if (!capture.retrieve(bgr) || bgr.empty()) return std::nullopt;
    } catch (const cv::Exception&) {
      return std::nullopt;
    }
    if (bgr.type() != CV_8UC3) return std::nullopt;
    check_size(bgr.cols, bgr.rows);
    return bgr.clone();  // the capture's own buffer is written over by the next frame
  }
};

Capture::Capture(const std::string& source, FrameSize size) : source_(std::make_unique<Source>()) {
  const SourceKind kind = kind_of_source(source);
  if (kind == SourceKind::stream) {
    const std::string scheme = scheme_of(source);
    const std::vector<std::string> known(kSchemes.begin(), kSchemes.end());
    if (std::find(known.begin(), known.end(), scheme) == known.end()) {
      throw InputError(quotable(source), "is no stream address" + hint_for(scheme, known));
    }
  }
  source_->name = quotable(source);
  source_->size = size;
  source_->live = kind != SourceKind::video;
  source_->capture = opened(source, kind, size);
  if (!source_->capture.isOpened()) throw InputError(source_->name, why_not_opened(kind));
  // A giant is refused before it is decoded.
  const double width_px = source_->capture.get(cv::CAP_PROP_FRAME_WIDTH);
  const double height_px = source_->capture.get(cv::CAP_PROP_FRAME_HEIGHT);
  if (width_px * height_px > kMostPixels) {
    source_->check_size(static_cast<int>(width_px), static_cast<int>(height_px));
  }
  if (source_->grab()) source_->first = source_->retrieve();
  if (!source_->first) throw InputError(source_->name, why_not_opened(kind));
  const double rate_hz = source_->capture.get(cv::CAP_PROP_FPS);
  source_->frame_s = rate_hz > 0.0 ? 1.0 / rate_hz : 0.0;
  source_->begin_s = 1e-3 * source_->capture.get(cv::CAP_PROP_POS_MSEC);
  source_->begin = Clock::now();
  source_->count = 0;
}

Capture::~Capture() = default;

std::optional<cv::Mat> Capture::next(double time_s, Progress& progress) {
  if (source_->first && time_s <= 0.0) return std::exchange(source_->first, std::nullopt);
  source_->first.reset();
  while (!progress.cancelled()) {
    const auto now_s = source_->grab();
    if (!now_s) return std::nullopt;
    // Half a microsecond: times in files are rounded to their time base.
    if (*now_s >= time_s - 5e-7) return source_->retrieve();
  }
  return std::nullopt;
}

}  // namespace rondel::vision
