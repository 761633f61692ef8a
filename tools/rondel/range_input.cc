#include "tools/rondel/range_input.h"

#include <filesystem>
#include <system_error>

#include "calib/base/problem.h"
#include "calib/venue/centre_file.h"

namespace rondel::app {

range::FitInput range_input(const Workspace& workspace, const std::vector<Mark>& marks) {
  const VenueSpec& venue = workspace.venue;
  range::FitInput input;
  input.rig = workspace.rig;
  input.tolerance = venue.tolerance;
  input.near_m = venue.link.near_m;
  input.far_m = venue.link.far_m;
  const std::filesystem::path file = workspace.results() / "centre.yaml";
  std::error_code error;
  if (std::filesystem::is_regular_file(file, error)) {
    const CentreResult centre = read_centre(file);
    input.rim_centre = centre.centre;
    if (centre.rim) input.rim_radius_px = 0.5 * (centre.rim->a_px + centre.rim->b_px);
    input.reflection = centre.reflection;
  } else if (!workspace.frames.empty() || venue.centre) {
    throw InputError(file.string(), "is missing; run 'rondel centre' first");
  }
  for (const Mark& mark : marks) {
    range::MarkInput m;
    m.line = mark.line;
    m.pixel = mark.pixel;
    m.pixel_sd_px = venue.noise.mark_px;
    m.tape_sd_m = venue.noise.tape_m;
    m.range_m = mark.range_m;
    m.bearing_rad = mark.bearing_rad;
    if (const ObjectSpec* object = venue.find_object(mark.object)) {
      m.height_m = object->seen_height_m();
      m.floor_mark = false;
    }
    input.marks.push_back(m);
  }
  return input;
}

}  // namespace rondel::app
