#include <fmt/format.h>

#include <cmath>
#include <set>

#include "calib/link/link_plan.h"
#include "tools/firmware/common.h"
#include "tools/firmware/emit.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {
namespace {

using link::RangeLayout;
using link::Straightening;

bool is_zero(const std::array<std::int8_t, 2>& c) { return c[0] == 0 && c[1] == 0; }

/// A slow polynomial of `s` as an 8-bit expression.
std::string slow_expression(const std::array<std::int8_t, 2>& c) {
  if (c[1] == 0) return fmt::format("(int8_t)({})", c[0]);
  return fmt::format("(int8_t)({} + ((int16_t)((int8_t)({}) * s) >> 7))", c[0], c[1]);
}

/// x or y of the direction in the robot's axes: (c * u + s * v) >> 8 of the position, or the scaled
/// one (`pu`, `pv`) as it is where that is all the factors do.
std::string turned(std::int32_t a, std::int32_t b, std::int32_t scale) {
  if ((a == 0 && std::abs(b) == 256 * scale) || (b == 0 && std::abs(a) == 256 * scale)) {
    return fmt::format("{}{}", a + b < 0 ? "-" : "", a == 0 ? "pv" : "pu");
  }
  return fmt::format("((int32_t)({}) * du + (int32_t)({}) * dv) >> 8", a, b);
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
  const std::int32_t scale = 1 << (8 - tables.near_shift);
  const bool quarter = tables.turn_c == 0 || tables.turn_s == 0;
  const char* steps = layout.wide ? "uint32_t" : "uint16_t";
  code += fmt::format("  const {0} steps = ({0})({1}_square{2}(du) + {1}_square{2}(dv));\n",
                      steps,
                      identifier(tables.prefix),
                      layout.edge_shift);
  bool slow = false;
  for (std::size_t i = harmonic ? 0 : 2; i < 4; ++i) slow = slow || layout.harmonic[i][1] != 0;
  if (slow) {
    const int by = tables.slow_shift - layout.edge_shift;
    values.emplace_back("by", std::to_string(by));
    values.emplace_back("limit", std::to_string(((tables.slow_most + 1) << by) - 1));
    values.emplace_back("slow_most", std::to_string(tables.slow_most));
    code += fill(R"(  const uint8_t s = steps > @limit@u ? @slow_most@u : (uint8_t)(steps >> @by@);
)",
                 values);
  }
  std::string bend;
  for (const std::size_t axis : {std::size_t{0}, std::size_t{1}}) {
    if (!harmonic || is_zero(layout.harmonic[axis])) continue;
    if (!bend.empty()) bend += " +\n      ";
    bend += fmt::format("{} * (int8_t)({} >> 8)",
                        slow_expression(layout.harmonic[axis]),
                        axis == 0 ? "(int16_t)(pu + 128)" : "(int16_t)(pv + 128)");
  }
  if (!bend.empty() || quarter) {
    const bool moved = quarter && !(is_zero(layout.harmonic[2]) && is_zero(layout.harmonic[3]));
    code += fmt::format(
        "  {0}int16_t pu = (int16_t)(du * {1});\n  {0}int16_t pv = (int16_t)(dv * {1});\n",
        moved ? "" : "const ",
        scale);
  }
  if (bend.empty()) {
    code += fmt::format("  const {} q = steps;\n", steps);
  } else {
    const int by = layout.edge_shift - tables.near_shift;
    const char* sum = layout.wide ? "int32_t" : "int16_t";
    code += fmt::format("  const int16_t bend = (int16_t)({});\n", bend);
    code += fmt::format(
        "  const {0} bent = ({0})(({0})steps + {1});\n",
        sum,
        by >= 0 ? fmt::format("(bend >> {})", by) : fmt::format("(int32_t)bend * {}", 1 << -by));
    code += fmt::format("  const {0} q = bent < 0 ? 0u : ({0})bent;\n", steps);
  }
  for (const std::size_t axis : {std::size_t{0}, std::size_t{1}}) {
    const auto& c = layout.harmonic[axis + 2];
    if (is_zero(c)) continue;
    const char* name = quarter ? (axis == 0 ? "pu" : "pv") : (axis == 0 ? "du" : "dv");
    const std::int32_t factor = quarter ? scale : 1;
    code += c[1] == 0
                ? fmt::format("  {0} = (int16_t)({0} + {1});\n", name, c[0] * factor)
                : fmt::format(
                      "  {0} = (int16_t)({0} + {1} * {2});\n", name, slow_expression(c), factor);
  }
  const int sign = tables.mirrored ? 1 : -1;
  code += fmt::format("  codes.bearing = {}_bearing((int16_t)({}),\n      (int16_t)({}));\n",
                      identifier(tables.prefix),
                      turned(tables.turn_c, tables.turn_s, scale),
                      turned(-sign * tables.turn_s, sign * tables.turn_c, scale));
  std::string first = fmt::format("{}_edges_{}", identifier(tables.prefix), index);
  if (layout.kind == Straightening::sectors) {
    code += fmt::format(
        "  const uint16_t sector = (uint16_t)(((uint32_t)codes.bearing * {}UL) >> 16);\n",
        (layout.sectors << 16) / tables.link.bearing_codes);
    first += fmt::format(" + sector * {}u", tables.range_codes());
  }
  code += fmt::format("  codes.range = ({0}_code){0}_count{1}({2}, q);\n  return codes;\n}}\n",
                      identifier(tables.prefix),
                      layout.wide ? "32" : "16",
                      first);
  return code;
}

