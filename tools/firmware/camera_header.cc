#include <fmt/format.h>

#include <cmath>

#include "calib/link/link_plan.h"
#include "tools/firmware/common.h"
#include "tools/firmware/emit.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {
namespace {

using link::RangeLayout;
using link::Straightening;

/// `a * u + b * v` of 16-bit names and constants, as 32 bits; zero terms are left out.
std::string sum_of_products(std::int32_t a, const char* u, std::int32_t b, const char* v) {
  const auto term = [](std::int32_t factor, const char* name) {
    return factor == 0 ? std::string() : fmt::format("(int32_t)({}) * {}", factor, name);
  };
  const std::string first = term(a, u);
  const std::string second = term(b, v);
  if (first.empty() && second.empty()) return "(int32_t)0";
  return first.empty() ? second : second.empty() ? first : fmt::format("{} + {}", first, second);
}

bool is_zero(const std::array<std::int16_t, 3>& c) { return c[0] == 0 && c[1] == 0 && c[2] == 0; }

/// A slow polynomial of `s` as a 16-bit expression.
std::string slow_expression(const std::array<std::int16_t, 3>& c) {
  if (c[1] == 0 && c[2] == 0) return fmt::format("(int16_t)({})", c[0]);
  const std::string inner =
      c[2] == 0 ? fmt::format("(int32_t)({})", c[1])
                : fmt::format(
                      "(int32_t)(int16_t)({} + (int16_t)(((int32_t)({}) * s) >> 16))", c[1], c[2]);
  return fmt::format("(int16_t)({} + (int16_t)(({} * s) >> 8))", c[0], inner);
}

/// x or y of the direction in the robot's axes: (c * u + s * v) >> 8, products by powers of two as
/// shifts of 16 bits.
std::string turned(std::int32_t a, const char* u, std::int32_t b, const char* v) {
  if (a == 0 || b == 0) {
    const std::int32_t factor = a == 0 ? b : a;
    const std::int32_t size = std::abs(factor) / 256;
    if (factor % 256 == 0) {
      return fmt::format("(int16_t)({} * {})", factor < 0 ? -size : size, a == 0 ? v : u);
    }
  }
  return fmt::format("(int16_t)(({}) >> 8)", sum_of_products(a, u, b, v));
}

std::string layout_code(const link::BoardTables& tables, std::size_t index) {
  const RangeLayout& layout = tables.layouts[index];
  Values values = common_values(tables);
  values.emplace_back("i", std::to_string(index));
  values.emplace_back("codes", std::to_string(tables.range_codes()));
  values.emplace_back("shift", std::to_string(layout.edge_shift));
  values.emplace_back("bits", layout.wide ? "32" : "16");
  values.emplace_back("edges", number_lines(layout.edges));
  values.emplace_back("count", std::to_string(layout.edges.size()));
  std::string code = fill(R"(
/* Breakpoints of the range codes: squared distance from the centre, straightened, >> @shift@. */
static const uint@bits@_t @p@_edges_@i@[@count@] @P@_ROM = {
@edges@};
)",
                          values);
  if (layout.kind == Straightening::grid) {
    values.emplace_back("log2", std::to_string(layout.grid_log2_px + 3));
    values.emplace_back("nodes", std::to_string(layout.grid.size()));
    values.emplace_back("columns", std::to_string(layout.grid_columns));
    values.emplace_back(
        "last_u", std::to_string(((layout.grid_columns - 1) << (layout.grid_log2_px + 3)) - 1));
    values.emplace_back("last_v",
                        std::to_string(((layout.grid_rows - 1) << (layout.grid_log2_px + 3)) - 1));
    std::vector<int> nodes(layout.grid.begin(), layout.grid.end());
    values.emplace_back("grid", number_lines(nodes));
    code += fill(R"(
/* Displacements (u, v) in 1/8 px at nodes every 2^@log2@ / 8 px, row by row. */
static const int8_t @p@_grid_@i@[@nodes@] @P@_ROM = {
@grid@};

/* One component of the displacement, bilinear between four nodes. */
static inline int16_t @p@_moved_@i@(const int8_t *upper, int16_t fu, int16_t fv) {
  const int8_t *lower = upper + 2 * @columns@;
  const int16_t size = 1 << @log2@;
  const int32_t above = (int32_t)(int8_t)@P@_ROM8(upper) * (int16_t)(size - fu) +
                        (int32_t)(int8_t)@P@_ROM8(upper + 2) * fu;
  const int32_t below = (int32_t)(int8_t)@P@_ROM8(lower) * (int16_t)(size - fu) +
                        (int32_t)(int8_t)@P@_ROM8(lower + 2) * fu;
  return (int16_t)((above * (int16_t)(size - fv) + below * fv) >> (2 * @log2@));
}
)",
                 values);
  }
  code += fill(R"(
static inline @p@_codes @p@_encode_@i@(int16_t u_sub, int16_t v_sub) {
  @p@_codes codes;
  int16_t du = (int16_t)(u_sub - @P@_CENTRE_U_SUB);
  int16_t dv = (int16_t)(v_sub - @P@_CENTRE_V_SUB);
)",
               values);
  const bool harmonic = layout.kind == Straightening::harmonic;
  if (layout.kind == Straightening::grid) {
    code += fill(R"(  const int16_t cu = u_sub < 0 ? 0 : u_sub > @last_u@ ? @last_u@ : u_sub;
  const int16_t cv = v_sub < 0 ? 0 : v_sub > @last_v@ ? @last_v@ : v_sub;
  const int16_t fu = (int16_t)(cu & ((1 << @log2@) - 1));
  const int16_t fv = (int16_t)(cv & ((1 << @log2@) - 1));
  const int8_t *node = @p@_grid_@i@ + 2 * ((cv >> @log2@) * @columns@ + (cu >> @log2@));
  du = (int16_t)(du + @p@_moved_@i@(node, fu, fv));
  dv = (int16_t)(dv + @p@_moved_@i@(node + 1, fu, fv));
)",
                 values);
  }
  code += "  uint32_t square = (uint32_t)((int32_t)du * du) + (uint32_t)((int32_t)dv * dv);\n";
  if (harmonic || layout.kind == Straightening::sectors) {
    values.emplace_back("slow_shift", std::to_string(tables.slow_shift));
    values.emplace_back("slow_most", std::to_string(tables.slow_most));
    code += fill(R"(  int16_t s = (int16_t)(square >> @slow_shift@);
  if (s > @slow_most@) s = @slow_most@;
)",
                 values);
    if (harmonic && !(is_zero(layout.harmonic[0]) && is_zero(layout.harmonic[1]))) {
      std::string bend;
      for (const std::size_t axis : {std::size_t{0}, std::size_t{1}}) {
        if (is_zero(layout.harmonic[axis])) continue;
        if (!bend.empty()) bend += " +\n      ";
        bend += fmt::format(
            "(int32_t){} * {}", slow_expression(layout.harmonic[axis]), axis == 0 ? "du" : "dv");
      }
      code += fmt::format(
          "  const int32_t bent = (int32_t)square + (({}) >> 8);\n"
          "  square = bent < 0 ? 0u : (uint32_t)bent;\n",
          bend);
    }
    for (const std::size_t axis : {std::size_t{0}, std::size_t{1}}) {
      const auto& c = layout.harmonic[axis + 2];
      if (is_zero(c)) continue;
      code += fmt::format(
          "  {0} = (int16_t)({0} + ({1} >> 8));\n", axis == 0 ? "du" : "dv", slow_expression(c));
    }
  }
  const int sign = tables.mirrored ? 1 : -1;
  code += fmt::format("  codes.bearing = {}_bearing({},\n      {});\n",
                      identifier(tables.prefix),
                      turned(tables.turn_c, "du", tables.turn_s, "dv"),
                      turned(-sign * tables.turn_s, "du", sign * tables.turn_c, "dv"));
  if (layout.wide) {
    code += fmt::format("  const uint32_t q = square >> {};\n", layout.edge_shift);
  } else {
    code += fmt::format("  const uint32_t steps = square >> {};\n", layout.edge_shift);
    code += "  const uint16_t q = steps > 65535u ? 65535u : (uint16_t)steps;\n";
  }
  std::string first = fmt::format("{}_edges_{}", identifier(tables.prefix), index);
  if (layout.kind == Straightening::sectors) {
    code += fmt::format(
        "  const uint16_t sector = (uint16_t)(((uint32_t)codes.bearing * {}u) >> 16);\n",
        (layout.sectors << 16) / tables.link.bearing_codes);
    first += fmt::format(" + sector * {}u", tables.range_codes());
  }
  code += fmt::format("  codes.range = {}_count{}({}, {}u, q);\n  return codes;\n}}\n",
                      identifier(tables.prefix),
                      layout.wide ? "32" : "16",
                      first,
                      tables.range_codes());
  return code;
}

