#pragma once

#include <cstdint>
#include <memory>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/base/progress.h"
#include "calib/colour/class_table.h"
#include "calib/colour/threshold_set.h"
#include "calib/link/build_tables.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

/// What the tables are made from, beside what people wrote.
struct TablesInputs {
  std::shared_ptr<const FloorMap> map;
  std::vector<std::uint8_t> mask;          ///< row by row; empty: the mask step has not been run
  std::vector<colour::ThresholdSet> sets;  ///< in the objects' order; empty: no colours yet
  colour::ClassTable classes;
};
[[nodiscard]] TablesInputs read_tables_inputs(const Workspace& workspace);

/// Makes the tables in memory, with a line's plan that fits (InputError where it does not).
[[nodiscard]] link::BuiltTables make_tables(const Workspace& workspace,
                                            const TablesInputs& inputs,
                                            Progress& progress);

/// `rondel tables --verify`: encodes and decodes every pixel of the mask through the packed binary
/// and holds it against the curve; adds "verify" to `outcome`, status 1 where a pixel is farther
/// off than the target allows.
void verify_tables(const Workspace& workspace, Outcome& outcome);

}  // namespace rondel::app
