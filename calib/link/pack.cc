#include <fmt/format.h>

#include <algorithm>
#include <bit>
#include <cstddef>
#include <cstring>
#include <string_view>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/link/board_tables.h"
#include "calib/link/codebook.h"

namespace rondel::link {
namespace {

constexpr std::string_view kMagic = "RNDL";
constexpr std::uint32_t kVersion = 1;
constexpr std::size_t kHeaderBytes = 16;  // magic, version, length of the content, identity

class Writer {
 public:
  std::vector<std::uint8_t> bytes;
  template <class T>
  void put(T value) {
    const auto bits = static_cast<std::uint64_t>(value);
    for (std::size_t i = 0; i < sizeof(T); ++i)
      bytes.push_back(static_cast<std::uint8_t>(bits >> (8 * i)));
  }
  void put(double value) { put(std::bit_cast<std::uint64_t>(value)); }
  void put(bool value) { put(static_cast<std::uint8_t>(value ? 1 : 0)); }
  void put(const std::string& text) {
    put(static_cast<std::uint32_t>(text.size()));
    bytes.insert(bytes.end(), text.begin(), text.end());
  }
  template <class T>
  void put_all(const std::vector<T>& values) {
    put(static_cast<std::uint32_t>(values.size()));
    for (const T value : values) put(value);
  }
};

/// Reads what Writer wrote; whatever does not fit is an InputError.
class Reader {
 public:
  Reader(std::span<const std::uint8_t> bytes, const std::string& name)
      : bytes_(bytes), name_(name) {}

  [[noreturn]] void refuse(const std::string& what) const {
    throw InputError(name_, what + "; make the tables again with 'rondel tables'");
  }
  void need(bool good, std::string_view what) const {
    if (!good) refuse(fmt::format("not a usable table: {}", what));
  }
  template <class T>
  T get() {
    need(bytes_.size() - at_ >= sizeof(T), "it ends too early");
    std::uint64_t bits = 0;
    for (std::size_t i = 0; i < sizeof(T); ++i) {
      bits |= static_cast<std::uint64_t>(bytes_[at_++]) << (8 * i);
    }
    return static_cast<T>(bits);
  }
  double number() { return std::bit_cast<double>(get<std::uint64_t>()); }
  int whole(int low, int high, std::string_view what) {
    const auto value = get<std::int32_t>();
    need(value >= low && value <= high, what);
    return value;
  }
  /// A count of things of `size` bytes each at least, so that no count makes us reserve too much.
  std::size_t count(std::size_t size) {
    const auto n = get<std::uint32_t>();
    need(n <= (bytes_.size() - at_) / size, "it ends too early");
    return n;
  }
  std::string text() {
    std::string out;
    const std::size_t n = count(1);
    for (std::size_t i = 0; i < n; ++i) out += static_cast<char>(get<std::uint8_t>());
    return out;
  }
  template <class T>
  std::vector<T> all() {
    std::vector<T> out(count(sizeof(T)));
    for (T& value : out) value = get<T>();
    return out;
  }
  [[nodiscard]] bool at_end() const { return at_ == bytes_.size(); }

