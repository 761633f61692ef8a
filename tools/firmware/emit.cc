#include "tools/firmware/emit.h"

#include <fmt/format.h>

#include "calib/base/file.h"
#include "calib/link/build_tables.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {

std::string range_csv(const link::BoardTables& tables) {
  const link::Codebook book = link::codebook_of(tables);
  std::string out = "range_code,from_m,to_m,range_m\n";
  for (std::size_t k = 0; k < tables.range_units.size(); ++k) {
    out += fmt::format("{},{:.5f},{:.5f},{:.5f}\n",
                       k,
                       book.edges_m[k],
                       book.edges_m[k + 1],
                       tables.range_units[k] * tables.range_unit_um * 1e-6);
  }
  return out;
}

std::string bearing_csv(const link::BoardTables& tables) {
  std::string out = "bearing_code,bearing_deg\n";
  for (int code = 0; code < tables.link.bearing_codes; ++code) {
    out += fmt::format("{},{:.2f}\n", code, 0.01 * link::bearing_cdeg(tables, code));
  }
  return out;
}

std::vector<Artefact> all_artefacts(const link::BoardTables& tables) {
  const std::string prefix = identifier(tables.prefix);
  const std::vector<std::uint8_t> packed = link::pack(tables);
  return {{prefix + "_camera.h", "C99, camera board", camera_header(tables)},
          {prefix + "_drive.h", "C99, drive board, also AVR", drive_header(tables)},
          {prefix + ".py", "MicroPython, both boards", micropython_module(tables)},
          {prefix + ".bin", "packed binary, for 'rondel send'", {packed.begin(), packed.end()}},
          {prefix + "_receiver.h", "C99, takes new tables over the line", receiver_header(prefix)},
          {prefix + "_ranges.csv", "range codes", range_csv(tables)},
          {prefix + "_bearings.csv", "bearing codes", bearing_csv(tables)}};
}

std::string manifest(const link::BoardTables& tables, const std::vector<Artefact>& artefacts) {
  std::string out = "# Tables for the boards: what was made, and from what.\n";
  out += fmt::format("venue: {}\n", yaml_quoted(tables.venue));
  out += fmt::format("identity: \"{:08X}\"\n", tables.identity);
  out += "objects:\n";
  for (std::size_t i = 0; i < tables.objects.size(); ++i) {
    out += fmt::format("  - {{index: {}, name: {}, height_mm: {:.1f}}}\n",
                       i,
                       yaml_quoted(tables.objects[i].name),
                       1e3 * tables.objects[i].height_m);
  }
  out += "files:\n";
  for (const Artefact& artefact : artefacts) {
    out += fmt::format("  - {{name: {}, what: {}, bytes: {}, sha256: \"{}\"}}\n",
                       yaml_quoted(artefact.name),
                       yaml_quoted(artefact.what),
                       artefact.bytes.size(),
                       sha256_hex(artefact.bytes));
  }
  return out;
}

}  // namespace rondel::firmware
