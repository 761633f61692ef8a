#include "calib/venue/csv.h"

#include <fmt/format.h>

#include <algorithm>
#include <utility>

#include "calib/venue/words.h"
#include "calib/venue/yaml_map.h"

namespace rondel {
namespace {

struct RawRow {
  int line = 0;  ///< where it begins, 1-based
  std::vector<std::string> cells;
};

std::string_view trimmed(std::string_view text) {
  while (!text.empty() && (text.front() == ' ' || text.front() == '\t')) text.remove_prefix(1);
  while (!text.empty() && (text.back() == ' ' || text.back() == '\t')) text.remove_suffix(1);
  return text;
}

/// Splits into rows; blank lines are left out.
class CsvScanner {
 public:
  CsvScanner(std::string_view text, const std::string& file, std::vector<Problem>& problems)
      : text_(text), file_(file), problems_(problems) {}

  std::vector<RawRow> rows() {
    std::vector<RawRow> rows;
    while (at_ < text_.size()) {
      RawRow row = next_row();
      const bool blank = std::all_of(
          row.cells.begin(), row.cells.end(), [](const std::string& c) { return c.empty(); });
      if (!blank) rows.push_back(std::move(row));
    }
    return rows;
  }

 private:
  RawRow next_row() {
    RawRow row;
    row.line = line_;
    while (true) {
      row.cells.push_back(next_cell());
      if (at_ >= text_.size()) return row;
      const char c = text_[at_++];
      if (c == ',') continue;
      if (c == '\r' && at_ < text_.size() && text_[at_] == '\n') ++at_;
      ++line_;
      return row;
    }
  }

  std::string next_cell() {
    std::size_t look = at_;
    while (look < text_.size() && (text_[look] == ' ' || text_[look] == '\t')) ++look;
    if (look < text_.size() && text_[look] == '"') {
      at_ = look + 1;
      return quoted_cell();
    }
    const std::size_t end = std::min(text_.find_first_of(",\r\n", at_), text_.size());
    const std::string_view cell = trimmed(text_.substr(at_, end - at_));
    at_ = end;
    return std::string(cell);
  }

  std::string quoted_cell() {
    const int opened = line_;
    std::string cell;
    while (at_ < text_.size()) {
      const char c = text_[at_++];
      if (c == '"') {
        if (at_ < text_.size() && text_[at_] == '"') {
          cell += '"';
          ++at_;
          continue;
        }
        const std::size_t end = std::min(text_.find_first_of(",\r\n", at_), text_.size());
        if (!trimmed(text_.substr(at_, end - at_)).empty()) {
          problems_.push_back({fmt::format("{}:{}", file_, line_),
                               "text follows a closing quote; double a quote that belongs to the "
                               "text"});
        }
        at_ = end;
        return std::string(trimmed(cell));
      }
      if (c == '\n') ++line_;
      cell += c;
    }
    problems_.push_back(
        {fmt::format("{}:{}", file_, opened), "a quote is not closed; add the closing '\"'"});
    return cell;
  }

