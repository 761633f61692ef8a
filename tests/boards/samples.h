#pragma once

#include <algorithm>
#include <cstdint>
#include <span>
#include <string>
#include <vector>

#include "calib/link/build_tables.h"
#include "tests/calib/link/rig_map.h"
#include "tests/calib/optics/rigs.h"

namespace rondel::boards {

/// Tables of a rig with the given mirror tilt and decentring, prefix "t".
inline link::BoardTables tables_of(double tilt_deg,
                                   double decentre_px,
                                   double heading_deg,
                                   const LinkSpec& plan,
                                   bool two_heights) {
  optics::RigGeometry<double> rig = optics::testing::example_rig();
  rig.tilt_x = tilt_deg * kRadPerDeg;
  rig.tilt_y = 0.3 * tilt_deg * kRadPerDeg;
  rig.cu_px += decentre_px;
  rig.heading_rad = heading_deg * kRadPerDeg;
  rig.rim_radius_m = 0.030;
  const link::testing::RigMap map(rig);
  VenueSpec venue;
  venue.name = "Trial */ \"\\\n";
  venue.prefix = "t";
  venue.link = plan;
  venue.budget.table_bytes = 65536;
  venue.objects = {{"buoy", Shape::ball, 0.074, {}}};
  if (two_heights) venue.objects.push_back({"dock", Shape::box, 0.0, {}});
  CameraSpec camera;
  camera.width_px = 320;
  camera.height_px = 240;
  Progress progress;
  return link::build_tables(map, venue, camera, {}, {}, {}, {}, "venue.yaml", progress).tables;
}

/// The same curve with one run of breakpoints for each of four sectors.
inline link::BoardTables with_sectors(link::BoardTables tables) {
  for (link::RangeLayout& layout : tables.layouts) {
    layout.kind = link::Straightening::sectors;
    layout.sectors = 4;
    const std::vector<std::uint32_t> one = layout.edges;
    for (std::uint32_t sector = 1; sector < 4; ++sector) {
      for (const std::uint32_t edge : one)
        layout.edges.push_back(std::min(edge + 7 * sector, 65535U));
    }
  }
  return tables;
}

/// The same curve with breakpoints of 32 bits.
inline link::BoardTables with_wide(link::BoardTables tables) {
  for (link::RangeLayout& layout : tables.layouts) {
    for (std::uint32_t& edge : layout.edges) edge <<= layout.edge_shift;
    layout.edge_shift = 0;
    layout.wide = true;
  }
  return tables;
}

/// The same breakpoints behind a grid of some displacements.
inline link::BoardTables with_grid(link::BoardTables tables) {
  for (link::RangeLayout& layout : tables.layouts) {
    layout.kind = link::Straightening::grid;
    layout.harmonic = {};
    layout.grid_log2_px = 5;
    layout.grid_columns = 11;
    layout.grid_rows = 9;
    for (int i = 0; i < 2 * 11 * 9; ++i) {
      layout.grid.push_back(static_cast<std::int8_t>(i * 37 % 121 - 60));
    }
  }
  return tables;
}

/// What a board writes for a position: the report of all objects, then each one's decoded place.
inline void expect_at(const link::BoardTables& tables,
                      int u_sub,
                      int v_sub,
                      std::size_t decoded,
                      std::vector<std::uint8_t>& out) {
  std::vector<link::Codes> codes;
  for (std::size_t i = 0; i < tables.objects.size(); ++i) {
    codes.push_back(link::encode(tables, static_cast<int>(i), u_sub, v_sub));
  }
  const std::vector<std::uint8_t> report = link::report_bytes(tables, codes);
  out.insert(out.end(), report.begin(), report.end());
  for (std::size_t i = 0; i < decoded; ++i) {
    unsigned range = 0;
    unsigned turn = 0;
    if (codes[i].range_code < tables.range_codes()) {
      range = tables.range_units[static_cast<std::size_t>(codes[i].range_code)];
      turn = static_cast<unsigned>(link::bearing_cdeg(tables, codes[i].bearing_code));
    }
    for (const unsigned value : {range, range >> 8, turn, turn >> 8}) {
      out.push_back(static_cast<std::uint8_t>(value & 255U));
    }
  }
}

inline std::vector<std::uint8_t> expect_all(const link::BoardTables& tables) {
  std::vector<std::uint8_t> out;
  for (int v = 0; v < tables.height_px; ++v) {
    for (int u = 0; u < tables.width_px; ++u) {
      expect_at(tables, 8 * u, 8 * v, tables.objects.size(), out);
    }
  }
  return out;
}

/// What board_avr.c writes: positions from the same generator, one object decoded.
inline std::vector<std::uint8_t> expect_sample(const link::BoardTables& tables, int samples) {
  std::vector<std::uint8_t> out;
  std::uint32_t state = 1;
  const auto next = [&state](int size_px) {
    state = state * 1664525U + 1013904223U;
    return static_cast<int>((state >> 16) % (8U * static_cast<std::uint32_t>(size_px)));
  };
  for (int i = 0; i < samples; ++i) {
    const int u = next(tables.width_px);
    const int v = next(tables.height_px);
    expect_at(tables, u, v, 1, out);
  }
  return out;
}

}  // namespace rondel::boards
