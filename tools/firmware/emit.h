#pragma once

#include <string>
#include <vector>

#include "calib/link/board_tables.h"

namespace rondel::firmware {

/// One file for a board. The same tables give the same bytes, on every day and every machine.
struct Artefact {
  std::string name;  ///< file name, made from the tables' prefix
  std::string what;  ///< one line for people
  std::string bytes;
};

/// C99 for the camera board: tables, and from positions in the image to a report. On AVR the tables
/// stay in flash.
[[nodiscard]] std::string camera_header(const link::BoardTables& tables);

/// C99 for the drive board: from a report's bytes to ranges and bearings.
[[nodiscard]] std::string drive_header(const link::BoardTables& tables);

/// Both directions for MicroPython; runs under Python 3 as well.
[[nodiscard]] std::string micropython_module(const link::BoardTables& tables);

/// C99 to build into firmware that takes new tables over its serial line ('rondel send').
[[nodiscard]] std::string receiver_header(const std::string& prefix);

/// The codes and what they stand for: range_code,from_m,to_m,range_m and bearing_code,bearing_deg.
[[nodiscard]] std::string range_csv(const link::BoardTables& tables);
[[nodiscard]] std::string bearing_csv(const link::BoardTables& tables);

/// All of them, with the packed binary.
[[nodiscard]] std::vector<Artefact> all_artefacts(const link::BoardTables& tables);

/// results/tables/manifest.yaml: what was made, identity, sizes, SHA-256.
[[nodiscard]] std::string manifest(const link::BoardTables& tables,
                                   const std::vector<Artefact>& artefacts);

}  // namespace rondel::firmware