std::string search_code(const link::BoardTables& tables, const char* bits) {
  Values values = common_values(tables);
  values.emplace_back("bits", bits);
  return fill(R"(
/* How many of `count` ascending breakpoints are at most q. */
static inline uint16_t @p@_count@bits@(const uint@bits@_t *first, uint16_t count, uint@bits@_t q) {
  const uint@bits@_t *at = first;
  while (count != 0u) {
    const uint16_t half = (uint16_t)(count >> 1);
    if (@P@_ROM@bits@(at + half) <= q) {
      at += half + 1;
      count = (uint16_t)(count - half - 1);
    } else {
      count = half;
    }
  }
  return (uint16_t)(at - first);
}
)",
              values);
}

std::string bearing_code(const link::BoardTables& tables) {
  const int half = tables.link.bearing_codes << tables.fine_log2 >> 1;
  const int offset = tables.fine_log2 == 0 ? 0 : 1;
  Values values = common_values(tables);
  values.emplace_back("count", std::to_string(tables.tangents.size()));
  values.emplace_back("tangents", number_lines(tables.tangents));
  values.emplace_back("quarter", std::to_string(half / 2 - offset));
  values.emplace_back("half", std::to_string(half - offset));
  values.emplace_back("full", std::to_string(2 * half - offset));
  values.emplace_back("round", std::to_string((1 << tables.fine_log2) >> 1));
  values.emplace_back("fine", std::to_string(tables.fine_log2));
  const bool empty = tables.tangents.empty();
  std::string code;
  if (!empty) {
    code = fill(R"(
/* Tangents of the ends of the bearing cells in the first eighth of a turn, 16 fraction bits. */
static const uint16_t @p@_tangents[@count@] @P@_ROM = {
@tangents@};
)",
                values);
  }
  code += fill(R"(
/* The bearing code of direction (x, y) in the robot's axes: folded into the first eighth of a turn,
 * looked up by slope there, unfolded. */
static inline uint16_t @p@_bearing(int16_t x, int16_t y) {
  uint16_t along = (uint16_t)(x < 0 ? -x : x);
  uint16_t across = (uint16_t)(y < 0 ? -y : y);
  const uint8_t steep = across > along;
  uint16_t cell = 0;
  if (steep) {
    const uint16_t other = along;
    along = across;
    across = other;
  }
)",
               values);
  if (!empty) {
    code += fill(R"(  {
    const uint16_t *at = @p@_tangents;
    uint8_t count = @count@;
    while (count != 0u) {
      const uint8_t half = count >> 1;
      if ((uint16_t)(((uint32_t)along * @P@_ROM16(at + half)) >> 16) < across) {
        at += half + 1;
        count = (uint8_t)(count - half - 1);
      } else {
        count = half;
      }
    }
    cell = (uint16_t)(at - @p@_tangents);
  }
)",
                 values);
    if (tables.tangents.size() > 255) {
      for (std::size_t at = 0; (at = code.find("uint8_t count", at)) != std::string::npos; ++at)
        code.replace(at, 7, "uint16_t");
      for (std::size_t at = 0; (at = code.find("const uint8_t half", at)) != std::string::npos;
           ++at)
        code.replace(at + 6, 7, "uint16_t");
      for (std::size_t at = 0; (at = code.find("(uint8_t)(count", at)) != std::string::npos; ++at)
        code.replace(at + 1, 7, "uint16_t");
    }
  }
  code += fill(R"(  if (steep) cell = (uint16_t)(@quarter@u - cell);
  if (x < 0) cell = (uint16_t)(@half@u - cell);
  if (y < 0) cell = (uint16_t)(@full@u - cell);
)",
               values);
  if (tables.fine_log2 > 0)
    code += fill("  cell = (uint16_t)((cell + @round@u) >> @fine@);\n", values);
  return code + fill("  return cell >= @P@_BEARINGS ? (uint16_t)(cell - @P@_BEARINGS) : cell;\n}\n",
                     values);
}

