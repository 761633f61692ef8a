#pragma once

#include <cstdint>
#include <span>
#include <string>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/base/progress.h"
#include "calib/link/board_tables.h"
#include "calib/link/codebook.h"
#include "calib/venue/spec.h"

namespace rondel::link {

/// What an encoded range may be off: `codebook` times what the codebook is off in that cell, plus
/// `pixels` times what a pixel is worth there. Bearings likewise, with half a code's step.
struct ErrorTarget {
  double codebook = 1.1;
  double pixels = 0.5;
};

/// One layout that was tried for a height.
struct Candidate {
  std::string name;  ///< "none", "harmonic 1", "sectors 8", "grid 32 px", "grid 32 px wide"
  int bytes = 0;
  /// Of all pixels that may show the floor between near and far: the largest error over what the
  /// target allows there, and the largest relative error.
  double worst_share = 0.0;
  double worst_relative_error = 0.0;
  bool chosen = false;
  [[nodiscard]] bool meets() const { return worst_share <= 1.0; }
};

/// The layouts tried for one height and the objects that share it.
struct HeightTradeOff {
  double height_m = 0.0;
  std::vector<std::string> objects;
  std::vector<Candidate> candidates;  ///< by bytes
};

/// At one range: what a pixel is worth and what the code around it is off at most.
struct Resolution {
  double range_m = 0.0;
  double pixel_m = 0.0;
  double code_m = 0.0;
};

struct BuiltTables {
  BoardTables tables;
  Codebook book;
  std::vector<HeightTradeOff> heights;
  std::vector<Resolution> resolutions;  ///< by range, on the lowest height
  double class_agreement = 1.0;         ///< part of the colours whose class the packed table keeps
};

/// Makes the tables: for each height the smallest layout that meets `target`. `mask` is row by row,
/// above 0 where a pixel may show the floor; empty: everywhere. `classes` over RGB565, without
/// entries where colours have not been made. `where` names the file in messages. InputError where
/// no layout meets the target or the budget is too small, naming the nearest possible ones.
[[nodiscard]] BuiltTables build_tables(const FloorMap& map,
                                       const VenueSpec& venue,
                                       const CameraSpec& camera,
                                       std::span<const std::uint8_t> mask,
                                       const colour::ClassTable& classes,
                                       std::span<const colour::ThresholdSet> sets,
                                       const ErrorTarget& target,
                                       const std::string& where,
                                       Progress& progress);

/// How the tables do on every pixel that may show the floor.
struct RoundTrip {
  int pixels = 0;   ///< between near and far
  int outside = 0;  ///< of them, farther off than the target allows
  double worst_share = 0.0;
  double worst_relative_error = 0.0;
  double rms_relative_error = 0.0;
  double worst_bearing_rad = 0.0;
  ImagePoint worst_at;
};

/// Encodes and decodes every pixel of the mask for `object` and holds it against the exact map.
[[nodiscard]] RoundTrip verify(const BoardTables& tables,
                               const FloorMap& map,
                               int object,
                               std::span<const std::uint8_t> mask,
                               const ErrorTarget& target);

/// The edges of the cells of codes as far as the board knows them: near, far and what lies between
/// follow from the link's plan and the codes' values.
[[nodiscard]] Codebook codebook_of(const BoardTables& tables);

/// `mask` as runs. No runs where everything is visible.
[[nodiscard]] std::vector<MaskRun> mask_runs(std::span<const std::uint8_t> mask,
                                             int width_px,
                                             int height_px);

/// `table` with as many bits as fit `bytes` for `objects` objects; each entry takes the class that
/// most of the entries it replaces had. InputError where not even one bit a channel fits.
[[nodiscard]] colour::ClassTable fit_class_table(const colour::ClassTable& table,
                                                 int objects,
                                                 int bytes,
                                                 const std::string& where);

}  // namespace rondel::link
