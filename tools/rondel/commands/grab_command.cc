#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <filesystem>
#include <nlohmann/json.hpp>
#include <opencv2/imgcodecs.hpp>
#include <string>
#include <system_error>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/read_yaml.h"
#include "calib/venue/words.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/help.h"
#include "vision/frames/capture.h"
#include "vision/frames/load.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

constexpr int kUsualCount = 12;
constexpr int kMostCount = 100000;
constexpr double kUsualEvery_s = 0.5;

/// What the command line asks for, checked.
struct Wish {
  fs::path venue;
  std::string source;
  std::string light;
  std::optional<int> count;
  double every_s = kUsualEvery_s;
  [[nodiscard]] fs::path folder() const {
    return light.empty() ? venue / "frames" : venue / "frames" / light;
  }
  /// A frame's name as the CSV files write it.
  [[nodiscard]] std::string image(const std::string& name) const {
    return light.empty() ? "frames/" + name : fmt::format("frames/{}/{}", light, name);
  }
};

struct Grabbed {
  std::vector<std::string> images;  ///< "frames/noon/0001.png"
  std::vector<std::string> there;   ///< the same, of those that were there already
  std::vector<Problem> left_out;
  std::optional<std::string> ended;  ///< why fewer than asked for
};

Wish wish_of(const Arguments& arguments) {
  std::vector<Problem> problems;
  Wish wish;
  wish.venue = arguments.words.at(0);
  wish.source = arguments.words.at(1);
  wish.light = arguments.value("--light").value_or("");
  if (!wish.light.empty() &&
      (wish.light.front() == '.' || wish.light.find_first_of("/\\") != std::string::npos ||
       quotable(wish.light) != wish.light)) {
    problems.push_back(
        {"--light",
         fmt::format("'{}' is no name for a folder; use letters, digits, '-' and '_'",
                     quotable(wish.light))});
  }
  const auto checked = [&](auto&& read) {
    try {
      read();
    } catch (const InputError& error) {
      problems.insert(problems.end(), error.problems().begin(), error.problems().end());
    }
  };
  checked([&] {
    wish.count = arguments.whole_number("--count");
    if (wish.count && (*wish.count < 1 || *wish.count > kMostCount)) {
      throw InputError("--count", fmt::format("{} must be from 1 to {}", *wish.count, kMostCount));
    }
  });
  checked([&] {
    wish.every_s = arguments.number("--every").value_or(kUsualEvery_s);
    if (!(wish.every_s >= 0.0 && wish.every_s <= 86400.0)) {
      throw InputError(
          "--every", fmt::format("{} must be from 0 to 86400 seconds", number_text(wish.every_s)));
    }
  });
  if (!problems.empty()) throw InputError(std::move(problems));
  return wish;
}

/// Only the camera matters here: sheets may already name the frames that are about to be taken.
CameraSpec camera_of(const fs::path& venue) {
  std::error_code error;
  if (!fs::is_directory(venue, error)) {
    throw InputError(venue.string(), "there is no such folder; 'rondel new' starts a venue");
  }
  const fs::path rig = venue / "rig.yaml";
  if (!fs::exists(rig, error)) {
    throw InputError(rig.string(),
                     "is missing; 'rondel new' writes one into a new folder to start from");
  }
  std::vector<Problem> problems;
  const CameraSpec camera = read_rig(read_file(rig), rig.string(), venue, problems).camera;
  if (!problems.empty()) throw InputError(std::move(problems));
  return camera;
}

std::vector<fs::path> images_in(const fs::path& folder) {
  std::vector<fs::path> images;
  std::vector<std::string> folders;
  for (const auto& entry : fs::directory_iterator(folder)) {
    const std::string name = entry.path().filename().string();
    if (name.front() == '.') continue;
    if (entry.is_directory()) folders.push_back(name);
    if (entry.is_regular_file() && vision::is_image_name(name)) images.push_back(entry.path());
  }
  std::sort(images.begin(), images.end());
  std::sort(folders.begin(), folders.end());
  if (images.empty()) {
    throw InputError(quotable(folder.string()),
                     folders.empty()
                         ? "holds no images (.png .jpg .jpeg .bmp .ppm .pgm .565 .rgb565)"
                         : fmt::format("holds no images itself; name one of its folders, such as "
                                       "'{}'",
                                       quotable((folder / folders.front()).string())));
  }
  return images;
}

/// "a-2.png" for the second of several "a.png".
std::string numbered(const fs::path& name, int copy) {
  if (copy < 2) return name.string();
  return fmt::format("{}-{}{}", name.stem().string(), copy, name.extension().string());
}

/// Copies images as they are; those that cannot be used are left out and named.
Grabbed copy_images(const Wish& wish,
                    const std::vector<fs::path>& images,
                    const CameraSpec& camera,
                    Progress& progress) {
  Grabbed grabbed;
  // All are looked at before the first is written, so that a bad source writes nothing.
  std::vector<fs::path> good;
  int looked_at = 0;
  for (const fs::path& image : images) {
    if (wish.count && good.size() == static_cast<std::size_t>(*wish.count)) break;
    if (progress.cancelled()) break;
    try {
      (void)vision::load_image(image, camera);
      good.push_back(image);
    } catch (const InputError& error) {
      grabbed.left_out.insert(
          grabbed.left_out.end(), error.problems().begin(), error.problems().end());
    }
    progress.at("images looked at:", ++looked_at, static_cast<int>(images.size()));
  }
  if (good.empty()) {
    if (grabbed.left_out.empty()) throw InputError("rondel grab", "stopped; nothing was taken");
    throw InputError(std::move(grabbed.left_out));
  }
  for (const fs::path& image : good) {
    const std::string bytes = read_file(image);
    for (int copy = 1;; ++copy) {
      const std::string name = numbered(image.filename(), copy);
      if (write_new_file(wish.folder() / name, bytes)) {
        grabbed.images.push_back(wish.image(name));
        break;
      }
      std::error_code error;
      if (fs::is_regular_file(wish.folder() / name, error) &&
          read_file(wish.folder() / name) == bytes) {
        grabbed.there.push_back(wish.image(name));
        break;
      }
    }
  }
  return grabbed;
}