std::string report_code(const link::BoardTables& tables) {
  const link::ReportLayout report =
      link::report_layout(tables.link, static_cast<int>(tables.objects.size()));
  Values values = common_values(tables);
  values.emplace_back("body", std::to_string(report.bytes - report.check_bytes));
  std::string code = fill(R"(
/* Writes the report of all objects, @P@_REPORT_BYTES bytes. */
static inline void @p@_report(const @p@_codes *codes, uint8_t *out) {
  uint8_t *to = out;
  uint8_t i;
  for (i = 0; i < @P@_OBJECTS; ++i) {
)",
                          values);
  if (report.bearing_bytes == 2) code += "    *to++ = (uint8_t)(codes[i].bearing >> 7);\n";
  code += "    *to++ = (uint8_t)(codes[i].bearing & 127u);\n";
  if (report.range_bytes == 2) code += "    *to++ = (uint8_t)(codes[i].range >> 7);\n";
  code +=
      "    *to++ = (uint8_t)(codes[i].range & 127u);\n  }\n  out[0] = (uint8_t)(out[0] | 128u);\n";
  if (tables.link.check == CheckByte::sum7) {
    code += fill(R"(  {
    uint8_t sum = 0;
    for (i = 0; i < @body@u; ++i) sum = (uint8_t)(sum + out[i]);
    *to = (uint8_t)(sum & 127u);
  }
)",
                 values);
  } else if (tables.link.check == CheckByte::crc8) {
    code += fill(R"(  {
    uint8_t crc = 0;
    for (i = 0; i < @body@u; ++i) {
      uint8_t bit;
      crc = (uint8_t)(crc ^ out[i]);
      for (bit = 0; bit < 8u; ++bit) crc = (uint8_t)((crc << 1) ^ ((crc & 128u) ? 7 : 0));
    }
    *to++ = (uint8_t)(crc >> 7);
    *to = (uint8_t)(crc & 127u);
  }
)",
                 values);
  }
  return code + "}\n";
}

