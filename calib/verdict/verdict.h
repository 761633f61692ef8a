#pragma once

#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/venue/spec.h"
#include "calib/verdict/statistics.h"

namespace rondel::verdict {

/// One accepted blob of one object in one image, and what the boards made of it.
struct Find {
  int object = 0;       ///< index into the venue's objects
  ImagePoint measured;  ///< sub-pixel place that stands for the object
  int area_px = 0;
  bool cut_by_mask = false;
  int range_code = 0;
  int bearing_code = 0;
  std::optional<FloorSpot> reported;   ///< decoded codes; none for 'not seen' and 'beyond'
  std::optional<FloorSpot> unrounded;  ///< the range curve at `measured`, before tables and codes
  /// One standard deviation of range and bearing that one standard deviation of pixel noise makes
  /// here; 0 where the curve has no answer.
  double noise_range_m = 0.0;
  double noise_bearing_rad = 0.0;
};

/// One row of the tape sheet as the judge needs it.
struct TapeEntry {
  int line = 0;   ///< in tape.csv
  int image = 0;  ///< index into the list of images
  int object = 0;
  double range_m = 0.0;
  std::optional<double> bearing_rad;
  bool absent = false;
  bool hidden = false;  ///< its place lies behind the mask, or where no pixel shows it
};

struct ImageEntry {
  std::string image;
  std::string light;
};

enum class RowState {
  found,
  missed,
  elsewhere,   ///< something was reported, but too far off to be this object: counts as missed
  hidden,      ///< behind the mask: listed, not counted
  beyond,      ///< outside the link's ranges, and not reported: listed, not counted
  absent,      ///< absent and not reported
  false_find,  ///< absent and reported
};
[[nodiscard]] std::string_view to_text(RowState state);

/// A row with its blob. Errors are reported minus tape.
struct RowResult {
  RowState state = RowState::missed;
  int find = -1;         ///< index into the image's finds; -1 none
  bool largest = false;  ///< the find is the largest of its object in the image
  std::optional<double> range_error_m;
  std::optional<double> bearing_error_rad;
  double distance_m = 0.0;  ///< on the floor, from tape to report; the range error without bearing
  // What the errors are made of: error = rounding (tables and codes) + the rest; of the rest,
  // pixel noise explains about noise_*.
  std::optional<double> rounding_range_m;
  std::optional<double> rounding_bearing_rad;
  double noise_range_m = 0.0;
  double noise_bearing_rad = 0.0;
  bool range_within = false;    ///< inside the tolerance
  bool bearing_within = false;  ///< inside the tolerance, or not measured
};

/// A number with its interval, where there are enough rows for either.
struct Estimate {
  std::optional<double> value;
  std::optional<Interval> interval;
};

/// Rows that share something.
struct Group {
  std::string kind;  ///< "all", "object", "light", "range", "bearing"
  std::string name;  ///< "buoy", "noon", "0.5-1.0 m", "-22.5..22.5 deg"
  int rows = 0;      ///< counted rows of objects that should be found
  int found = 0;
  int with_bearing = 0;
  Estimate recall;
  Estimate range_bias_m;
  Estimate range_rms_m;
  Estimate range_rms_relative;
  Estimate range_p95_relative;
  Estimate bearing_bias_rad;
  Estimate bearing_rms_rad;
  Estimate within;  ///< share of found rows inside both tolerances
};

/// One thing that the venue's tolerances ask for.
struct Criterion {
  std::string name;  ///< "Recall"
  double value = 0.0;
  double limit = 0.0;
  bool at_least = false;  ///< else at most
  bool passed = false;
  std::string value_text;  ///< "97.5 %"
  std::string limit_text;
  std::string reason;  ///< one sentence
};

/// Mean squares of the errors of all found rows, split by where they come from.
struct Shares {
  double total_m2 = 0.0;
  double rounding = 0.0;  ///< each a share of the total, 0..1, adding up to 1
  double pixel_noise = 0.0;
  double rest = 0.0;
};

struct Verdict {
  bool accepted = false;
  std::vector<RowResult> rows;  ///< as the tape entries
  int counted = 0;              ///< rows of objects that should be found
  int found = 0;
  int hidden = 0;
  int beyond = 0;
  int absent = 0;
  int false_finds = 0;
  int extra_finds = 0;  ///< blobs beyond the rows of their object in their image
  Group all;
  Group largest_only;  ///< what a board that reports only its largest blob would have said
  std::vector<Group> groups;
  std::optional<Shares> range_shares;
  std::vector<Criterion> criteria;
  std::vector<std::string> reasons;  ///< why not accepted; when accepted, what held
  std::vector<std::string> remarks;  ///< worth knowing, not decisive
};

/// Judges an archive: pairs the rows of an object in an image with its blobs one to one by least
/// total distance, and measures against the venue's tolerances. Accepted when recall is reached, 95
/// % of the found rows are inside the range tolerance and 95 % of those with a bearing inside the
/// bearing tolerance, and absent objects are reported in no larger share than the recall leaves.
///   `finds` are per image, largest first within each object.
/// Statistics assume rows independent of each other; a tape sheet with an offset common to all rows
/// shows as bias and is not in the intervals.
[[nodiscard]] Verdict judge(const VenueSpec& venue,
                            std::span<const ImageEntry> images,
                            std::span<const TapeEntry> tape,
                            std::span<const std::vector<Find>> finds);

}  // namespace rondel::verdict