 private:
  std::span<const std::uint8_t> bytes_;
  std::size_t at_ = 0;
  const std::string& name_;
};

void put_layout(Writer& out, const RangeLayout& layout) {
  out.put(static_cast<std::uint8_t>(layout.kind));
  for (const auto& polynomial : layout.harmonic) {
    for (const std::int8_t c : polynomial) out.put(c);
  }
  out.put(layout.sectors);
  out.put(layout.grid_log2_px);
  out.put(layout.grid_columns);
  out.put(layout.grid_rows);
  out.put_all(layout.grid);
  out.put(layout.edge_shift);
  out.put(layout.wide);
  out.put_all(layout.edges);
}

RangeLayout get_layout(Reader& in, int range_codes) {
  RangeLayout layout;
  const auto kind = in.get<std::uint8_t>();
  in.need(kind <= static_cast<std::uint8_t>(Straightening::grid), "unknown layout");
  layout.kind = static_cast<Straightening>(kind);
  for (auto& polynomial : layout.harmonic) {
    polynomial = {in.get<std::int8_t>(), in.get<std::int8_t>()};
  }
  layout.sectors = in.whole(1, 64, "sectors");
  in.need(std::has_single_bit(static_cast<unsigned>(layout.sectors)), "sectors");
  layout.grid_log2_px = in.whole(0, 7, "grid step");
  layout.grid_columns = in.whole(0, kMostPixels + 2, "grid columns");
  layout.grid_rows = in.whole(0, kMostPixels + 2, "grid rows");
  layout.grid = in.all<std::int8_t>();
  in.need(
      layout.grid.size() == static_cast<std::size_t>(2 * layout.grid_columns * layout.grid_rows),
      "grid size");
  in.need(layout.kind != Straightening::grid || (layout.grid_columns > 1 && layout.grid_rows > 1),
          "grid size");
  layout.edge_shift = in.whole(0, 31, "shift");
  layout.wide = in.get<std::uint8_t>() != 0;
  layout.edges = in.all<std::uint32_t>();
  in.need(layout.edges.size() ==
              static_cast<std::size_t>(layout.sectors) * static_cast<std::size_t>(range_codes),
          "number of breakpoints");
  for (std::size_t i = 0; i + 1 < layout.edges.size(); ++i) {
    in.need((i + 1) % static_cast<std::size_t>(range_codes) == 0 ||
                layout.edges[i] <= layout.edges[i + 1],
            "breakpoints out of order");
  }
  return layout;
}

void put_box(Writer& out, const colour::HsvBox& box) {
  for (const int end : {box.h.from, box.h.to, box.s[0], box.s[1], box.v[0], box.v[1]}) {
    out.put(static_cast<std::uint8_t>(end));
  }
}

}  // namespace

std::vector<std::uint8_t> pack(const BoardTables& tables) {
  Writer out;
  out.put(tables.venue);
  out.put(tables.prefix);
  out.put(tables.width_px);
  out.put(tables.height_px);
  const LinkSpec& link = tables.link;
  out.put(link.baud);
  out.put(link.reports_per_second);
  out.put(link.bearing_codes);
  out.put(link.range_bits);
  out.put(link.near_m);
  out.put(link.far_m);
  out.put(static_cast<std::uint8_t>(link.check));
  out.put(static_cast<std::uint8_t>(link.measure));
  out.put(tables.range_unit_um);
  out.put_all(tables.range_units);
  out.put(tables.centre_u_sub);
  out.put(tables.centre_v_sub);
  out.put(tables.near_shift);
  out.put(tables.slow_shift);
  out.put(tables.slow_most);
  out.put(tables.turn_c);
  out.put(tables.turn_s);
  out.put(tables.mirrored);
  out.put(tables.fine_log2);
  out.put(tables.tangent_bits);
  out.put_all(tables.tangents);
  out.put(static_cast<std::uint32_t>(tables.layouts.size()));
  for (const RangeLayout& layout : tables.layouts) put_layout(out, layout);
  out.put(static_cast<std::uint32_t>(tables.objects.size()));
  for (const BoardObject& object : tables.objects) {
    out.put(object.name);
    out.put(object.height_m);
    out.put(object.layout);
  }
  out.put(static_cast<std::uint32_t>(tables.mask.size()));
  for (const MaskRun& run : tables.mask) {
    out.put(run.row);
    out.put(run.from);
    out.put(run.to);
  }
  out.put(tables.classes.classes.empty() ? std::uint8_t{0} : std::uint8_t{1});
  if (!tables.classes.classes.empty()) {
    out.put(tables.classes.bits_r);
    out.put(tables.classes.bits_g);
    out.put(tables.classes.bits_b);
    for (const std::uint8_t byte : packed_classes(tables)) out.put(byte);
  }
  out.put(static_cast<std::uint32_t>(tables.sets.size()));
  for (const colour::ThresholdSet& set : tables.sets) {
    out.put(set.object);
    out.put(static_cast<std::uint32_t>(set.boxes.size()));
    for (const colour::HsvBox& box : set.boxes) put_box(out, box);
  }
  out.put(static_cast<std::uint8_t>(tables.hsv_scale));

  const std::string content(out.bytes.begin(), out.bytes.end());
  Writer whole;
  whole.bytes.assign(kMagic.begin(), kMagic.end());
  whole.put(kVersion);
  whole.put(static_cast<std::uint32_t>(content.size()));
  whole.put(crc32(content));
  whole.bytes.insert(whole.bytes.end(), content.begin(), content.end());
  return whole.bytes;
}

BoardTables unpack(std::span<const std::uint8_t> bytes, const std::string& name) {
  Reader head(bytes, name);
  head.need(bytes.size() >= kHeaderBytes && std::equal(kMagic.begin(), kMagic.end(), bytes.begin()),
            "it does not begin with 'RNDL'");
  head.get<std::uint32_t>();
  if (head.get<std::uint32_t>() != kVersion) head.refuse("made by another version of this program");
  head.need(head.get<std::uint32_t>() == bytes.size() - kHeaderBytes, "its length is wrong");
  const std::string content(bytes.begin() + kHeaderBytes, bytes.end());
  BoardTables tables;
  tables.identity = head.get<std::uint32_t>();
  head.need(tables.identity == crc32(content), "its checksum is wrong");

  Reader in(bytes.subspan(kHeaderBytes), name);
  tables.venue = in.text();
  tables.prefix = in.text();
  tables.width_px = in.whole(1, kMostPixels, "image width");
  tables.height_px = in.whole(1, kMostPixels, "image height");
  LinkSpec& link = tables.link;
  link.baud = in.whole(1, 1 << 30, "baud");
  link.reports_per_second = in.number();
  link.bearing_codes = in.whole(4, 16384, "bearing codes");
  link.range_bits = in.whole(2, 14, "range bits");
  link.near_m = in.number();
  link.far_m = in.number();
  link.check = static_cast<CheckByte>(std::min<int>(in.get<std::uint8_t>(), 2));
  link.measure = static_cast<CodebookMeasure>(std::min<int>(in.get<std::uint8_t>(), 3));
  tables.range_unit_um = in.get<std::uint32_t>();
  tables.range_units = in.all<std::uint16_t>();
  in.need(tables.range_codes() == range_codes(link), "number of range codes");
  tables.centre_u_sub = in.whole(-8 * kMostPixels, 16 * kMostPixels, "centre");
  tables.centre_v_sub = in.whole(-8 * kMostPixels, 16 * kMostPixels, "centre");
  tables.near_shift = in.whole(0, 15, "shift");
  tables.slow_shift = in.whole(0, 31, "shift");
  tables.slow_most = in.whole(0, 255, "slow variable");
  tables.turn_c = in.get<std::int16_t>();
  tables.turn_s = in.get<std::int16_t>();
  tables.mirrored = in.get<std::uint8_t>() != 0;
  tables.fine_log2 = in.whole(0, 3, "bearing cells");
  tables.tangent_bits = in.whole(8, 16, "tangents");
  tables.tangents = in.all<std::uint16_t>();
  const std::size_t layouts = in.count(64);
  for (std::size_t i = 0; i < layouts; ++i)
    tables.layouts.push_back(get_layout(in, tables.range_codes()));
  const std::size_t objects = in.count(16);
  for (std::size_t i = 0; i < objects; ++i) {
    BoardObject object;
    object.name = in.text();
    object.height_m = in.number();
    object.layout = in.whole(0, static_cast<int>(layouts) - 1, "layout of an object");
    tables.objects.push_back(object);
  }
  const std::size_t runs = in.count(6);
  for (std::size_t i = 0; i < runs; ++i) {
    MaskRun run;
    run.row = in.get<std::uint16_t>();
    run.from = in.get<std::uint16_t>();
    run.to = in.get<std::uint16_t>();
    in.need(run.row < tables.height_px && run.from < run.to && run.to <= tables.width_px,
            "mask run");
    tables.mask.push_back(run);
  }
  if (in.get<std::uint8_t>() != 0) {
    tables.classes.bits_r = in.whole(1, 8, "class table");
    tables.classes.bits_g = in.whole(1, 8, "class table");
    tables.classes.bits_b = in.whole(1, 8, "class table");
    const int bits = class_bits(tables);
    const std::size_t entries =
        std::size_t{1} << (tables.classes.bits_r + tables.classes.bits_g + tables.classes.bits_b);
    const auto per_byte = static_cast<std::size_t>(8 / bits);
    for (std::size_t i = 0; i < entries; i += per_byte) {
      unsigned byte = in.get<std::uint8_t>();
      for (std::size_t k = 0; k < per_byte; ++k) {
        const unsigned value = byte & ((1U << bits) - 1U);
        in.need(value <= tables.objects.size(), "class");
        tables.classes.classes.push_back(static_cast<std::uint8_t>(value));
        byte >>= bits;
      }
    }
  }
  const std::size_t sets = in.count(8);
  for (std::size_t i = 0; i < sets; ++i) {
    colour::ThresholdSet set;
    set.object = in.text();
    const std::size_t boxes = in.count(6);
    for (std::size_t k = 0; k < boxes; ++k) {
      std::array<int, 6> ends{};
      for (int& end : ends) end = in.get<std::uint8_t>();
      set.boxes.push_back({{ends[0], ends[1]}, {ends[2], ends[3]}, {ends[4], ends[5]}});
    }
    tables.sets.push_back(set);
  }
  tables.hsv_scale = static_cast<HsvScale>(std::min<int>(in.get<std::uint8_t>(), 2));
  in.need(in.at_end(), "something follows its end");
  return tables;
}

std::vector<std::uint8_t> packed_classes(const BoardTables& tables) {
  const int bits = class_bits(tables);
  const auto per_byte = static_cast<std::size_t>(8 / bits);
  std::vector<std::uint8_t> bytes((tables.classes.classes.size() + per_byte - 1) / per_byte);
  for (std::size_t i = 0; i < tables.classes.classes.size(); ++i) {
    bytes[i / per_byte] = static_cast<std::uint8_t>(
        bytes[i / per_byte] | tables.classes.classes[i] << (static_cast<int>(i % per_byte) * bits));
  }
  return bytes;
}

}  // namespace rondel::link
