#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include <algorithm>
#include <array>
#include <cctype>
#include <cmath>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/read_yaml.h"
#include "tools/rondel/desk/bench.h"
#include "tools/rondel/desk/request.h"
#include "vision/frames/load.h"

namespace rondel::app {
namespace {

using nlohmann::json;

/// The sheets that rows are added to and changed in.
constexpr std::array<std::string_view, 4> kSheets = {
    "marks.csv", "swatches.csv", "strokes.csv", "tape.csv"};

/// The cells of one CSV line (RFC 4180, no line breaks in cells).
std::vector<std::string> cells_of(std::string_view line) {
  std::vector<std::string> cells(1);
  bool quoted = false;
  for (std::size_t i = 0; i < line.size(); ++i) {
    const char c = line[i];
    if (quoted) {
      if (c != '"') {
        cells.back() += c;
      } else if (i + 1 < line.size() && line[i + 1] == '"') {
        cells.back() += line[++i];
      } else {
        quoted = false;
      }
    } else if (c == '"') {
      quoted = true;
    } else if (c == ',') {
      cells.emplace_back();
    } else {
      cells.back() += c;
    }
  }
  return cells;
}

std::string first_line(const std::string& text) {
  std::string line = text.substr(0, text.find('\n'));
  if (!line.empty() && line.back() == '\r') line.pop_back();
  if (line.starts_with("\xEF\xBB\xBF")) line.erase(0, 3);
  return line;
}

std::string trimmed(const std::string& cell) {
  const std::size_t from = cell.find_first_not_of(" \t");
  if (from == std::string::npos) return "";
  return cell.substr(from, cell.find_last_not_of(" \t") - from + 1);
}

/// `row` under `columns`, in the order of the file's own header; what the page does not know stays
/// as it is in `before`.
std::string row_for(const std::string& header,
                    const std::vector<std::string>& columns,
                    const std::vector<std::string>& row,
                    const std::string& before) {
  if (columns.size() != row.size()) throw Refusal(400, "row: has not as many cells as columns");
  const std::vector<std::string> names = cells_of(header);
  std::vector<std::string> cells = before.empty() ? std::vector<std::string>() : cells_of(before);
  cells.resize(names.size());
  for (std::size_t i = 0; i < names.size(); ++i) {
    const auto column = std::find(columns.begin(), columns.end(), trimmed(names[i]));
    if (column != columns.end()) cells[i] = row[static_cast<std::size_t>(column - columns.begin())];
  }
  for (const std::string& cell : cells) {
    if (cell.find_first_of("\r\n") != std::string::npos) {
      throw Refusal(400, "row: a cell must be one line");
    }
  }
  return desk::csv_line(cells);
}

/// Images under frames/ that `text`, a sheet, names in a row: the first such line, or 0.
int line_naming(const std::string& text, const std::string& image) {
  int number = 0;
  std::size_t from = 0;
  while (from < text.size()) {
    const std::size_t end = std::min(text.find('\n', from), text.size());
    ++number;
    for (const std::string& cell : cells_of(std::string_view(text).substr(from, end - from))) {
      if (trimmed(cell) == image) return number;
    }
    from = end + 1;
  }
  return 0;
}

/// Puts `value` at `map: {key: ...}` into YAML text, leaving everything else as it was written.
std::string with_key(const std::string& text,
                     const std::string& map,
                     const std::string& key,
                     const std::string& value) {
  const YAML::Node root = YAML::Load(text);
  const YAML::Node inner = root[map];
  if (!inner || !inner.IsMap() || inner.size() == 0) {
    if (inner)
      throw InputError("venue.yaml", fmt::format("{}: cannot be changed here; do it by hand", map));
    std::string out = text;
    if (!out.empty() && out.back() != '\n') out += '\n';
    return out + fmt::format("{}: {{{}: {}}}\n", map, key, value);
  }
  if (const YAML::Node old = inner[key]) {
    const auto at = static_cast<std::size_t>(old.Mark().pos);
    return text.substr(0, at) + value + text.substr(at + old.Scalar().size());
  }
  // A new key goes before the first one, in the same style.
  const auto first = static_cast<std::size_t>(inner.begin()->first.Mark().pos);
  const std::string between =
      inner.Style() == YAML::EmitterStyle::Flow
          ? ", "
          : "\n" + std::string(static_cast<std::size_t>(inner.begin()->first.Mark().column), ' ');
  return text.substr(0, first) + key + ": " + value + between + text.substr(first);
}

}  // namespace

void Bench::edit(const json& request) {
  const std::string kind = text_of(request, "kind");
  const std::lock_guard lock(edits_);
  if (kind == "frame-remove") {
    const std::string image = text_of(request, "file");
    static_cast<void>(frame_file(open(), image));
    for (const char* sheet : {"marks.csv", "swatches.csv", "tape.csv"}) {
      std::error_code error;
      if (!std::filesystem::is_regular_file(folder_ / sheet, error)) continue;
      if (const int line = line_naming(read_file(folder_ / sheet), image); line > 0) {
        throw InputError(fmt::format("{}:{}", sheet, line),
                         fmt::format("names {}; remove that row before the frame", image));
      }
    }
    journal_.remove_file(image);
    return;
  }
  const std::string file = text_of(request, "file");
  if (kind == "text") {
    if (std::find(venue_files().begin(), venue_files().end(), file) == venue_files().end()) {
      throw Refusal(400, "file: is none of the venue's");
    }
    const std::string text = text_of(request, "text");
    std::vector<Problem> problems;
    for (const std::string& line : problems_with(file, text)) problems.push_back({"", line});
    if (!problems.empty()) throw InputError(std::move(problems));
    journal_.replace(file, text_of(request, "base"), text);
    return;
  }
  if (std::find(kSheets.begin(), kSheets.end(), file) == kSheets.end()) {
    throw Refusal(400, "file: is no sheet of the venue");
  }
  const std::filesystem::path path = folder_ / file;
  std::error_code error;
  const bool there = std::filesystem::is_regular_file(path, error);
  const auto check = [&](const std::string& header, const std::string& row) {
    // Its place in the file is not known to the person; the row is.
    std::vector<Problem> problems;
    for (std::string line : problems_with(file, header + "\n" + row + "\n")) {
      const std::string prefix = file + ":2";
      if (line.starts_with(prefix)) line = file + line.substr(prefix.size());
      problems.push_back({"", line});
    }
    if (!problems.empty()) throw InputError(std::move(problems));
  };
  if (kind == "row-add") {
    const std::vector<std::string> columns = words_of(request, "columns");
    std::string header = there ? first_line(read_file(path)) : "";
    if (header.empty()) header = desk::csv_line(columns);
    const std::string row = row_for(header, columns, words_of(request, "row"), "");
    check(header, row);
    journal_.add_row(file, header, row);
  } else if (kind == "row-change") {
    const std::string before = text_of(request, "before");
    const auto line = request.find("line");
    if (line == request.end() || !line->is_number_integer()) {
      throw Refusal(400, "line: must be a whole number");
    }
    std::string after;
    if (request.contains("row") && !request["row"].is_null()) {
      const std::string header = there ? first_line(read_file(path)) : "";
      after = row_for(header, words_of(request, "columns"), words_of(request, "row"), before);
      check(header, after);
    }
    journal_.change_row(file, line->get<int>(), before, after);
  } else {
    throw Refusal(400, "kind: must be row-add, row-change, text or frame-remove");
  }
}

std::string Bench::add_frame(const std::string& light, const std::string& name, std::string bytes) {
  const auto plain = [](const std::string& word, const char* also) {
    return !word.empty() && word.front() != '.' && word.size() <= 100 &&
           std::all_of(word.begin(), word.end(), [&](unsigned char c) {
             return std::isalnum(c) != 0 ||
                    std::string_view(also).find(static_cast<char>(c)) != std::string_view::npos;
           });
  };
  if (!light.empty() && !plain(light, "_-")) {
    throw Refusal(400, "light: only letters, digits, '_' and '-'");
  }
  if (!plain(name, "_-. ()") || !vision::is_image_name(name)) {
    throw Refusal(400,
                  "name: must be that of an image (.png .jpg .jpeg .bmp .ppm .pgm .565 .rgb565)");
  }
  std::vector<Problem> problems;
  const RigSpec rig = read_rig(read_file(folder_ / "rig.yaml"), "rig.yaml", folder_, problems);
  if (!problems.empty()) throw InputError(std::move(problems));
  static_cast<void>(vision::decode_image(
      bytes, name, {rig.camera.width_px, rig.camera.height_px}, rig.camera.rgb565_order));
  const std::string folder = light.empty() ? "frames/" : "frames/" + light + "/";
  // frames/ itself, or the light's folder, may be a link that leads away.
  const std::filesystem::path real = std::filesystem::weakly_canonical(folder_ / folder);
  const std::filesystem::path inside = real.lexically_relative(folder_);
  if (inside.empty() || *inside.begin() == "..") {
    throw Refusal(403, folder + ": lies outside the venue");
  }
  const std::filesystem::path as_given(name);
  const std::lock_guard lock(edits_);
  std::string image = folder + name;
  for (int copy = 2; std::filesystem::exists(folder_ / image); ++copy) {
    if (read_file(folder_ / image) == bytes) return image;  // the very same picture again
    image = fmt::format(
        "{}{}-{}{}", folder, as_given.stem().string(), copy, as_given.extension().string());
  }
  journal_.add_file(image, std::move(bytes));
  return image;
}

void Bench::write_link(const json& request) {
  const std::filesystem::path path = folder_ / "venue.yaml";
  const std::string before = read_file(path);
  std::vector<Problem> problems;
  const VenueSpec now = read_venue(before, "venue.yaml", problems);
  if (!problems.empty()) throw InputError(std::move(problems));
  std::string text = before;
  const auto put = [&](const char* map, const char* key, double current) {
    const auto member = request.find(key);
    if (member == request.end()) return;
    if (!member->is_number() || !std::isfinite(member->get<double>())) {
      throw Refusal(400, fmt::format("{}: must be a number", key));
    }
    const double value = member->get<double>();
    if (value == current) return;
    const bool whole = value == std::floor(value) && std::abs(value) < 1e9;
    text = with_key(text, map, key, whole ? fmt::format("{:.0f}", value) : number_text(value));
  };
  try {
    put("link", "near_m", now.link.near_m);
    put("link", "far_m", now.link.far_m);
    put("link", "range_bits", now.link.range_bits);
    put("link", "baud", now.link.baud);
    put("budget", "table_bytes", now.budget.table_bytes);
  } catch (const YAML::Exception& trouble) {
    throw InputError("venue.yaml", fmt::format("{}; change it by hand", trouble.what()));
  }
  const VenueSpec then = read_venue(text, "venue.yaml", problems);
  if (!problems.empty()) throw InputError(std::move(problems));
  // Text was put where the parser said that the values are: it must be read back as meant.
  const auto as_meant = [&](const char* key, double read) {
    return !request.contains(key) || request[key].get<double>() == read;
  };
  if (!as_meant("near_m", then.link.near_m) || !as_meant("far_m", then.link.far_m) ||
      !as_meant("range_bits", then.link.range_bits) || !as_meant("baud", then.link.baud) ||
      !as_meant("table_bytes", then.budget.table_bytes)) {
    throw InputError("venue.yaml",
                     "its 'link:' is written in a way that the desk cannot change; "
                     "change it by hand");
  }
  const std::lock_guard lock(edits_);
  journal_.replace("venue.yaml", text_of(request, "base"), text);
}

std::string Bench::undo() {
  const std::lock_guard lock(edits_);
  return journal_.undo();
}

std::string Bench::redo() {
  const std::lock_guard lock(edits_);
  return journal_.redo();
}

}  // namespace rondel::app
