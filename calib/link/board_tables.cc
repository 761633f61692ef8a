#include "calib/link/board_tables.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <cstddef>
#include <cstdlib>

#include "calib/link/checksums.h"
#include "calib/link/link_plan.h"

namespace rondel::link {
namespace {

struct Offset {
  std::int32_t u = 0, v = 0;
};

Offset from_centre(const BoardTables& tables, int u_sub, int v_sub) {
  const int u = std::clamp(u_sub, -kSubpixel, kSubpixel * tables.width_px);
  const int v = std::clamp(v_sub, -kSubpixel, kSubpixel * tables.height_px);
  return {u - tables.centre_u_sub, v - tables.centre_v_sub};
}

std::int32_t slow(const std::array<std::int8_t, 2>& c, std::int32_t s) {
  return c[0] + ((c[1] * s) >> 7);
}

/// The displacement at (u, v), both from pixel (0, 0), bilinear in integers.
Offset displacement(const RangeLayout& layout, std::int32_t u, std::int32_t v) {
  const int log2 = layout.grid_log2_px + 3;
  const std::int32_t size = 1 << log2;
  u = std::clamp(u, 0, ((layout.grid_columns - 1) << log2) - 1);
  v = std::clamp(v, 0, ((layout.grid_rows - 1) << log2) - 1);
  const std::int32_t fu = u & (size - 1);
  const std::int32_t fv = v & (size - 1);
  const std::int8_t* upper =
      layout.grid.data() + 2 * ((v >> log2) * layout.grid_columns + (u >> log2));
  const std::int8_t* lower = upper + static_cast<std::ptrdiff_t>(2) * layout.grid_columns;
  const auto blend = [&](int i) {
    const std::int32_t above = upper[i] * (size - fu) + upper[i + 2] * fu;
    const std::int32_t below = lower[i] * (size - fu) + lower[i + 2] * fu;
    return (above * (size - fv) + below * fv) >> (2 * log2);
  };
  return {blend(0), blend(1)};
}

/// q = steps + bend 2^(near_shift - edge_shift), and the direction of the bearing.
struct Straight {
  std::int32_t steps = 0;
  std::int32_t bend = 0;
  Offset direction;
};
Straight straighten(const BoardTables& tables, const RangeLayout& layout, Offset d) {
  Straight out{0, 0, d};
  if (layout.kind == Straightening::grid) {
    const Offset move = displacement(layout, d.u + tables.centre_u_sub, d.v + tables.centre_v_sub);
    out.direction = {d.u + move.u, d.v + move.v};
  }
  // Each square is shifted on its own, as 8-bit boards do it.
  out.steps = ((out.direction.u * out.direction.u) >> layout.edge_shift) +
              ((out.direction.v * out.direction.v) >> layout.edge_shift);
  if (layout.kind == Straightening::none || layout.kind == Straightening::grid) return out;
  const std::int32_t s =
      std::min(out.steps >> (tables.slow_shift - layout.edge_shift), tables.slow_most);
  out.direction.u += slow(layout.harmonic[2], s);
  out.direction.v += slow(layout.harmonic[3], s);
  if (layout.kind == Straightening::harmonic) {
    const std::int32_t half = (1 << tables.near_shift) >> 1;
    out.bend = slow(layout.harmonic[0], s) * ((d.u + half) >> tables.near_shift) +
               slow(layout.harmonic[1], s) * ((d.v + half) >> tables.near_shift);
  }
  return out;
}

int bearing_code(const BoardTables& tables, Offset d) {
  const std::int32_t x = (tables.turn_c * d.u + tables.turn_s * d.v) >> 8;
  std::int32_t y = (tables.turn_c * d.v - tables.turn_s * d.u) >> 8;
  if (!tables.mirrored) y = -y;
  auto across = static_cast<std::uint32_t>(std::abs(y));
  auto along = static_cast<std::uint32_t>(std::abs(x));
  const bool steep = across > along;
  if (steep) std::swap(across, along);
  // With 8-bit tangents the slope is taken by the upper 8 bits of its denominator.
  const bool eight = tables.tangent_bits == 8;
  if (eight) {
    if (along == 0) return 0;
    while (along < 32768U) {
      along <<= 1;
      across <<= 1;
    }
  }
  // How many cells' ends lie below the slope.
  const auto end = std::partition_point(
      tables.tangents.begin(), tables.tangents.end(), [&](std::uint16_t tangent) {
        return (eight ? (along >> 8) * tangent : (along * tangent) >> 16) < across;
      });
  auto cell = static_cast<int>(end - tables.tangents.begin());
  const int half = tables.link.bearing_codes << tables.fine_log2 >> 1;  // cells to half a turn
  const int offset =
      tables.fine_log2 == 0 ? 0 : 1;  // cells begin at the axis, or are centred on it
  if (steep) cell = half / 2 - offset - cell;
  if (x < 0) cell = half - offset - cell;
  if (y < 0) cell = 2 * half - offset - cell;
  const int code = (cell + ((1 << tables.fine_log2) >> 1)) >> tables.fine_log2;
  return code >= tables.link.bearing_codes ? code - tables.link.bearing_codes : code;
}

}  // namespace

int table_bytes(const RangeLayout& layout) {
  int bytes = static_cast<int>(layout.edges.size()) * (layout.wide ? 4 : 2);
  if (layout.kind == Straightening::harmonic) bytes += 8;
  if (layout.kind == Straightening::sectors) bytes += 4;
  bytes += static_cast<int>(layout.grid.size());
  return bytes;
}

int table_bytes(const BoardTables& tables) {
  int bytes = static_cast<int>(tables.tangents.size()) * tables.tangent_bits / 8;
  for (const RangeLayout& layout : tables.layouts) bytes += table_bytes(layout);
  return bytes;
}

int class_bits(const BoardTables& tables) {
  const auto classes = tables.objects.size() + 1;
  return classes <= 2 ? 1 : classes <= 4 ? 2 : classes <= 16 ? 4 : 8;
}

int class_bytes(const BoardTables& tables) {
  return static_cast<int>(tables.classes.classes.size()) * class_bits(tables) / 8;
}

double straightened_square(const BoardTables& tables,
                           const RangeLayout& layout,
                           int u_sub,
                           int v_sub) {
  RangeLayout fine = layout;
  fine.edge_shift = 0;
  const Straight at = straighten(tables, fine, from_centre(tables, u_sub, v_sub));
  return std::max(0.0, at.steps + std::ldexp(at.bend, tables.near_shift));
}

Codes encode(const BoardTables& tables, int object, int u_sub, int v_sub) {
  assert(object >= 0 && object < static_cast<int>(tables.objects.size()));
  const RangeLayout& layout = tables.layouts[static_cast<std::size_t>(
      tables.objects[static_cast<std::size_t>(object)].layout)];
  const Straight at = straighten(tables, layout, from_centre(tables, u_sub, v_sub));
  const int bearing = bearing_code(tables, at.direction);
  const int by = layout.edge_shift - tables.near_shift;
  const std::int32_t q = std::max(0, at.steps + (by >= 0 ? at.bend >> by : at.bend * (1 << -by)));
  const auto codes = static_cast<std::ptrdiff_t>(tables.range_units.size());
  std::ptrdiff_t sector = 0;
  if (layout.kind == Straightening::sectors) {
    const auto step =
        static_cast<std::uint32_t>((layout.sectors << 16) / tables.link.bearing_codes);
    sector = static_cast<std::ptrdiff_t>(static_cast<std::uint32_t>(bearing) * step >> 16);
  }
  const auto first = layout.edges.begin() + sector * codes;
  return {static_cast<int>(std::upper_bound(first, first + codes, static_cast<std::uint32_t>(q)) -
                           first),
          bearing};
}

Codes not_seen(const BoardTables& tables) { return {tables.not_seen_code(), 0}; }

int bearing_cdeg(const BoardTables& tables, int bearing_code) {
  const auto codes = static_cast<std::uint32_t>(tables.link.bearing_codes);
  const std::uint32_t step = ((36000U << 16) + codes / 2) / codes;
  const auto cdeg =
      static_cast<int>((static_cast<std::uint32_t>(bearing_code) * step + 32768U) >> 16);
  return cdeg > 18000 ? cdeg - 36000 : cdeg;
}

std::optional<FloorSpot> decode(const BoardTables& tables, Codes codes) {
  if (codes.range_code < 0 || codes.range_code >= tables.range_codes()) return std::nullopt;
  if (codes.bearing_code < 0 || codes.bearing_code >= tables.link.bearing_codes) {
    return std::nullopt;
  }
  const double units = tables.range_units[static_cast<std::size_t>(codes.range_code)];
  return FloorSpot{units * tables.range_unit_um * 1e-6,
                   bearing_cdeg(tables, codes.bearing_code) * (0.01 * kRadPerDeg)};
}

std::vector<std::uint8_t> report_bytes(const BoardTables& tables, std::span<const Codes> codes) {
  assert(codes.size() == tables.objects.size());
  std::vector<std::uint8_t> bytes;
  const auto put = [&bytes](int code, bool two) {
    if (two) bytes.push_back(static_cast<std::uint8_t>(code >> 7));
    bytes.push_back(static_cast<std::uint8_t>(code & 127));
  };
  const ReportLayout layout = report_layout(tables.link, static_cast<int>(tables.objects.size()));
  for (const Codes& c : codes) {
    put(c.bearing_code, layout.bearing_bytes == 2);
    put(c.range_code, layout.range_bytes == 2);
  }
  if (bytes.empty()) bytes.push_back(0);
  bytes.front() = static_cast<std::uint8_t>(bytes.front() | 128);
  if (tables.link.check == CheckByte::sum7) {
    bytes.push_back(sum7(bytes));
  } else if (tables.link.check == CheckByte::crc8) {
    put(crc8(bytes), true);
  }
  return bytes;
}

std::optional<std::vector<Codes>> read_report(const BoardTables& tables,
                                              std::span<const std::uint8_t> bytes) {
  const ReportLayout layout = report_layout(tables.link, static_cast<int>(tables.objects.size()));
  if (bytes.size() != static_cast<std::size_t>(layout.bytes)) return std::nullopt;
  for (std::size_t i = 0; i < bytes.size(); ++i) {
    if ((bytes[i] >= 128) != (i == 0)) return std::nullopt;
  }
  const auto body = bytes.first(bytes.size() - static_cast<std::size_t>(layout.check_bytes));
  if (tables.link.check == CheckByte::sum7 && sum7(body) != bytes.back()) return std::nullopt;
  if (tables.link.check == CheckByte::crc8 &&
      crc8(body) != bytes[bytes.size() - 2] * 128 + bytes.back()) {
    return std::nullopt;
  }
  std::size_t at = 0;
  const auto get = [&](int size) {
    int code = 0;
    for (int i = 0; i < size; ++i) code = code << 7 | (bytes[at++] & 127);
    return code;
  };
  std::vector<Codes> codes;
  for (std::size_t i = 0; i < tables.objects.size(); ++i) {
    Codes c;
    c.bearing_code = get(layout.bearing_bytes);
    c.range_code = get(layout.range_bytes);
    if (c.bearing_code >= tables.link.bearing_codes || c.range_code > tables.not_seen_code()) {
      return std::nullopt;
    }
    codes.push_back(c);
  }
  return codes;
}

}  // namespace rondel::link