  std::string_view text_;
  const std::string& file_;
  std::vector<Problem>& problems_;
  std::size_t at_ = 0;
  int line_ = 1;
};

/// The header's columns; empty where the file cannot be used.
std::vector<std::string> checked_header(const RawRow& header,
                                        const std::string& file,
                                        const CsvColumns& columns,
                                        std::vector<Problem>& problems) {
  std::vector<std::string> known = columns.required;
  known.insert(known.end(), columns.optional.begin(), columns.optional.end());
  const std::string where = fmt::format("{}:{}", file, header.line);
  const std::size_t before = problems.size();
  if (header.cells.size() == 1 && known.size() > 1) {
    const std::string& only = header.cells.front();
    for (const char separator : {';', '\t'}) {
      if (only.find(separator) == std::string::npos) continue;
      problems.push_back({where,
                          fmt::format("the columns are separated by {}; save the file with commas",
                                      separator == ';' ? "';'" : "tabs")});
      return {};
    }
  }
  const auto is_known = [&](const std::string& name) {
    return std::find(known.begin(), known.end(), name) != known.end();
  };
  if (std::none_of(header.cells.begin(), header.cells.end(), is_known)) {
    problems.push_back({where,
                        fmt::format("the header is missing; the first line must be {}",
                                    fmt::join(columns.required, ","))});
    return {};
  }
  for (auto name = header.cells.begin(); name != header.cells.end(); ++name) {
    if (!is_known(*name)) {
      problems.push_back(
          {where,
           fmt::format("column '{}': unknown column{}", quotable(*name), hint_for(*name, known))});
    } else if (std::find(header.cells.begin(), name, *name) != name) {
      problems.push_back({where, fmt::format("column '{}' is there twice; keep one", *name)});
    }
  }
  for (const std::string& name : columns.required) {
    if (std::find(header.cells.begin(), header.cells.end(), name) == header.cells.end()) {
      problems.push_back({where,
                          fmt::format("column '{}' is missing; the header must name {}",
                                      name,
                                      fmt::join(columns.required, ","))});
    }
  }
  return problems.size() == before ? header.cells : std::vector<std::string>{};
}

}  // namespace

std::string CsvRow::where() const { return fmt::format("{}:{}", file_, line_); }

const std::string& CsvRow::cell(std::string_view column) const {
  static const std::string kNone;
  const auto found = cells_.find(column);
  return found == cells_.end() ? kNone : found->second;
}

void CsvRow::complain(std::string_view column, std::string_view what) const {
  const std::string& value = cell(column);
  problems_->push_back({where(),
                        value.empty() ? fmt::format("{} {}", column, what)
                                      : fmt::format("{} = {}: {}", column, quotable(value), what)});
}

std::optional<double> CsvRow::number_if_any(std::string_view column, const Limits& limits) const {
  const std::string& text = cell(column);
  if (text.empty()) return std::nullopt;
  const auto value = parse_number(text);
  if (!value) {
    complain(column, fmt::format("{}; it {}", why_no_number(text), text_of(limits)));
    return std::nullopt;
  }
  const bool low_enough = limits.above_low ? *value > limits.low : *value >= limits.low;
  if (!low_enough || !(*value <= limits.high)) {
    complain(column, text_of(limits));
    return std::nullopt;
  }
  return value;
}

std::optional<double> CsvRow::number(std::string_view column, const Limits& limits) const {
  if (cell(column).empty()) {
    complain(column, fmt::format("is empty; it {}", text_of(limits)));
    return std::nullopt;
  }
  return number_if_any(column, limits);
}

CsvTable read_csv(std::string_view text,
                  const std::string& file,
                  const CsvColumns& columns,
                  std::vector<Problem>& problems) {
  CsvTable table;
  constexpr std::string_view kByteOrderMark = "\xEF\xBB\xBF";
  if (text.substr(0, 3) == kByteOrderMark) text.remove_prefix(3);
  if (text.find('\0') != std::string_view::npos) {
    problems.push_back({file, "holds zero bytes; save it as plain text (UTF-8)"});
    return table;
  }
  const std::size_t before = problems.size();
  const std::vector<RawRow> rows = CsvScanner(text, file, problems).rows();
  if (problems.size() != before) return table;
  if (rows.empty()) {
    problems.push_back(
        {file,
         fmt::format("is empty; its first line must be {}", fmt::join(columns.required, ","))});
    return table;
  }
  const std::vector<std::string> header = checked_header(rows.front(), file, columns, problems);
  if (header.empty()) return table;
  for (auto raw = rows.begin() + 1; raw != rows.end(); ++raw) {
    CsvRow row(raw->line, file, problems);
    if (raw->cells.size() != header.size()) {
      problems.push_back({row.where(),
                          fmt::format("the row has {} cells and the header {}; leave unused cells "
                                      "empty, but keep their commas",
                                      raw->cells.size(),
                                      header.size())});
      continue;
    }
    for (std::size_t i = 0; i < header.size(); ++i) row.set(header[i], raw->cells[i]);
    table.rows.push_back(std::move(row));
  }
  return table;
}

std::string csv_cell(std::string_view cell) {
  const bool plain = cell.find_first_of(",\"\r\n") == std::string_view::npos &&
                     trimmed(cell).size() == cell.size();
  if (plain) return std::string(cell);
  std::string out = "\"";
  for (const char c : cell) {
    if (c == '"') out += '"';
    out += c;
  }
  out += '"';
  return out;
}

}  // namespace rondel