std::string mask_code(const link::BoardTables& tables) {
  if (tables.mask.empty()) return {};
  std::vector<int> runs;
  std::vector<std::size_t> first;
  for (std::size_t i = 0; i < tables.mask.size(); ++i) {
    while (first.size() <= tables.mask[i].row) first.push_back(i);
    runs.push_back(tables.mask[i].from);
    runs.push_back(tables.mask[i].to);
  }
  while (first.size() <= static_cast<std::size_t>(tables.height_px))
    first.push_back(tables.mask.size());
  Values values = common_values(tables);
  values.emplace_back("count", std::to_string(runs.size()));
  values.emplace_back("runs", number_lines(runs));
  values.emplace_back("rows", std::to_string(first.size()));
  values.emplace_back("first", number_lines(first));
  values.emplace_back("height", std::to_string(tables.height_px));
  return fill(R"(
/* Runs of pixels that may show the floor: first column, column after the last; and the index of each
 * row's first run. */
static const uint16_t @p@_mask_runs[@count@] @P@_ROM = {
@runs@};
static const uint16_t @p@_mask_rows[@rows@] @P@_ROM = {
@first@};

/* 1 where pixel (u, v) may show the floor. */
static inline uint8_t @p@_visible(uint16_t u, uint16_t v) {
  uint16_t i;
  if (v >= @height@u) return 0;
  for (i = @P@_ROM16(@p@_mask_rows + v); i < @P@_ROM16(@p@_mask_rows + v + 1); ++i) {
    if (u < @P@_ROM16(@p@_mask_runs + 2u * i)) return 0;
    if (u < @P@_ROM16(@p@_mask_runs + 2u * i + 1u)) return 1;
  }
  return 0;
}
)",
              values);
}

