#include <fmt/core.h>

#include <opencv2/imgproc.hpp>
#include <system_error>

#include "calib/venue/centre_file.h"
#include "tools/rondel/report/section.h"
#include "tools/rondel/results.h"
#include "vision/frames/load.h"
#include "vision/mask/find_mask.h"
#include "vision/mask/mask_file.h"

namespace rondel::app::report {
namespace {

/// The frame with everything hidden tinted, and the border between drawn.
cv::Mat tinted(const cv::Mat& bgr, const cv::Mat& mask) {
  cv::Mat picture = bgr.clone();
  const cv::Mat tint(bgr.size(), CV_8UC3, cv::Scalar(150, 60, 40));
  cv::Mat mixed;
  cv::addWeighted(bgr, 0.45, tint, 0.55, 0.0, mixed);
  mixed.copyTo(picture, mask == 0);
  const int scale = std::max(1, cvRound(640.0 / bgr.cols));
  cv::resize(picture, picture, {}, scale, scale, cv::INTER_NEAREST);
  return picture;
}

}  // namespace

std::optional<Section> mask_section(const Workspace& workspace) {
  const std::filesystem::path file = workspace.results() / "mask.png";
  std::error_code error;
  if (!std::filesystem::exists(file, error)) return std::nullopt;
  const cv::Mat mask = vision::read_mask(file, workspace.rig.camera);
  const CentreResult centre = read_centre(result_of(workspace, "centre"));
  const double visible = vision::visible_fraction(mask, centre.centre.at, centre.rim);
  Section section;
  section.id = "mask";
  section.title = "Mask";
  section.lead = fmt::format(
      "{:.1f} % of the mirror shows what is around the robot; the rest is "
      "hidden by its own body.",
      100.0 * visible);
  if (!workspace.frames.empty()) {
    const FrameFile& frame = workspace.frames.front();
    const cv::Mat bgr = vision::load_image(frame.path, workspace.rig.camera);
    section.html += picture(tinted(bgr, mask),
                            "A frame with the hidden part tinted blue",
                            fmt::format("{}: what is masked is tinted blue.", frame.image));
  }
  return section;
}

}  // namespace rondel::app::report
