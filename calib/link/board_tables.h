#pragma once

#include <cstdint>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/venue/spec.h"

namespace rondel::link {

/// What goes over the line for one object.
struct Codes {
  int range_code = 0;    ///< a range, or one of the reserved codes
  int bearing_code = 0;  ///< 0 .. bearing_codes - 1
  friend bool operator==(Codes, Codes) = default;
};

/// Image positions on the board are fixed point: 1/8 pixel.
inline constexpr int kSubpixel = 8;

struct BoardTables;  // the layouts themselves: board_tables.cc's business, see its header part
                     // below

/// Integer-only, exactly as the emitted C does it: no square root, no division, no float.
/// Positions are in 1/kSubpixel px. `object` is the venue's object index.
[[nodiscard]] Codes encode(const BoardTables& tables, int object, int u_sub, int v_sub);
[[nodiscard]] Codes not_seen(const BoardTables& tables);

/// What the drive board makes of the codes; no answer for 'not seen' and 'beyond'.
[[nodiscard]] std::optional<FloorSpot> decode(const BoardTables& tables, Codes codes);

/// The packed binary and back. unpack throws InputError on anything that does not check out.
[[nodiscard]] std::vector<std::uint8_t> pack(const BoardTables& tables);
[[nodiscard]] BoardTables unpack(std::span<const std::uint8_t> bytes, const std::string& name);

}  // namespace rondel::link
