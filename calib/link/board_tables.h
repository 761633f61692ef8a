#pragma once

#include <array>
#include <cstdint>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/colour/class_table.h"
#include "calib/colour/threshold_set.h"
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

/// Boards compute with 16-bit positions: no side of an image may be longer.
inline constexpr int kMostPixels = 2048;

/// How a layout makes the curves of equal range in the image round before it looks up breakpoints.
///
/// `d` is the position from the centre in 1/kSubpixel px, q what is looked up:
///   none      q = d^2
///   harmonic  q = d^2 + (A(s) n_u + B(s) n_v) 2^near_shift, n = d / 2^near_shift rounded to 8
///   bits,
///             s = d^2 >> slow_shift in 8 bits; the direction of the bearing is d + (E(s), F(s)).
///             A..F are c[0] + (c[1] s >> 7): first-harmonic corrections of tilt and decentring
///             which grow with the radius.
///   sectors   as harmonic for the bearing; q = d^2 with breakpoints of its own in each sector
///   grid      d is first moved by a displacement, bilinear between the nodes of a coarse grid;
///             q = d^2 and the bearing are taken from the moved d
enum class Straightening : std::uint8_t { none, harmonic, sectors, grid };

/// Range and bearing at one height above the floor.
struct RangeLayout {
  Straightening kind = Straightening::none;

  /// Coefficients of A, B, E, F; A and B in 1/kSubpixel px of twice a displacement, E and F of a
  /// displacement. All four fit 8 bits at every s.
  std::array<std::array<std::int8_t, 2>, 4> harmonic{};

  int sectors = 1;  ///< a power of two

  /// Nodes every 2^grid_log2_px px from pixel (0, 0), row by row, (d_u, d_v) in 1/kSubpixel px.
  int grid_log2_px = 0;
  int grid_columns = 0;
  int grid_rows = 0;
  std::vector<std::int8_t> grid;

  /// Breakpoints are of q >> edge_shift: 16 bits, 15 where `harmonic`; 32 bits and no shift where
  /// `wide`.
  int edge_shift = 0;
  bool wide = false;
  /// `sectors` runs of one breakpoint per range code, ascending: the code is how many are <= q; all
  /// of them: 'beyond'.
  std::vector<std::uint32_t> edges;

  friend bool operator==(const RangeLayout&, const RangeLayout&) = default;
};

/// An object as the boards know it.
struct BoardObject {
  std::string name;
  double height_m = 0.0;  ///< of the measured point above the floor
  int layout = 0;         ///< index into BoardTables::layouts
};

/// Pixels from <= u < to of a row may show the floor.
struct MaskRun {
  std::uint16_t row = 0;
  std::uint16_t from = 0;
  std::uint16_t to = 0;
  friend bool operator==(const MaskRun&, const MaskRun&) = default;
};

/// Everything the boards carry. Made by build_tables, moved by pack and unpack.
struct BoardTables {
  std::uint32_t identity = 0;  ///< CRC-32 of the packed content: two ends agree when it is the same
  std::string venue;
  std::string prefix = "rondel";
  int width_px = 0;
  int height_px = 0;

  // Codes and report.
  LinkSpec link;
  std::uint32_t range_unit_um = 50;
  std::vector<std::uint16_t> range_units;  ///< what each range code stands for, range_unit_um each
  [[nodiscard]] int range_codes() const { return static_cast<int>(range_units.size()); }
  /// Reserved: farther than far_m, or past the horizon.
  [[nodiscard]] int beyond_code() const { return range_codes(); }
  /// Reserved: the object is not in the frame.
  [[nodiscard]] int not_seen_code() const { return range_codes() + 1; }

  // From pixel to code.
  int centre_u_sub = 0;  ///< 1/kSubpixel px
  int centre_v_sub = 0;
  int near_shift = 4;
  int slow_shift = 12;
  int slow_most = 255;  ///< s goes no higher
  /// Image axes to robot axes: x = (c d_u + s d_v) >> 8, y = +-(c d_v - s d_u) >> 8, the minus
  /// where not `mirrored`. The length of (c, s) is free.
  std::int16_t turn_c = 0;
  std::int16_t turn_s = 0;
  bool mirrored = true;
  /// Tangents of the fine bearing cells' ends in the first octant, `tangent_bits` (8 or 16)
  /// fraction bits; there are 2^fine_log2 fine cells to a bearing code, so that 8 divides their
  /// number.
  int fine_log2 = 0;
  int tangent_bits = 8;
  std::vector<std::uint16_t> tangents;
  std::vector<BoardObject> objects;  ///< in the venue's order
  std::vector<RangeLayout> layouts;  ///< one for each height

  // Pixels.
  std::vector<MaskRun> mask;  ///< sorted by row, then column; empty: every pixel may show the floor
  colour::ClassTable classes;  ///< no entries: made without colours
  std::vector<colour::ThresholdSet> sets;
  HsvScale hsv_scale = HsvScale::opencv;
};

/// Bytes of the tables on the camera board for range, bearing and straightening of one layout.
[[nodiscard]] int table_bytes(const RangeLayout& layout);
/// Of all layouts, with the bearing table they share.
[[nodiscard]] int table_bytes(const BoardTables& tables);
/// Bits that a packed class table spends on an entry: 1, 2, 4 or 8.
[[nodiscard]] int class_bits(const BoardTables& tables);
/// Bytes of the packed class table; 0 where there is none.
[[nodiscard]] int class_bytes(const BoardTables& tables);
/// The class table as boards carry it: entry i in byte i / (8 / bits), lowest bits first.
[[nodiscard]] std::vector<std::uint8_t> packed_classes(const BoardTables& tables);

/// Integer-only, exactly as the emitted C does it: no square root, no division, no float.
/// Positions are in 1/kSubpixel px and are clamped to at most one pixel outside the image. `object`
/// is the venue's object index.
[[nodiscard]] Codes encode(const BoardTables& tables, int object, int u_sub, int v_sub);
[[nodiscard]] Codes not_seen(const BoardTables& tables);

/// q at a position without the roundings of the shift.
[[nodiscard]] double straightened_square(const BoardTables& tables,
                                         const RangeLayout& layout,
                                         int u_sub,
                                         int v_sub);

/// Of a bearing code: 1/100 degree, -17999 .. 18000, as the drive board gets it.
[[nodiscard]] int bearing_cdeg(const BoardTables& tables, int bearing_code);

/// What the drive board makes of the codes; no answer for 'not seen' and 'beyond'.
[[nodiscard]] std::optional<FloorSpot> decode(const BoardTables& tables, Codes codes);

/// The packed binary and back: 'RNDL', version, length, identity, content, all little-endian.
/// unpack throws InputError on anything that does not check out.
[[nodiscard]] std::vector<std::uint8_t> pack(const BoardTables& tables);
[[nodiscard]] BoardTables unpack(std::span<const std::uint8_t> bytes, const std::string& name);

/// A report as it goes over the line: the codes of every object and the check, the first byte
/// marked by its top bit. Codes above 7 bits take two bytes, high part first.
[[nodiscard]] std::vector<std::uint8_t> report_bytes(const BoardTables& tables,
                                                     std::span<const Codes> codes);
/// The codes of a whole report; no answer where its length, marks, check or codes are wrong.
[[nodiscard]] std::optional<std::vector<Codes>> read_report(const BoardTables& tables,
                                                            std::span<const std::uint8_t> bytes);

}  // namespace rondel::link