/// A box's ends in the scale that the board's library uses, rounded outward.
std::array<int, 6> in_scale(const colour::HsvBox& box, HsvScale scale) {
  std::array<int, 6> ends = {box.h.from, box.h.to, box.s[0], box.s[1], box.v[0], box.v[1]};
  for (std::size_t i = 0; i < 6; ++i) {
    double value = ends[i];
    if (scale == HsvScale::full_byte && i < 2) value *= 255.0 / 179.0;
    if (scale == HsvScale::degrees_percent) value *= i < 2 ? 2.0 : 100.0 / 255.0;
    // A hue of the 0-179 scale covers two degrees.
    if (scale == HsvScale::degrees_percent && i == 1) value += 1.0;
    ends[i] = static_cast<int>(i % 2 == 0 ? std::floor(value) : std::ceil(value));
  }
  return ends;
}

std::string colour_code(const link::BoardTables& tables) {
  std::string code;
  Values values = common_values(tables);
  if (!tables.sets.empty()) {
    static constexpr const char* kScales[] = {
        "h 0-179, s and v 0-255", "h, s and v 0-255", "h in degrees, s and v in percent"};
    std::vector<int> boxes;
    for (const colour::ThresholdSet& set : tables.sets) {
      int object = 0;
      for (std::size_t i = 0; i < tables.objects.size(); ++i) {
        if (tables.objects[i].name == set.object) object = static_cast<int>(i);
      }
      for (const colour::HsvBox& box : set.boxes) {
        boxes.push_back(object);
        for (const int end : in_scale(box, tables.hsv_scale)) boxes.push_back(end);
      }
    }
    values.emplace_back("boxes", number_lines(boxes));
    values.emplace_back("numbers", std::to_string(boxes.size()));
    values.emplace_back("count", std::to_string(boxes.size() / 7));
    values.emplace_back("scale", kScales[static_cast<std::size_t>(tables.hsv_scale)]);
    code += fill(R"(
/* Threshold boxes: object, h from, h to, s from, s to, v from, v to; ends included; h from > h to
 * passes the end of the circle. Scale: @scale@. */
#define @P@_BOXES @count@u
static const uint16_t @p@_boxes[@numbers@] @P@_ROM = {
@boxes@};
)",
                 values);
  }
  if (!tables.classes.classes.empty()) {
    const std::vector<std::uint8_t> packed = link::packed_classes(tables);
    const int bits = link::class_bits(tables);
    values.emplace_back("bytes", std::to_string(packed.size()));
    values.emplace_back("classes", number_lines(packed));
    values.emplace_back("r", std::to_string(8 - tables.classes.bits_r));
    values.emplace_back("g", std::to_string(8 - tables.classes.bits_g));
    values.emplace_back("b", std::to_string(8 - tables.classes.bits_b));
    values.emplace_back("gb_bits", std::to_string(tables.classes.bits_g + tables.classes.bits_b));
    values.emplace_back("b_bits", std::to_string(tables.classes.bits_b));
    values.emplace_back("bits", std::to_string(bits));
    values.emplace_back("per_byte_log2",
                        std::to_string(bits == 8   ? 0
                                       : bits == 4 ? 1
                                       : bits == 2 ? 2
                                                   : 3));
    values.emplace_back("per_byte_mask", std::to_string(8 / bits - 1));
    values.emplace_back("mask", std::to_string((1 << bits) - 1));
    code += fill(R"(
/* Class of each colour, @bits@ bits an entry, lowest bits first: 0 none, k the object k - 1. Leave it
 * out with @P@_WITHOUT_CLASSES. */
#ifndef @P@_WITHOUT_CLASSES
static const uint8_t @p@_classes[@bytes@] @P@_ROM = {
@classes@};

static inline uint8_t @p@_class_of(uint8_t r, uint8_t g, uint8_t b) {
  const uint32_t entry = ((uint32_t)(r >> @r@) << @gb_bits@) | ((uint32_t)(g >> @g@) << @b_bits@) |
                         (uint32_t)(b >> @b@);
  const uint8_t byte = @P@_ROM8(@p@_classes + (entry >> @per_byte_log2@));
  return (uint8_t)((byte >> ((entry & @per_byte_mask@u) * @bits@u)) & @mask@u);
}
#endif
)",
                 values);
  }
  return code;
}

}  // namespace

