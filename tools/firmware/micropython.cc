#include <fmt/format.h>

#include "calib/link/link_plan.h"
#include "tools/firmware/common.h"
#include "tools/firmware/emit.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {
namespace {

using link::RangeLayout;
using link::Straightening;

std::vector<std::uint8_t> little_endian(const std::vector<std::uint16_t>& values) {
  std::vector<std::uint8_t> bytes;
  for (const std::uint16_t v : values) {
    bytes.push_back(static_cast<std::uint8_t>(v & 255));
    bytes.push_back(static_cast<std::uint8_t>(v >> 8));
  }
  return bytes;
}

std::string layout_line(const RangeLayout& layout) {
  static constexpr const char* kKinds[] = {"none", "harmonic", "sectors", "grid"};
  std::string harmonic;
  for (const auto& c : layout.harmonic) harmonic += fmt::format("({}, {}), ", c[0], c[1]);
  std::vector<std::uint8_t> edges;
  for (const std::uint32_t e : layout.edges) {
    for (int i = 0; i < (layout.wide ? 4 : 2); ++i)
      edges.push_back(static_cast<std::uint8_t>(e >> (8 * i)));
  }
  std::vector<std::uint8_t> grid(layout.grid.begin(), layout.grid.end());
  return fmt::format("    ('{}', ({}), {}, ({}, {}, {}), {}, {},\n     {}, {}),\n",
                     kKinds[static_cast<std::size_t>(layout.kind)],
                     harmonic,
                     layout.sectors,
                     layout.grid_log2_px + 3,
                     layout.grid_columns,
                     layout.grid_rows,
                     layout.edge_shift,
                     layout.wide ? 4 : 2,
                     python_bytes(edges),
                     python_bytes(grid));
}

}  // namespace

