#pragma once

#include <string>
#include <utility>
#include <vector>

#include "calib/link/board_tables.h"

namespace rondel::firmware {

using Values = std::vector<std::pair<std::string, std::string>>;

/// 'p' and 'P': the prefix in lower and upper case as emitted; 'id': identity as 8 hex digits.
[[nodiscard]] Values common_values(const link::BoardTables& tables);

/// What both C headers begin with, once: where tables live, and how they are read there. Uses 'p',
/// 'P' and 'id'.
[[nodiscard]] std::string c_common(const link::BoardTables& tables);

/// "Tables of 'Quay', identity 0123ABCD" and what the report is made of, one line each.
[[nodiscard]] std::vector<std::string> about(const link::BoardTables& tables);

}  // namespace rondel::firmware
