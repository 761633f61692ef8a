#pragma once

#include <filesystem>

#include "tools/rondel/workspace.h"

namespace rondel::app::report {

/// Assembles results/report.html from what is under results/: one file that needs no other, the
/// verdict first, then a section for each step. Steps that have not been run say so and name their
/// command. Returns the path written.
std::filesystem::path write_report(const Workspace& workspace);

/// The same of a batch that was checked with the venue: its verdict and the check's section only,
/// to the batch's own results/report.html.
std::filesystem::path write_check_report(const Workspace& workspace, const Batch& batch);

}  // namespace rondel::app::report
