#include <fmt/core.h>

#include <cmath>
#include <opencv2/imgproc.hpp>
#include <system_error>

#include "calib/venue/centre_file.h"
#include "tools/rondel/report/section.h"
#include "tools/rondel/results.h"
#include "vision/frames/load.h"

namespace rondel::app::report {
namespace {

/// A frame enlarged to about 640 px, with the rim, its centre and the reflection drawn in.
class Overlay {
 public:
  explicit Overlay(const cv::Mat& bgr) : scale_(std::max(1, cvRound(640.0 / bgr.cols))) {
    cv::resize(bgr, picture_, {}, scale_, scale_, cv::INTER_CUBIC);
  }

  void rim(ImagePoint centre, const RimEllipse& axes) {
    std::vector<cv::Point> outline;
    constexpr int kShift = 4;
    for (int k = 0; k < 360; ++k) {
      const double t = k * kRadPerDeg;
      const double along = axes.a_px * std::cos(t);
      const double across = axes.b_px * std::sin(t);
      const double c = std::cos(axes.angle_rad);
      const double s = std::sin(axes.angle_rad);
      outline.push_back(place(
          {centre.u_px + c * along - s * across, centre.v_px + s * along + c * across}, kShift));
    }
    const std::vector<std::vector<cv::Point>> lines = {outline};
    cv::polylines(picture_, lines, true, {40, 220, 255}, 1, cv::LINE_AA, kShift);
  }

  void cross(ImagePoint at, const cv::Scalar& colour, int arm) {
    constexpr int kShift = 4;
    const cv::Point middle = place(at, kShift);
    const cv::Point right(arm << kShift, 0);
    const cv::Point down(0, arm << kShift);
    cv::line(picture_, middle - right, middle + right, colour, 1, cv::LINE_AA, kShift);
    cv::line(picture_, middle - down, middle + down, colour, 1, cv::LINE_AA, kShift);
  }

  [[nodiscard]] const cv::Mat& image() const { return picture_; }

 private:
  /// Pixel centres stay pixel centres when the picture is enlarged.
  [[nodiscard]] cv::Point place(ImagePoint at, int shift) const {
    const double one = 1 << shift;
    return {cvRound(((at.u_px + 0.5) * scale_ - 0.5) * one),
            cvRound(((at.v_px + 0.5) * scale_ - 0.5) * one)};
  }

  int scale_;
  cv::Mat picture_;
};

std::string point_row(const ObservedPoint& point) {
  return fmt::format("{:.2f}, {:.2f} px", point.at.u_px, point.at.v_px);
}

std::string sd_text(const ObservedPoint& point) {
  return fmt::format("{:.2f} px", std::sqrt(0.5 * (point.cov_px2[0] + point.cov_px2[2])));
}

}  // namespace

std::optional<Section> centre_section(const Workspace& workspace) {
  const std::filesystem::path file = result_of(workspace, "centre");
  std::error_code error;
  if (!std::filesystem::exists(file, error)) return std::nullopt;
  const CentreResult result = read_centre(file);
  Section section;
  section.id = "centre";
  section.title = "Centre";
  section.lead = fmt::format("The mirror's centre is at {} (one deviation {}).",
                             point_row(result.centre),
                             sd_text(result.centre));
  if (result.frames_used == 0) section.html += paragraph("Given by hand in venue.yaml.");
  if (result.frames_disagree) {
    section.html += paragraph(
        "Frames disagree: the mirror or the camera moved during capture. Fix it and capture "
        "again.");
  }
  if (!workspace.frames.empty()) {
    Overlay overlay(vision::load_image(workspace.frames.front().path, workspace.rig.camera));
    if (result.rim) overlay.rim(result.centre.at, *result.rim);
    overlay.cross(result.centre.at, {40, 220, 255}, 12);
    if (result.reflection) overlay.cross(result.reflection->at, {255, 120, 255}, 6);
    if (result.turning) overlay.cross(result.turning->at, {120, 255, 120}, 9);
    section.html +=
        picture(overlay.image(),
                "A frame with the rim's ellipse and centre drawn in",
                fmt::format("{}: the rim and its centre in yellow{}{}.",
                            workspace.frames.front().image,
                            result.reflection ? "; the camera's reflection in violet" : "",
                            result.turning ? "; the turning centre in green" : ""));
  }
  std::vector<std::vector<std::string>> rows = {{"what", "value", "one deviation"}};
  rows.push_back({"centre of the rim", point_row(result.centre), sd_text(result.centre)});
  if (result.rim) {
    rows.push_back({"rim's semi-axes",
                    fmt::format("{:.2f}, {:.2f} px", result.rim->a_px, result.rim->b_px),
                    ""});
  }
  if (result.reflection) {
    rows.push_back({"centre of the camera's reflection",
                    point_row(*result.reflection),
                    sd_text(*result.reflection)});
  }
  if (result.turning) {
    rows.push_back({"turning centre", point_row(*result.turning), sd_text(*result.turning)});
  }
  if (result.frames_used > 0) {
    rows.push_back({"frames used", fmt::format("{}", result.frames_used), ""});
  }
  section.html += table(rows, "");
  return section;
}

}  // namespace rondel::app::report