std::string square_code(const link::BoardTables& tables, int shift, bool wide) {
  Values values = common_values(tables);
  values.emplace_back("shift", std::to_string(shift));
  values.emplace_back("bits", wide ? "32" : "16");
  return fill(R"(
static inline uint@bits@_t @p@_square@shift@(int16_t d) {
  return (uint@bits@_t)((uint32_t)((int32_t)d * d) >> @shift@);
}
)",
              values);
}

/// The largest power of two that is at most n.
int power_below(int n) {
  int p = 1;
  while (2 * p <= n) p *= 2;
  return p;
}

std::string search_code(const link::BoardTables& tables, const char* bits) {
  const int power = power_below(tables.range_codes());
  Values values = common_values(tables);
  values.emplace_back("bits", bits);
  values.emplace_back("last", std::to_string(power - 1));
  values.emplace_back("rest", std::to_string(tables.range_codes() - power + 1));
  values.emplace_back("half", std::to_string(power / 2));
  values.emplace_back("step", power <= 256 ? "uint8_t" : "uint16_t");
  values.emplace_back("count", std::to_string(tables.range_codes()));
  return fill(R"(
/* How many of @count@ ascending breakpoints are at most q: halving, for any number of them. */
static inline uint16_t @p@_count@bits@(const uint@bits@_t *first, uint@bits@_t q) {
  const uint@bits@_t *at = first;
  @step@ step;
  if (@P@_ROM@bits@(at + @last@) <= q) at += @rest@;
  for (step = @half@; step != 0u; step = (@step@)(step >> 1)) {
    const uint@bits@_t *next = at + step;
    if (@P@_ROM@bits@(next - 1) <= q) at = next;
  }
  return (uint16_t)(at - first);
}
)",
              values);
}

std::string bearing_code(const link::BoardTables& tables) {
  const int half = tables.link.bearing_codes << tables.fine_log2 >> 1;
  const int offset = tables.fine_log2 == 0 ? 0 : 1;
  const int count = static_cast<int>(tables.tangents.size());
  const int power = count > 0 ? power_below(count) : 0;
  Values values = common_values(tables);
  values.emplace_back("bits", std::to_string(tables.tangent_bits));
  values.emplace_back("count", std::to_string(count));
  values.emplace_back("tangents", number_lines(tables.tangents));
  values.emplace_back("power", std::to_string(power));
  values.emplace_back("cell", 2 * half <= 255 ? "uint8_t" : "uint16_t");
  values.emplace_back("quarter", std::to_string(half / 2 - offset));
  values.emplace_back("half", std::to_string(half - offset));
  values.emplace_back("full", std::to_string(2 * half - offset));
  values.emplace_back("round", std::to_string((1 << tables.fine_log2) >> 1));
  values.emplace_back("fine", std::to_string(tables.fine_log2));
  const bool eight = tables.tangent_bits == 8;
  std::string code;
  if (count > 0) {
    code = fill(R"(
/* Tangents of the ends of the bearing cells in the first eighth of a turn, @bits@ fraction bits. */
static const uint@bits@_t @p@_tangents[@count@] @P@_ROM = {
@tangents@};
)",
                values);
  }
  values.emplace_back("product",
                      eight ? fill("(uint16_t)((uint16_t)slope * @P@_ROM8(", values)
                            : fill("(uint16_t)(((uint32_t)along * @P@_ROM16(", values));
  values.emplace_back("close", eight ? "))" : ")) >> 16)");
  code += fill(R"(
/* The bearing code of direction (x, y) in the robot's axes: folded into the first eighth of a turn,
 * looked up by slope there, unfolded. */
static inline @p@_code @p@_bearing(int16_t x, int16_t y) {
  uint16_t along = (uint16_t)(x < 0 ? -x : x);
  uint16_t across = (uint16_t)(y < 0 ? -y : y);
  @cell@ cell = 0;
  uint8_t steep = 0;
  if (across > along) {
    const uint16_t other = along;
    along = across;
    across = other;
    steep = 1;
  }
)",
               values);
  if (count > 0) {
    if (eight) {
      code +=
          "  if (along == 0u) return 0;\n"
          "  while (!(along & 0x8000u)) {\n"
          "    along = (uint16_t)(along << 1);\n"
          "    across = (uint16_t)(across << 1);\n"
          "  }\n";
    }
    code += "  {\n";
    if (eight) code += "    const uint8_t slope = (uint8_t)(along >> 8);\n";
    // A table of 2^n - 1 tangents needs no test of the index.
    values.emplace_back("inside",
                        2 * power == count + 1 ? "" : fmt::format("next <= {}u && ", count));
    code += fill(R"(    @cell@ step = @power@;
    do {
      const @cell@ next = (@cell@)(cell + step);
      if (@inside@@product@@p@_tangents + (@cell@)(next - 1u)@close@ < across) cell = next;
      step = (@cell@)(step >> 1);
    } while (step != 0u);
  }
)",
                 values);
  }
  code += fill(R"(  if (steep) cell = (@cell@)(@quarter@ - cell);
  if (x < 0) cell = (@cell@)(@half@ - cell);
  if (y < 0) cell = (@cell@)(@full@ - cell);
)",
               values);
  if (tables.fine_log2 > 0) {
    code += fill("  cell = (@cell@)((cell + @round@u) >> @fine@);\n", values);
  }
  return code + fill("  return (@p@_code)(cell >= @P@_BEARINGS ? cell - @P@_BEARINGS : cell);\n}\n",
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
  std::set<int> shifts;
  for (const RangeLayout& layout : tables.layouts) {
    if (shifts.insert(layout.edge_shift).second) {
      out += square_code(tables, layout.edge_shift, layout.wide);
    }
  }
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