std::string camera_header(const link::BoardTables& tables) {
  Values values = common_values(tables);
  values.emplace_back("cu", std::to_string(tables.centre_u_sub));
  values.emplace_back("cv", std::to_string(tables.centre_v_sub));
  values.emplace_back("width", std::to_string(tables.width_px));
  values.emplace_back("height", std::to_string(tables.height_px));
  std::string out = "/* For the camera board.\n";
  for (const std::string& line : about(tables)) out += fmt::format(" * {}\n", line);
  out += fill(R"( *
 * Positions are in 1/8 px: u_sub = 8 u, the centre of the top-left pixel is (0, 0); at most one pixel
 * outside the image. No floats, no division, no square root, no memory but the tables.
 */
#ifndef @P@_CAMERA_H
#define @P@_CAMERA_H

)",
              values);
  out += c_common(tables);
  out += fill(R"(
#define @P@_WIDTH_PX @width@u
#define @P@_HEIGHT_PX @height@u
#define @P@_CENTRE_U_SUB @cu@ /* 1/8 px */
#define @P@_CENTRE_V_SUB @cv@ /* 1/8 px */
)",
              values);
  bool narrow = false;
  bool wide = false;
  for (const RangeLayout& layout : tables.layouts) (layout.wide ? wide : narrow) = true;
  if (narrow) out += search_code(tables, "16");
  if (wide) out += search_code(tables, "32");
  out += bearing_code(tables);
  for (std::size_t i = 0; i < tables.layouts.size(); ++i) out += layout_code(tables, i);
  out += fill(R"(
/* Codes of object number `object` measured at (u_sub, v_sub), 1/8 px. */
static inline @p@_codes @p@_encode(uint8_t object, int16_t u_sub, int16_t v_sub) {
)",
              values);
  if (tables.layouts.size() == 1) {
    out += fill("  (void)object;\n  return @p@_encode_0(u_sub, v_sub);\n}\n", values);
  } else {
    out += "  switch (object) {\n";
    for (std::size_t l = 1; l < tables.layouts.size(); ++l) {
      for (std::size_t i = 0; i < tables.objects.size(); ++i) {
        if (tables.objects[i].layout == static_cast<int>(l))
          out += fmt::format("    case {}:\n", i);
      }
      out +=
          fmt::format("      return {}_encode_{}(u_sub, v_sub);\n", identifier(tables.prefix), l);
    }
    out += fill("    default:\n      return @p@_encode_0(u_sub, v_sub);\n  }\n}\n", values);
  }
  out += fill(R"(
/* Codes of an object that is not in the frame. */
static inline @p@_codes @p@_not_seen(void) {
  @p@_codes codes;
  codes.range = @P@_NOT_SEEN;
  codes.bearing = 0;
  return codes;
}
)",
              values);
  out += report_code(tables) + mask_code(tables) + colour_code(tables);
  return out + fill("\n#endif /* @P@_CAMERA_H */\n", values);
}

}  // namespace rondel::firmware
