#pragma once

#include <vector>

#include "calib/link/build_tables.h"
#include "calib/link/harmonics.h"
#include "calib/link/picture.h"

// The layouts that are tried for one height, and how far each is off.
namespace rondel::link {

/// Everything that goes into choosing a layout.
struct Bench {
  const Scene* scene = nullptr;
  const Codebook* book = nullptr;
  const BoardTables* tables = nullptr;  ///< with centre, turn and tangents
  Turn turn;
  double scale = 1.0;         ///< of d^2 in the fits
  std::int32_t s_most = 0;    ///< largest s the boards can meet
  std::uint32_t d2_most = 0;  ///< largest d^2
};

/// What `codes` are off at a pixel, over what the target allows.
struct PixelError {
  double range_m = 0.0;
  double range_share = 0.0;
  double bearing_rad = 0.0;
  double bearing_share = 0.0;
};
[[nodiscard]] PixelError error_at(const BoardTables& tables,
                                  const Codebook& book,
                                  const Picture& picture,
                                  std::size_t pixel,
                                  Codes codes,
                                  const ErrorTarget& target);

struct Tried {
  RangeLayout layout;
  Candidate candidate;
};

/// Every layout, by bytes.
[[nodiscard]] std::vector<Tried> try_layouts(const Bench& bench,
                                             const Picture& picture,
                                             const ErrorTarget& target);

}  // namespace rondel::link
