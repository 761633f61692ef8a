#pragma once

#include <memory>

#include "calib/link/board_tables.h"
#include "calib/range/range_curve.h"
#include "tools/rondel/workspace.h"
#include "vision/detect/detect.h"

namespace rondel::app {

/// What `locate` and `check` run: the tables as they are sent to the boards, and the detection that
/// a camera board does with them. `curve` is what they were made from. Keep a Board where it is
/// while its detector is used: the detector's map is the curve.
struct Board {
  vision::DetectorSetup detector;
  link::BoardTables tables;
  std::shared_ptr<const range::RangeCurve> curve;
};

/// From results/: tables/<prefix>.bin, range.yaml. The class table and the mask are those of the
/// tables. InputError where something is missing, damaged or of other objects than venue.yaml's,
/// with the command that makes it.
[[nodiscard]] Board open_board(const Workspace& workspace);

}  // namespace rondel::app
