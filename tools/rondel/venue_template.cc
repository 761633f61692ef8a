#include "tools/rondel/venue_template.h"

#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include "calib/venue/words.h"

namespace rondel::app {
namespace {

/// Where the top-level block `key:` of a YAML text begins and ends (whole lines, its comments above
/// left alone). Nothing where the text has no such line; flow-style files are then left as they
/// are.
struct Block {
  std::size_t begin = 0;
  std::size_t end = 0;
};
std::optional<Block> top_block(std::string_view text, std::string_view key) {
  std::size_t at = 0;
  std::optional<Block> block;
  while (at < text.size()) {
    const std::size_t stop = text.find('\n', at);
    const std::size_t end = stop == std::string_view::npos ? text.size() : stop + 1;
    const std::string_view line = text.substr(at, end - at);
    const bool silent = line.find_first_not_of(" \t\r\n") == std::string_view::npos ||
                        line.front() == '#';  // may stand between a block's lines or after it
    if (line.substr(0, key.size()) == key && line.substr(key.size(), 1) == ":") {
      block = Block{at, end};
    } else if (block && !silent) {
      if (line.front() != ' ' && line.front() != '\t' && line.front() != '}') return block;
      block->end = end;
    }
    at = end;
  }
  return block;
}

}  // namespace

std::string yaml_quoted(std::string_view text) {
  std::string out = "\"";
  for (const char c : text) {
    if (c == '"' || c == '\\') out += '\\';
    out += c;
  }
  out += '"';
  return out;
}

std::string rig_template() {
  return R"(# The robot's optics. Copied from venue to venue: it stays while the robot stays as it is.
# Lengths in millimetres, angles in degrees. A value is a bare number, or says how far off it may be
# (one standard deviation): {value: 260, tolerance: 5}. A bare number has the tolerance in (brackets).
# To fill something in, take away the '# ' in front of it, the blank too.

camera:
  width_px: 320               # size of the frames; frames of another size are refused
  height_px: 240
  # focal_px: 260             # (2 %) focal length in pixels: image width / width of what it sees at 1 m
  # rgb565_order: high_first  # byte order of raw *.565 dumps: high_first or low_first

# The mirror, as drawn. All of it may stay out: then nothing is known but what the marks say.
# With it, focal_px and eye_height_mm a first range curve needs no marks, and a handful correct it.
# mirror:
#   shape: conic              # conic, cone or profile
#   rim_radius_mm: 30         # the mirror's edge, from its axis
#   distance_mm: 60           # (1 mm) from the camera's pinhole to the mirror's lowest point
#   # A conic: one of these pairs.
#   vertex_radius_mm: 40      # (2 %) radius of the ball that fits the tip
#   conic_constant: -2.25     # (0.08) below -1 hyperboloid, -1 paraboloid, 0 sphere; it is -(eccentricity^2)
#   # semi_axis_a_mm: 32      # (1 %) along the mirror's axis; with: curve: hyperbola (or ellipse)
#   # semi_axis_b_mm: 35.8    # (1 %) across
#   # eccentricity: 1.5       # (0.02) together with vertex_radius_mm, focus_mm, directrix_mm or
#   #                         #        focus_to_directrix_mm (2 % each); or focus_mm and directrix_mm
#   # A cone:
#   # slope_deg: 40           # (0.5) between its flank and its base
#   # A measured profile:
#   # points_mm: [[0, 0], [5, 0.3], [10, 1.2], [20, 4.5], [30, 9.4]]   # from the axis, height over the tip
#   # points_file: profile.csv   # the same from a file with the columns distance_mm,sag_mm
#   # sag_sd_mm: 0.05         # how well a height is measured; from the points' scatter when left out

# How camera and mirror sit on the robot.
# mounting:
#   eye_height_mm: 160        # (3 mm) the camera's pinhole above the floor
#   robot_radius_mm: 90       # for drawings only
#   # These two are found from marks with a bearing; say them only to have the marks held against them.
#   mirrored: true            # bearings grow the way the image's angle from u to v does
#   heading_deg: 0            # the image's u direction, counter-clockwise from the robot's forward
)";
}

std::string venue_template(std::string_view name) {
  return fmt::format(
      R"(# One robot in one hall. Rondel reads this file and never writes it. Every key but the objects'
# shape and a ball's diameter may stay out; the values shown after '#' are the defaults.

name: {}

# What the robot looks for. An object's name stands in the boards' code: letters, digits and '_'.
objects:
  ball:
    shape: ball               # ball: measured at its middle. box, post: at its foot
    diameter_mm: 74
  # dock:
  #   shape: box
  #   width_mm: 300           # seen from the side, helps to tell near from far
  #   height_mm: 0            # height above the floor it is measured at

# lights:                     # for people: what the folders in frames/ stand for
#   noon: sun from the left, blinds open

link:                         # the line from camera board to drive board
  baud: 115200
  reports_per_second: 30
  bearing_codes: 120          # 3 degrees each
  range_bits: 7
  near_m: 0.15                # ranges the codes are spent on
  far_m: 3.0
  check_byte: true            # true or sum7: a 7-bit sum; crc8; false
  measure: relative           # what the codes keep small: relative, absolute, rms, noise_matched

tolerance:                    # what the verdict is held against
  range_relative: 0.05        # of the range, but never less than
  range_floor_mm: 20
  bearing_deg: 3
  recall: 0.95                # share of the tape sheet's objects that must be found

# budget: {{table_bytes: 1024, colour_bytes: 32768}}
# noise: {{mark_px: 0.5, tape_m: 0.003}}   # how well marks are set and the tape is read
# lighting:                   # what this hall's light may do, for the colour thresholds
#   stops: [-1, 1]            # exposure
#   kelvin: [5000, 7000]      # colour temperature; counts without white balance only
#   auto_white_balance: false
# hsv_scale: opencv           # the board's HSV numbers: opencv, full_byte, degrees_percent
# false_positive_cap: 0.0001  # share of the surroundings' pixels that may be taken for an object
# prefix: rondel              # of every name in the boards' code
# centre: {{u_px: 161.2, v_px: 118.9, sd_px: 0.2}}   # by hand, instead of the centre step
)",
      yaml_quoted(name));
}

std::string venue_from(std::string_view other_text,
                       std::string_view name,
                       std::string_view other_folder) {
  std::string text(other_text);
  if (const auto lights = top_block(text, "lights")) {
    text.erase(lights->begin, lights->end - lights->begin);
  }
  const std::string line = fmt::format("name: {}\n", yaml_quoted(name));
  if (const auto old = top_block(text, "name")) {
    text.replace(old->begin, old->end - old->begin, line);
  } else {
    text.insert(0, line);
  }
  return fmt::format("# Taken over from {}.\n{}", quotable(other_folder), text);
}

std::optional<std::string> points_file_of(std::string_view rig_text) {
  const YAML::Node rig = YAML::Load(std::string(rig_text));
  const YAML::Node file = rig["mirror"] ? rig["mirror"]["points_file"] : YAML::Node();
  if (!file || !file.IsScalar()) return std::nullopt;
  return file.Scalar();
}

}  // namespace rondel::app
