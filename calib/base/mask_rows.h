#pragma once

#include <cstdint>
#include <optional>
#include <span>
#include <vector>

#include "calib/base/geometry.h"

namespace rondel {

/// A mask as boards can carry it: for each row the columns at which it changes, starting from
/// hidden, so that columns [changes[0], changes[1]) show floor, and so on.
struct MaskRows {
  int width_px = 0;
  std::vector<std::vector<int>> changes;  ///< per row, increasing, below width_px; odd: to the end
  friend bool operator==(const MaskRows&, const MaskRows&) = default;
};

/// `mask` row by row, zero hidden, anything else may show floor; its size a multiple of width_px.
[[nodiscard]] MaskRows rows_of(std::span<const std::uint8_t> mask, int width_px);
/// The mask again, 0 and 255.
[[nodiscard]] std::vector<std::uint8_t> mask_of(const MaskRows& rows);

/// Packed: a byte with the row's number of changes, then a byte or two a change: its distance from
/// the one before where below 255, else 255 and the rest (again). A row equal to the one before is
/// the single byte 255; a row has at most 254 changes. InputError where it has more.
[[nodiscard]] std::vector<std::uint8_t> pack_rows(const MaskRows& rows);
/// InputError on bytes that are no packing of `height_px` rows of that width.
[[nodiscard]] MaskRows unpack_rows(std::span<const std::uint8_t> bytes,
                                   int width_px,
                                   int height_px);

/// Whole radii between which the floor is seen in each of equal sectors about the
/// centre by image azimuth: sector k is centred on k * 360 / sectors degrees, u towards v. Where
/// other things hide parts in between, only the widest visible piece is kept, so that a pixel said
/// to be visible is visible.
struct VisibleRadii {
  ImagePoint centre;
  std::vector<std::uint16_t> inner_px;  ///< per sector, first radius that is seen
  std::vector<std::uint16_t> outer_px;  ///< first radius that is not; equal to inner: none is seen
};
[[nodiscard]] VisibleRadii visible_radii(std::span<const std::uint8_t> mask,
                                         int width_px,
                                         ImagePoint centre,
                                         int sectors);
/// Whether the layout calls the pixel visible.
[[nodiscard]] bool shows(const VisibleRadii& radii, int u_px, int v_px);

}  // namespace rondel
