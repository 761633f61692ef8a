#pragma once

#include <string>
#include <vector>

#include "vision/scene/render.h"

namespace rondel::scene {

/// The sheets a person would write about the rendered frames, with a person's errors: clicks off by
/// Survey::mark_px, tape by Survey::tape_m. The same scene gives the same sheets.
struct Sheets {
  std::string marks_csv;
  std::string swatches_csv;
  std::string tape_csv;
};

/// `scene.survey` must be there; `truths` are those of scene.frames, in order.
///   marks     spots on the bare floor, and balls at their centre, spread over range and bearing
///   swatches  in frames of every light that show each kind of object near and middling far: all of
///             the objects, floor, walls, scenery
///   tape      every named object that stands free in a frame; some that are not in the image
[[nodiscard]] Sheets survey(const Scene& scene, const std::vector<FrameTruth>& truths);

}  // namespace rondel::scene
