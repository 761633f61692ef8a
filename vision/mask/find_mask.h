#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "calib/venue/centre_result.h"
#include "calib/venue/spec.h"
#include "vision/frames/frame.h"
#include "vision/mask/noise_model.h"

namespace rondel::vision {

/// Why there is no mask.
enum class MaskRefusal { none, too_few_frames, motionless };

struct MaskResult {
  MaskRefusal refusal = MaskRefusal::none;
  cv::Mat mask;                   ///< CV_8U: 255 may show floor, 0 not
  int frames_used = 0;            ///< frames that differ from each other
  double moved = 0.0;             ///< share of the ring that changed between frames
  double visible_fraction = 0.0;  ///< of the area inside the rim
  NoiseModel noise;               ///< of the grey level
};

/// Least number of frames, each with a view of its own, that a mask is made from.
inline constexpr int kLeastMaskFrames = 4;

/// Which pixels show the robot instead of the floor. A pixel belongs to the robot when its levels
/// are better explained by one steady level under the camera's noise than by what its ring shows:
/// a Bayes factor per pixel, summed over the lights, smoothed by a mean field over its neighbours
/// (an Ising prior). Exposure differences between frames of a light are estimated and removed.
/// Frames that show what an earlier one of the same light shows count once.
///   frames  of one size; Frame::light groups them
///   rim     everything outside is masked
/// `mask` is empty where refused.
[[nodiscard]] MaskResult find_mask(std::span<const Frame> frames,
                                   ImagePoint centre,
                                   const RimEllipse& rim);

/// Masks what lies outside the rim, and the pixels that its edge runs through.
void keep_inside(ImagePoint centre, const RimEllipse& rim, cv::Mat& mask);

/// Share of the area inside the rim (of the picture, where there is no rim) that the mask shows.
[[nodiscard]] double visible_fraction(const cv::Mat& mask,
                                      ImagePoint centre,
                                      const std::optional<RimEllipse>& rim);

/// Hand strokes over a mask, later ones over earlier ones.
void draw_strokes(std::span<const Stroke> strokes, cv::Mat& mask);

}  // namespace rondel::vision
