#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <opencv2/imgproc.hpp>
#include <system_error>

#include "calib/range/curve_file.h"
#include "calib/venue/centre_file.h"
#include "tools/rondel/report/section.h"
#include "tools/rondel/results.h"
#include "vision/frames/load.h"
#include "vision/mask/blind_zone.h"
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

/// The floor around the robot to scale, forward up: hidden stretches dark, a ring every quarter of
/// the picture's radius.
std::string plan_view(const vision::BlindZone& zone, double robot_radius_m, double around_m) {
  constexpr double kHalf = 200.0;
  const double scale = kHalf / around_m;
  // Forward is up, left is left: x of the drawing is -y of the robot.
  const auto place = [&](double range_m, double bearing_rad) {
    return fmt::format("{:.1f} {:.1f}",
                       -scale * range_m * std::sin(bearing_rad),
                       -scale * range_m * std::cos(bearing_rad));
  };
  std::string svg = "<svg viewBox=\"-212 -212 424 424\">";
  for (const vision::HiddenStretch& stretch : zone.hidden) {
    if (stretch.from_m >= around_m) continue;
    const double to = std::min(stretch.to_m, around_m);
    const double low = stretch.bearing_rad - 0.5 * zone.step_rad;
    const double high = stretch.bearing_rad + 0.5 * zone.step_rad;
    svg += fmt::format("<path class=\"fill-faint\" d=\"M{} L{} L{} L{} Z\"/>",
                       place(stretch.from_m, low),
                       place(to, low),
                       place(to, high),
                       place(stretch.from_m, high));
  }
  for (int ring = 1; ring <= 4; ++ring) {
    const double r = 0.25 * ring * around_m;
    svg += fmt::format("<circle class=\"rule\" fill=\"none\" r=\"{:.1f}\"/>", scale * r);
    svg +=
        fmt::format("<text class=\"label\" font-size=\"11\" x=\"4\" y=\"{:.1f}\">{:.2f} m</text>",
                    -scale * r + 12.0,
                    r);
  }
  svg += fmt::format("<circle class=\"limit\" fill=\"none\" r=\"{:.1f}\"/>",
                     scale * zone.unseen_radius_m);
  if (robot_radius_m > 0.0) {
    svg +=
        fmt::format("<circle class=\"ink\" fill=\"none\" r=\"{:.1f}\"/>", scale * robot_radius_m);
  }
  const double nose = 1.3 * std::max(robot_radius_m, 0.3 * zone.unseen_radius_m) * scale;
  svg += fmt::format(
      "<path class=\"ink\" fill=\"none\" d=\"M0 0 V{0:.1f} M-5 {1:.1f} L0 {0:.1f} L5 "
      "{1:.1f}\"/></svg>",
      -nose,
      -nose + 7.0);
  return svg;
}

void add_blind_zone(const Workspace& workspace, const cv::Mat& mask, Section& section) {
  const std::filesystem::path file = result_of(workspace, "range");
  std::error_code error;
  if (!std::filesystem::exists(file, error)) {
    section.html += paragraph("The blind zone in metres needs the range step.");
    return;
  }
  const auto curve = range::read_range_curve(file);
  const vision::BlindZone zone = vision::blind_zone(mask, *curve, 360, workspace.venue.link.far_m);
  const double around_m = std::min(workspace.venue.link.far_m, 3.0 * zone.seen_from_m);
  section.html += drawing(
      plan_view(zone, workspace.rig.mounting.robot_radius_m, around_m),
      "Plan view of the floor around the robot with the hidden parts",
      fmt::format(
          "The floor from above, forward up. Shaded: hidden. No floor at all is seen within "
          "{:.2f} m (the marked circle); from {:.2f} m on every direction has been seen.",
          zone.unseen_radius_m,
          zone.seen_from_m));
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
  add_blind_zone(workspace, mask, section);
  return section;
}

}  // namespace rondel::app::report
