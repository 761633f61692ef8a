#include <fmt/core.h>

#include <cstdint>
#include <opencv2/core.hpp>
#include <span>
#include <system_error>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/mask_rows.h"
#include "calib/base/problem.h"
#include "calib/range/curve_file.h"
#include "calib/venue/centre_file.h"
#include "tools/rondel/frames.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/step.h"
#include "vision/mask/blind_zone.h"
#include "vision/mask/find_mask.h"
#include "vision/mask/mask_file.h"
#include "vision/rim/combine_rims.h"
#include "vision/rim/find_rim.h"

namespace rondel::app {
namespace {

/// The rim from the frames themselves, where the centre was given by hand.
RimEllipse rim_in(const std::vector<Frame>& frames) {
  std::vector<vision::Rim> rims;
  for (const Frame& frame : frames) {
    if (const auto rim = vision::find_rim(frame.bgr)) rims.push_back(*rim);
    if (rims.size() == 5) break;
  }
  if (rims.empty()) {
    throw InputError(frames.front().image,
                     "no mirror edge is seen, in this or any other frame; draw what hides the "
                     "floor, and all beyond the mirror, as strokes in strokes.csv");
  }
  return *vision::combine_rims(rims).result.rim;
}

/// All of the picture inside the rim, or all of it where no rim is known.
cv::Mat open_mask(const CameraSpec& camera, const CentreResult& centre) {
  cv::Mat mask(camera.height_px, camera.width_px, CV_8U, cv::Scalar(255));
  if (!centre.rim) return mask;
  vision::keep_inside(centre.centre.at, *centre.rim, mask);
  return mask;
}

/// The floor that the body hides, where a range curve is on file: it may be made after the mask.
void add_blind_zone(const Workspace& workspace, const cv::Mat& mask, Outcome& outcome) {
  nlohmann::ordered_json stretches = nlohmann::ordered_json::array();
  const std::filesystem::path file = result_of(workspace, "range");
  std::error_code error;
  if (std::filesystem::exists(file, error)) {
    const auto curve = range::read_range_curve(file);
    const vision::BlindZone zone = vision::blind_zone(
        mask, *curve, workspace.venue.link.bearing_codes, workspace.venue.link.far_m);
    for (const vision::HiddenStretch& stretch : zone.hidden) {
      stretches.push_back({{"bearing_deg", stretch.bearing_rad * kDegPerRad},
                           {"from_m", stretch.from_m},
                           {"to_m", stretch.to_m}});
    }
    outcome.document["unseen_radius_m"] = zone.unseen_radius_m;
    outcome.document["seen_from_m"] = zone.seen_from_m;
    outcome.summary += fmt::format(
        "\nno floor is seen nearer than {:.2f} m; from {:.2f} m on it is seen in every direction "
        "but behind posts",
        zone.unseen_radius_m,
        zone.seen_from_m);
  } else {
    outcome.summary += "\nthe blind zone in metres needs the range step";
  }
  outcome.document["blind_zone"] = std::move(stretches);
}

/// What the mask costs on a board, in its two layouts.
void add_board_size(const Workspace& workspace,
                    const cv::Mat& mask,
                    ImagePoint centre,
                    Outcome& outcome) {
  const std::span<const std::uint8_t> pixels(mask.ptr<std::uint8_t>(), mask.total());
  const std::size_t rows = pack_rows(rows_of(pixels, mask.cols)).size();
  const int sectors = workspace.venue.link.bearing_codes;
  const VisibleRadii radii = visible_radii(pixels, mask.cols, centre, sectors);
  const std::size_t radii_bytes = 2 * sizeof(std::uint16_t) * radii.inner_px.size();
  int lost = 0;
  for (int v = 0; v < mask.rows; ++v) {
    for (int u = 0; u < mask.cols; ++u) {
      lost += mask.at<std::uint8_t>(v, u) != 0 && !shows(radii, u, v) ? 1 : 0;
    }
  }
  outcome.document["board"] = {{"row_bytes", rows},
                               {"radii_bytes", radii_bytes},
                               {"radii_lose_pixels", lost},
                               {"smaller", rows <= radii_bytes ? "rows" : "radii"}};
}

}  // namespace

Outcome mask_step(const Workspace& workspace, Progress& progress) {
  const CentreResult centre = read_centre(result_of(workspace, "centre"));
  const std::string frames_folder = (workspace.folder / "frames").string();
  vision::LoadedFrames loaded;
  if (!workspace.frames.empty()) loaded = load_frames(workspace, progress);
  const bool by_hand = loaded.frames.size() < 2 && !workspace.strokes.empty();
  if (loaded.frames.empty() && !by_hand) {
    if (!loaded.left_out.empty()) throw InputError(loaded.left_out);
    throw InputError(frames_folder,
                     "holds no images; put frames between which the robot turned there");
  }
  vision::MaskResult found;
  if (by_hand) {
    found.mask = open_mask(workspace.rig.camera, centre);
  } else {
    const RimEllipse rim = centre.rim ? *centre.rim : rim_in(loaded.frames);
    progress.note("telling the robot from the floor");
    found = vision::find_mask(loaded.frames, centre.centre.at, rim);
    if (found.refusal == vision::MaskRefusal::too_few_frames) {
      throw InputError(frames_folder,
                       fmt::format("{} usable frames are too few to tell the robot from the floor; "
                                   "capture at least {}, turning the robot by some 30 degrees "
                                   "between them",
                                   loaded.frames.size(),
                                   vision::kLeastMaskFrames));
    }
    if (found.refusal == vision::MaskRefusal::motionless) {
      throw InputError(frames_folder,
                       fmt::format("show too little motion to tell the robot from the floor: {} of "
                                   "{} differ, and {:.1f} % of the ring changed at most; turn the "
                                   "robot by some 30 degrees between frames, or let things move "
                                   "all around it",
                                   found.frames_used,
                                   loaded.frames.size(),
                                   100.0 * found.moved));
    }
  }
  vision::draw_strokes(workspace.strokes, found.mask);
  found.visible_fraction = vision::visible_fraction(found.mask, centre.centre.at, centre.rim);

  std::string yaml = fmt::format("frames_used: {}\nvisible_fraction: {}\nstrokes: {}\n",
                                 found.frames_used,
                                 number_text(found.visible_fraction),
                                 workspace.strokes.size());
  yaml += fmt::format("noise: {{read_variance: {}, gain: {}}}\n",
                      number_text(found.noise.read_variance),
                      number_text(found.noise.gain));
  write_file(workspace.results() / "mask.png", vision::mask_png(found.mask));
  write_file(result_of(workspace, "mask"),
             with_made_from(std::move(yaml), inputs_of(workspace, "mask")));

  Outcome outcome;
  outcome.document["frames_used"] = found.frames_used;
  outcome.document["visible_fraction"] = found.visible_fraction;
  outcome.document["strokes"] = workspace.strokes.size();
  outcome.document["noise"] = {{"read_variance", found.noise.read_variance},
                               {"gain", found.noise.gain}};
  outcome.summary = fmt::format("{:.1f} % of the mirror shows what is around the robot",
                                100.0 * found.visible_fraction);
  outcome.summary +=
      by_hand ? "\ndrawn by hand"
              : fmt::format(
                    "\nfrom {} frames that differ, of {}", found.frames_used, loaded.frames.size());
  if (!workspace.strokes.empty()) {
    outcome.summary += fmt::format(", with {} strokes by hand", workspace.strokes.size());
  }
  add_blind_zone(workspace, found.mask, outcome);
  add_board_size(workspace, found.mask, centre.centre.at, outcome);
  const std::string left_out = vision::left_out_text(loaded);
  if (!left_out.empty()) outcome.summary += "\n" + left_out;
  return outcome;
}

}  // namespace rondel::app
