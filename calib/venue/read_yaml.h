#pragma once

#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/problem.h"
#include "calib/venue/spec.h"

namespace rondel {

/// rig.yaml. `file` is how problems name it; `folder` is where a `points_file` is looked for. All
/// problems are added; what is wrong or missing stays at its default.
///
/// Keys (lengths in mm, angles in degrees, as their names say). A value with a tolerance is a bare
/// number or {value:, tolerance:}, one standard deviation; the usual one of a bare number is in ().
///   camera    required: width_px, height_px; focal_px (2 %); rgb565_order high_first | low_first
///             (default high_first: the byte with the red bits comes first in raw dumps)
///   mirror    optional: shape conic | cone | profile (default conic), rim_radius_mm and
///             distance_mm (1 mm), pinhole to vertex, required; and
///     conic   one of: vertex_radius_mm (2 %) and conic_constant (0.08);
///             semi_axis_a_mm and semi_axis_b_mm (1 % each), a along the mirror's axis, curve
///             hyperbola | ellipse (default hyperbola);
///             eccentricity (0.02) and one of vertex_radius_mm (2 %), focus_mm (2 %),
///             directrix_mm (2 %), both distances from the vertex, focus_to_directrix_mm (2 %);
///             focus_mm and directrix_mm
///     cone    slope_deg (0.5)
///     profile points_mm [[distance from axis, sag], ...], at least 5, or points_file, a CSV file
///             with the columns distance_mm,sag_mm; sag_sd_mm (default: from the points' scatter)
///   mounting  optional: eye_height_mm (3 mm), mirrored, heading_deg, robot_radius_mm (default 0:
///             not known)
[[nodiscard]] RigSpec read_rig(std::string_view text,
                               const std::string& file,
                               const std::filesystem::path& folder,
                               std::vector<Problem>& problems);

/// venue.yaml; see read_rig. Defaults are the initial values of VenueSpec.
///   name       text; default: the folder's name (left to the caller, empty here)
///   objects    NAME: {shape ball | box | post, diameter_mm, width_mm, height_mm}; a ball needs its
///              diameter_mm; width_mm (default 0: not known) is of boxes and posts; height_mm is
///              the height it is seen at (default: a ball's radius, else 0)
///   lights     NAME: text for people
///   link       baud, reports_per_second, bearing_codes, range_bits, near_m, far_m, check_byte
///              (true: the 7-bit sum | false | sum7 | crc8), measure (relative | absolute | rms |
///              noise_matched)
///   budget     table_bytes, colour_bytes
///   tolerance  range_relative, range_floor_mm, bearing_deg, recall
///   noise      mark_px, tape_m
///   lighting   stops [low, high], kelvin [low, high], auto_white_balance
///   hsv_scale  opencv | full_byte | degrees_percent
///   prefix     a C identifier
///   false_positive_cap
///   centre     u_px, v_px, sd_px (default 0.2)
[[nodiscard]] VenueSpec read_venue(std::string_view text,
                                   const std::string& file,
                                   std::vector<Problem>& problems);

}  // namespace rondel
