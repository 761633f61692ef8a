#pragma once

#include <memory>
#include <nlohmann/json.hpp>
#include <optional>
#include <span>
#include <string>

#include "calib/base/progress.h"
#include "calib/range/range_curve.h"
#include "tools/rondel/board.h"
#include "tools/rondel/steps/check_causes.h"
#include "tools/rondel/steps/check_files.h"

namespace rondel::app {

/// `curve` with only those of its parameters moved that a knock of this kind moves. No answer where
/// its model has no such parameter (a straight curve has no tilt).
[[nodiscard]] std::shared_ptr<const range::RangeCurve> moved_curve(const range::RangeCurve& curve,
                                                                   verdict::KnockKind kind,
                                                                   std::span<const double> amounts);

/// What refitting the diagnosed cause, and nothing else, does to rows it was not fitted to.
struct HeldOut {
  verdict::KnockKind kind = verdict::KnockKind::count;
  std::vector<double> amounts;  ///< fitted to all rows
  int rows = 0;
  // Root mean square of errors over their tolerances, of each row by a fit to the others' folds.
  double before = 0.0;
  double after = 0.0;
  // The range errors alone, relative.
  double range_before = 0.0;
  double range_after = 0.0;
};
/// Over `folds` parts of the sightings. No answer where the curve has no such parameter, or a fold
/// cannot be fitted.
[[nodiscard]] std::optional<HeldOut> held_out(const std::shared_ptr<const range::RangeCurve>& curve,
                                              verdict::KnockKind kind,
                                              std::span<const verdict::Sighting> sightings,
                                              const verdict::SightingNoise& noise,
                                              const ToleranceSpec& tolerance,
                                              int folds);

struct Repair {
  nlohmann::ordered_json document;
  std::string summary;
};

/// Refits the likeliest of the named causes to the rows and, where that lowers the errors of
/// held-out rows by a tenth or more, writes a copy of the venue with its repaired results and
/// tables to `results`/repaired. Otherwise writes nothing and says why.
[[nodiscard]] Repair try_repair(const Workspace& workspace,
                                const Board& board,
                                const CheckReport& report,
                                const Causes& causes,
                                Progress& progress);

}  // namespace rondel::app