std::string micropython_module(const link::BoardTables& tables) {
  const link::ReportLayout report =
      link::report_layout(tables.link, static_cast<int>(tables.objects.size()));
  const auto codes = static_cast<std::uint32_t>(tables.link.bearing_codes);
  const int half = tables.link.bearing_codes << tables.fine_log2 >> 1;
  const int offset = tables.fine_log2 == 0 ? 0 : 1;
  Values values = common_values(tables);
  const auto add = [&values](const char* key, auto value) {
    values.emplace_back(key, fmt::format("{}", value));
  };
  std::string head;
  for (const std::string& line : about(tables)) head += fmt::format("# {}\n", line);
  add("about", head);
  std::string names;
  std::string of_object;
  for (const link::BoardObject& object : tables.objects) {
    names += quoted(object.name) + ", ";
    of_object += fmt::format("{}, ", object.layout);
  }
  add("names", names);
  add("of_object", of_object);
  add("range_codes", tables.range_codes());
  add("unit", tables.range_unit_um);
  add("bearings", tables.link.bearing_codes);
  add("beyond", tables.beyond_code());
  add("not_seen", tables.not_seen_code());
  add("cu", tables.centre_u_sub);
  add("cv", tables.centre_v_sub);
  add("near_shift", tables.near_shift);
  add("near_half", (1 << tables.near_shift) >> 1);
  add("slow_shift", tables.slow_shift);
  add("slow_most", tables.slow_most);
  add("c", tables.turn_c);
  add("s", tables.turn_s);
  add("minus", tables.mirrored ? "" : "\n    y = -y");
  add("quarter", half / 2 - offset);
  add("half", half - offset);
  add("full", 2 * half - offset);
  add("round", (1 << tables.fine_log2) >> 1);
  add("fine", tables.fine_log2);
  add("step", ((36000U << 16) + codes / 2) / codes);
  add("report_bytes", report.bytes);
  add("check_bytes", report.check_bytes);
  add("per_bearing", report.bearing_bytes);
  add("per_range", report.range_bytes);
  add("check",
      tables.link.check == CheckByte::sum7 ? "    return bytes([sum(body) & 127])"
      : tables.link.check == CheckByte::crc8
          ? "    crc = 0\n"
            "    for byte in body:\n"
            "        crc ^= byte\n"
            "        for _ in range(8):\n"
            "            crc = ((crc << 1) ^ (7 if crc & 128 else 0)) & 255\n"
            "    return bytes([crc >> 7, crc & 127])"
          : "    return b''");
  add("tangents_count", tables.tangents.size());
  if (tables.tangent_bits == 8) {
    add("product", "slope * _tangents[at]");
    add("normal",
        "    if not along:\n        return 0\n"
        "    while along < 32768:\n        along <<= 1\n        across <<= 1\n"
        "    slope = along >> 8\n");
    add("tangents",
        python_bytes(std::vector<std::uint8_t>(tables.tangents.begin(), tables.tangents.end())));
  } else {
    add("product", "(along * (_tangents[2 * at] | _tangents[2 * at + 1] << 8)) >> 16");
    add("normal", "");
    add("tangents", python_bytes(little_endian(tables.tangents)));
  }
  add("ranges", python_bytes(little_endian(tables.range_units)));
  std::string layouts;
  for (const RangeLayout& layout : tables.layouts) layouts += layout_line(layout);
  add("layouts", layouts);
  std::vector<std::uint16_t> runs;
  for (const link::MaskRun& run : tables.mask) {
    runs.push_back(run.row);
    runs.push_back(run.from);
    runs.push_back(run.to);
  }
  add("runs", python_bytes(little_endian(runs)));
  std::string sets;
  for (const colour::ThresholdSet& set : tables.sets) {
    sets += fmt::format("    ({}, (", quoted(set.object));
    for (const colour::HsvBox& box : set.boxes) {
      sets += fmt::format("({}, {}, {}, {}, {}, {}), ",
                          box.h.from,
                          box.h.to,
                          box.s[0],
                          box.s[1],
                          box.v[0],
                          box.v[1]);
    }
    sets += ")),\n";
  }
  add("sets", sets);
  return fill(R"(@about@#
# encode(object, u_sub, v_sub): codes of an object measured at a position in 1/8 px (u_sub = 8 u).
# decode(codes): (range in metres, bearing in degrees), or None for 'not seen' and 'beyond'.
# Integers only but for the answer of decode.

IDENTITY = 0x@id@
OBJECTS = (@names@)
BEYOND = @beyond@
NOT_SEEN = (@not_seen@, 0)
REPORT_BYTES = @report_bytes@
RANGE_UNIT_UM = @unit@

# Threshold boxes of each object: h from, h to, s from, s to, v from, v to, ends included;
# h 0-179, s and v 0-255; h from > h to passes the end of the circle.
BOXES = (
@sets@)

_tangents = @tangents@
_ranges = @ranges@
# Runs of pixels that may show the floor: row, first column, column after the last; 16 bits each.
MASK_RUNS = @runs@
_layout_of = (@of_object@)
# Kind, harmonics, sectors, grid (log2 of the step, columns, rows), shift, width of a breakpoint,
# breakpoints, grid nodes.
_layouts = (
@layouts@)


def _slow(c, s):
    return c[0] + ((c[1] * s) >> 7)


def _node(grid, i):
    value = grid[i]
    return value - 256 if value > 127 else value


def _moved(grid, upper, lower, fu, fv, log2):
    size = 1 << log2
    above = _node(grid, upper) * (size - fu) + _node(grid, upper + 2) * fu
    below = _node(grid, lower) * (size - fu) + _node(grid, lower + 2) * fu
    return (above * (size - fv) + below * fv) >> (2 * log2)


def _bearing(du, dv):
    x = (@c@ * du + @s@ * dv) >> 8
    y = (@c@ * dv - @s@ * du) >> 8@minus@
    along = abs(x)
    across = abs(y)
    steep = across > along
    if steep:
        along, across = across, along
@normal@    cell = 0
    count = @tangents_count@
    while count:
        half = count >> 1
        at = cell + half
        if @product@ < across:
            cell += half + 1
            count -= half + 1
        else:
            count = half
    if steep:
        cell = @quarter@ - cell
    if x < 0:
        cell = @half@ - cell
    if y < 0:
        cell = @full@ - cell
    cell = (cell + @round@) >> @fine@
    return cell - @bearings@ if cell >= @bearings@ else cell


def encode(object, u_sub, v_sub):
    kind, harmonic, sectors, shape, shift, width, edges, grid = _layouts[_layout_of[object]]
    du = u_sub - @cu@
    dv = v_sub - @cv@
    if kind == 'grid':
        log2, columns, rows = shape
        cu = min(max(u_sub, 0), ((columns - 1) << log2) - 1)
        cv = min(max(v_sub, 0), ((rows - 1) << log2) - 1)
        fu = cu & ((1 << log2) - 1)
        fv = cv & ((1 << log2) - 1)
        upper = 2 * ((cv >> log2) * columns + (cu >> log2))
        lower = upper + 2 * columns
        du += _moved(grid, upper, lower, fu, fv, log2)
        dv += _moved(grid, upper + 1, lower + 1, fu, fv, log2)
    steps = (du * du >> shift) + (dv * dv >> shift)
    bend = 0
    if kind == 'harmonic' or kind == 'sectors':
        s = min(steps >> (@slow_shift@ - shift), @slow_most@)
        if kind == 'harmonic':
            bend = (_slow(harmonic[0], s) * ((du + @near_half@) >> @near_shift@) +
                    _slow(harmonic[1], s) * ((dv + @near_half@) >> @near_shift@))
            bend = bend >> (shift - @near_shift@) if shift >= @near_shift@ else bend << (@near_shift@ - shift)
        du += _slow(harmonic[2], s)
        dv += _slow(harmonic[3], s)
    bearing = _bearing(du, dv)
    q = max(0, steps + bend)
    first = 0
    if kind == 'sectors':
        first = ((bearing * ((sectors << 16) // @bearings@)) >> 16) * @range_codes@
    low = 0
    count = @range_codes@
    while count:
        half = count >> 1
        at = width * (first + low + half)
        edge = edges[at] | edges[at + 1] << 8
        if width == 4:
            edge |= edges[at + 2] << 16 | edges[at + 3] << 24
        if edge <= q:
            low += half + 1
            count -= half + 1
        else:
            count = half
    return low, bearing


def decode_units(codes):
    """Range in RANGE_UNIT_UM and bearing in 1/100 degree, or None."""
    code, bearing = codes
    if not (0 <= code < @range_codes@ and 0 <= bearing < @bearings@):
        return None
    turn = (bearing * @step@ + 32768) >> 16
    if turn > 18000:
        turn -= 36000
    return _ranges[2 * code] | _ranges[2 * code + 1] << 8, turn


def decode(codes):
    units = decode_units(codes)
    if units is None:
        return None
    return units[0] * (RANGE_UNIT_UM * 1e-6), units[1] * 0.01


def _check(body):
@check@


def report(codes):
    """The report of all objects: codes in the order of OBJECTS."""
    body = bytearray()
    for code, bearing in codes:
        if @per_bearing@ == 2:
            body.append(bearing >> 7)
        body.append(bearing & 127)
        if @per_range@ == 2:
            body.append(code >> 7)
        body.append(code & 127)
    body[0] |= 128
    return bytes(body) + _check(body)


def read_report(data):
    """Codes of all objects, or None where the report does not check out."""
    if len(data) != REPORT_BYTES or data[0] < 128:
        return None
    for byte in data[1:]:
        if byte > 127:
            return None
    body = data[:len(data) - @check_bytes@]
    if _check(body) != bytes(data[len(body):]):
        return None
    at = 0
    codes = []
    for _ in OBJECTS:
        bearing = data[at] & 127
        at += 1
        if @per_bearing@ == 2:
            bearing = bearing << 7 | data[at]
            at += 1
        code = data[at]
        at += 1
        if @per_range@ == 2:
            code = code << 7 | data[at]
            at += 1
        codes.append((code, bearing))
    return codes


def visible(u, v):
    """True where pixel (u, v) may show the floor."""
    runs = MASK_RUNS
    if not runs:
        return True
    low = 0
    high = len(runs) // 6
    while low < high:  # the first run that does not end before (u, v)
        middle = (low + high) // 2
        at = 6 * middle
        row = runs[at] | runs[at + 1] << 8
        to = runs[at + 4] | runs[at + 5] << 8
        if row < v or (row == v and to <= u):
            low = middle + 1
        else:
            high = middle
    at = 6 * low
    if at >= len(runs):
        return False
    return runs[at] | runs[at + 1] << 8 == v and runs[at + 2] | runs[at + 3] << 8 <= u
)",
              values);
}

}  // namespace rondel::firmware