/// Writes frames as 0001.png, 0002.png and on, after the highest number that is there.
class NumberedFrames {
 public:
  explicit NumberedFrames(const Wish& wish) : wish_(wish) {
    std::error_code error;
    if (!fs::is_directory(wish.folder(), error)) return;
    for (const auto& entry : fs::directory_iterator(wish.folder())) {
      highest_ = std::max(highest_, parse_whole(entry.path().stem().string()).value_or(0));
    }
  }
  /// The image's name.
  std::string write(const cv::Mat& bgr) {
    std::vector<unsigned char> png;
    cv::imencode(".png", bgr, png);
    const std::string_view bytes(reinterpret_cast<const char*>(png.data()), png.size());
    while (true) {
      const std::string name = fmt::format("{:04}.png", ++highest_);
      if (write_new_file(wish_.folder() / name, bytes)) return wish_.image(name);
    }
  }

 private:
  const Wish& wish_;
  int highest_ = 0;
};

Grabbed capture_frames(const Wish& wish, const CameraSpec& camera, Progress& progress) {
  Grabbed grabbed;
  const int count = wish.count.value_or(kUsualCount);
  vision::Capture capture(wish.source, {camera.width_px, camera.height_px});
  if (vision::kind_of_source(wish.source) != vision::SourceKind::video) {
    progress.note(safety_line());
  }
  NumberedFrames frames(wish);
  try {
    for (int i = 0; i < count; ++i) {
      const auto bgr = capture.next(wish.every_s * i, progress);
      if (!bgr) break;
      grabbed.images.push_back(frames.write(*bgr));
      progress.at("frames taken:", i + 1, count);
    }
  } catch (const InputError& error) {  // the source changed while it was read
    grabbed.left_out = error.problems();
  }
  if (static_cast<int>(grabbed.images.size()) < count) {
    grabbed.ended = progress.cancelled() ? "stopped"
                    : vision::kind_of_source(wish.source) == vision::SourceKind::video
                        ? "the video ends there"
                        : "the camera fell silent";
  }
  return grabbed;
}

Grabbed grab(const Wish& wish, const CameraSpec& camera, Progress& progress) {
  switch (vision::kind_of_source(wish.source)) {
    case vision::SourceKind::missing:
      throw InputError(quotable(wish.source),
                       "there is no such source; it may be a folder of images, a video file, a "
                       "camera such as /dev/video0 or a stream such as rtsp://address/name");
    case vision::SourceKind::folder:
      return copy_images(wish, images_in(wish.source), camera, progress);
    case vision::SourceKind::image:
      return copy_images(wish, {fs::path(wish.source)}, camera, progress);
    default:
      return capture_frames(wish, camera, progress);
  }
}

std::string frames_text(std::size_t count) {
  return fmt::format("{} frame{}", count, count == 1 ? "" : "s");
}

std::string summary_of(const Wish& wish, const Grabbed& grabbed) {
  std::string text =
      fmt::format("{} into {}", frames_text(grabbed.images.size()), wish.folder().string());
  if (!grabbed.images.empty()) {
    text += fmt::format(": {}", fs::path(grabbed.images.front()).filename().string());
    if (grabbed.images.size() > 1) {
      text += fmt::format(" to {}", fs::path(grabbed.images.back()).filename().string());
    }
  }
  text += '\n';
  if (grabbed.ended) text += fmt::format("Fewer than asked for: {}.\n", *grabbed.ended);
  if (!grabbed.there.empty()) {
    text +=
        fmt::format("{} there already, left as they were.\n", frames_text(grabbed.there.size()));
  }
  if (!grabbed.left_out.empty()) {
    text += fmt::format("{} left out:\n", frames_text(grabbed.left_out.size()));
    for (const Problem& problem : grabbed.left_out) text += "  " + to_text(problem) + "\n";
  }
  return text;
}

}  // namespace

Outcome grab_command(const Arguments& arguments, Progress& progress) {
  const Wish wish = wish_of(arguments);
  const CameraSpec camera = camera_of(wish.venue);
  const Grabbed grabbed = grab(wish, camera, progress);
  Outcome outcome;
  outcome.document = {{"venue", wish.venue.string()},
                      {"light", wish.light},
                      {"frames", grabbed.images},
                      {"already_there", grabbed.there},
                      {"left_out", nlohmann::ordered_json::array()}};
  for (const Problem& problem : grabbed.left_out) {
    outcome.document["left_out"].push_back({{"image", problem.where}, {"reason", problem.what}});
  }
  outcome.summary = summary_of(wish, grabbed);
  return outcome;
}

}  // namespace rondel::app
