#include "tools/desk/journal.h"

#include <fmt/format.h>

#include <utility>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel::desk {
namespace {

struct Line {
  std::size_t from = 0;  ///< first byte
  std::size_t size = 0;  ///< without the line end
  std::size_t next = 0;  ///< first byte of the next line
};

std::vector<Line> lines_of(std::string_view text) {
  std::vector<Line> lines;
  std::size_t from = 0;
  while (from < text.size()) {
    const std::size_t end = text.find('\n', from);
    const std::size_t stop = end == std::string_view::npos ? text.size() : end;
    std::size_t size = stop - from;
    if (size > 0 && text[from + size - 1] == '\r') --size;
    const std::size_t next = end == std::string_view::npos ? text.size() : end + 1;
    lines.push_back({from, size, next});
    from = next;
  }
  return lines;
}

}  // namespace

std::string csv_line(const std::vector<std::string>& cells) {
  std::string line;
  for (const std::string& cell : cells) {
    if (&cell != &cells.front()) line += ',';
    if (cell.find_first_of(",\"\r\n") == std::string::npos) {
      line += cell;
      continue;
    }
    line += '"';
    for (const char c : cell) {
      if (c == '"') line += '"';
      line += c;
    }
    line += '"';
  }
  return line;
}

std::optional<std::string> Journal::content(const std::string& file) const {
  if (!std::filesystem::exists(folder_ / file)) return std::nullopt;
  return read_file(folder_ / file);
}

void Journal::put(const std::string& file, const std::optional<std::string>& bytes) const {
  if (bytes) {
    write_file(folder_ / file, *bytes);
  } else {
    std::filesystem::remove(folder_ / file);
  }
}

void Journal::make(Edit edit) {
  put(edit.file, edit.after);
  done_.push_back(std::move(edit));
  undone_.clear();
}

void Journal::add_row(const std::string& file, std::string_view header, const std::string& row) {
  Edit edit{file, content(file), std::nullopt};
  std::string text = edit.before.value_or(std::string(header) + "\n");
  if (!text.empty() && text.back() != '\n') text += '\n';
  edit.after = text + row + "\n";
  make(std::move(edit));
}

void Journal::change_row(const std::string& file,
                         int line,
                         const std::string& before,
                         const std::string& after) {
  Edit edit{file, content(file), std::nullopt};
  const std::string text = edit.before.value_or("");
  const std::vector<Line> lines = lines_of(text);
  const auto reads_before = [&](std::size_t index) {
    return index < lines.size() && text.compare(lines[index].from, lines[index].size, before) == 0;
  };
  std::size_t found = line > 0 ? static_cast<std::size_t>(line - 1) : lines.size();
  if (!reads_before(found)) {
    for (found = 1; found < lines.size() && !reads_before(found); ++found) {
    }
  }
  if (found == 0 || !reads_before(found)) {
    throw Conflict(fmt::format("{}: the row was changed elsewhere; look at it again", file));
  }
  std::string changed = text.substr(0, lines[found].from);
  if (!after.empty()) {
    changed += after;
    changed += text.substr(lines[found].from + lines[found].size,
                           lines[found].next - lines[found].from - lines[found].size);
  }
  changed += text.substr(lines[found].next);
  edit.after = std::move(changed);
  make(std::move(edit));
}

void Journal::replace(const std::string& file, const std::string& base, const std::string& text) {
  Edit edit{file, content(file), text};
  if (sha256_hex(edit.before.value_or("")) != base) {
    throw Conflict(fmt::format("{}: the file was changed elsewhere; load it again", file));
  }
  if (edit.before != edit.after) make(std::move(edit));
}

void Journal::add_file(const std::string& file, std::string bytes) {
  if (content(file)) {
    throw InputError(file, "exists already; give the new one another name");
  }
  make({file, std::nullopt, std::move(bytes)});
}

void Journal::remove_file(const std::string& file) {
  std::optional<std::string> before = content(file);
  if (!before) throw InputError(file, "is not there any more");
  make({file, std::move(before), std::nullopt});
}

std::string Journal::undo() {
  if (done_.empty()) throw InputError("", "there is nothing to undo");
  const Edit& edit = done_.back();
  if (content(edit.file) != edit.after) {
    throw Conflict(fmt::format("{}: changed elsewhere since; it cannot be undone", edit.file));
  }
  put(edit.file, edit.before);
  undone_.push_back(std::move(done_.back()));
  done_.pop_back();
  return undone_.back().file;
}

std::string Journal::redo() {
  if (undone_.empty()) throw InputError("", "there is nothing to redo");
  const Edit& edit = undone_.back();
  if (content(edit.file) != edit.before) {
    throw Conflict(fmt::format("{}: changed elsewhere since; it cannot be redone", edit.file));
  }
  put(edit.file, edit.after);
  done_.push_back(std::move(undone_.back()));
  undone_.pop_back();
  return done_.back().file;
}

}  // namespace rondel::desk
