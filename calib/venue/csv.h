#pragma once

#include <cstddef>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/problem.h"

namespace rondel {

struct Limits;

/// What the header of a CSV file must and may name, in any order.
struct CsvColumns {
  std::vector<std::string> required;
  std::vector<std::string> optional = {};
};

/// One row under its header.
class CsvRow {
 public:
  CsvRow(int line, std::string file, std::vector<Problem>& problems)
      : line_(line), file_(std::move(file)), problems_(&problems) {}

  [[nodiscard]] int line() const { return line_; }
  /// "marks.csv:14".
  [[nodiscard]] std::string where() const;
  /// The cell without blanks at its ends; "" where the column is not in the file.
  [[nodiscard]] const std::string& cell(std::string_view column) const;
  /// The cell as a number within limits; a cell that is empty or wrong is a problem.
  [[nodiscard]] std::optional<double> number(std::string_view column, const Limits& limits) const;
  /// The same, but an empty cell is no problem.
  [[nodiscard]] std::optional<double> number_if_any(std::string_view column,
                                                    const Limits& limits) const;
  /// Adds a problem: "column = value: what".
  void complain(std::string_view column, std::string_view what) const;

  void set(const std::string& column, std::string value) { cells_[column] = std::move(value); }

 private:
  int line_ = 0;
  std::string file_;
  std::vector<Problem>* problems_;
  std::map<std::string, std::string, std::less<>> cells_;
};

struct CsvTable {
  std::vector<CsvRow> rows;
};

/// Reads `text` (RFC 4180: cells between commas, quoted cells may hold commas, line breaks and
/// doubled quotes). A byte-order mark, Windows line endings and blank lines are fine. Unknown,
/// doubled and missing columns, rows with too few or too many cells and unclosed quotes are
/// problems with their line; such rows are left out.
[[nodiscard]] CsvTable read_csv(std::string_view text,
                                const std::string& file,
                                const CsvColumns& columns,
                                std::vector<Problem>& problems);

/// `cell` as it has to be written: quoted where needed.
[[nodiscard]] std::string csv_cell(std::string_view cell);

}  // namespace rondel
