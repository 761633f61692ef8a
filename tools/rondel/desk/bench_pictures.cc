#include <fmt/format.h>

#include <algorithm>
#include <cctype>
#include <opencv2/imgcodecs.hpp>
#include <opencv2/imgproc.hpp>

#include "calib/base/file.h"
#include "calib/colour/class_table.h"
#include "tools/rondel/desk/bench.h"
#include "tools/rondel/report/page.h"
#include "vision/frames/load.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

Picture png(const cv::Mat& image) {
  std::vector<std::uint8_t> bytes;
  cv::imencode(".png", image, bytes, {cv::IMWRITE_PNG_COMPRESSION, 1});
  return {"image/png", std::string(bytes.begin(), bytes.end())};
}

/// A colour to show a set by: its first box's middle hue, full.
cv::Vec3b colour_of(const colour::ThresholdSet& set) {
  if (set.boxes.empty()) return {128, 128, 128};
  const colour::HueArc& arc = set.boxes.front().h;
  const int width = (arc.to - arc.from + 180) % 180;
  const cv::Mat hsv(1, 1, CV_8UC3, cv::Scalar((arc.from + width / 2) % 180, 255, 255));
  cv::Mat bgr;
  cv::cvtColor(hsv, bgr, cv::COLOR_HSV2BGR);
  return bgr.at<cv::Vec3b>(0, 0);
}

}  // namespace

Picture Bench::frame(const std::string& image) {
  const auto w = workspace();
  const FrameFile& file = frame_file(*w, image);
  std::string ending = fs::path(image).extension().string();
  std::transform(ending.begin(), ending.end(), ending.begin(), [](unsigned char c) {
    return static_cast<char>(std::tolower(c));
  });
  const cv::Mat bgr = vision::load_image(file.path, w->rig.camera);  // refuses what is damaged
  if (ending == ".png") return {"image/png", read_file(file.path)};
  if (ending == ".jpg" || ending == ".jpeg") return {"image/jpeg", read_file(file.path)};
  return png(bgr);
}

Picture Bench::mask() {
  const cv::Mat mask = geometry()->mask;
  if (mask.empty()) throw Refusal(404, "there is no mask yet");
  // Hatched as well as shaded, so that it shows on dark and on light.
  cv::Mat veil(mask.size(), CV_8UC4, cv::Scalar(0, 0, 0, 0));
  for (int v = 0; v < mask.rows; ++v) {
    for (int u = 0; u < mask.cols; ++u) {
      if (mask.at<std::uint8_t>(v, u) != 0) continue;
      const bool line = (u + v) % 6 == 0;
      veil.at<cv::Vec4b>(v, u) = line ? cv::Vec4b(230, 226, 220, 150) : cv::Vec4b(38, 30, 24, 150);
    }
  }
  return png(veil);
}

Picture Bench::classes(const std::string& image, bool over) {
  const auto w = workspace();
  const std::vector<colour::ThresholdSet> all = sets(*w);
  if (all.empty()) throw Refusal(404, "there are no colours yet");
  const cv::Mat bgr = vision::load_image(frame_file(*w, image).path, w->rig.camera);
  const colour::ClassTable table = colour::make_class_table(all);
  std::vector<cv::Vec3b> colours;
  for (const colour::ThresholdSet& set : all) colours.push_back(colour_of(set));
  const cv::Mat mask = geometry()->mask;
  cv::Mat out(bgr.size(), CV_8UC4, cv::Scalar(0, 0, 0, 0));
  for (int v = 0; v < bgr.rows; ++v) {
    for (int u = 0; u < bgr.cols; ++u) {
      const cv::Vec3b p = bgr.at<cv::Vec3b>(v, u);
      const bool open = mask.empty() || mask.at<std::uint8_t>(v, u) != 0;
      const std::uint8_t k = open ? table.at(p[2], p[1], p[0]) : std::uint8_t{0};
      if (k > 0) {
        const cv::Vec3b& c = colours[static_cast<std::size_t>(k - 1)];
        out.at<cv::Vec4b>(v, u) = {c[0], c[1], c[2], 255};
      } else if (over) {
        // Grey and dark, so that what is taken stands out.
        const auto grey = static_cast<std::uint8_t>((p[0] + 2 * p[1] + p[2]) / 8 + 20);
        out.at<cv::Vec4b>(v, u) = {grey, grey, grey, 255};
      }
    }
  }
  return png(out);
}

Picture Bench::artefact(const std::string& name) {
  const fs::path folder = folder_ / "results" / "tables";
  std::error_code error;
  for (const auto& entry : fs::directory_iterator(folder, error)) {
    if (entry.path().filename() != name || entry.is_symlink() || !entry.is_regular_file()) continue;
    return {"application/octet-stream", read_file(entry.path())};
  }
  throw Refusal(404, "there is no such file among the tables");
}

Picture Bench::report() {
  return {"text/html; charset=utf-8", read_file(report::write_report(*workspace()))};
}

}  // namespace rondel::app
