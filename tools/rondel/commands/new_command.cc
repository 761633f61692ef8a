#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <nlohmann/json.hpp>
#include <optional>
#include <system_error>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/read_sheets.h"
#include "calib/venue/read_yaml.h"
#include "calib/venue/words.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/help.h"
#include "tools/rondel/venue_template.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

struct Part {
  std::string name;
  std::string text;
};

/// What belongs to the robot, as the files of a new venue. The mask's strokes do not: they mend
/// what a hall's light left undecided.
std::vector<Part> parts_from(const fs::path& other, bool with_marks, const std::string& name) {
  std::error_code error;
  if (!fs::is_directory(other, error)) {
    throw InputError("--from", fmt::format("'{}': there is no such folder", other.string()));
  }
  std::vector<Problem> problems;
  const std::string rig_text = read_file(other / "rig.yaml");
  const RigSpec rig = read_rig(rig_text, (other / "rig.yaml").string(), other, problems);
  const std::string venue_text = read_file(other / "venue.yaml");
  const VenueSpec venue = read_venue(venue_text, (other / "venue.yaml").string(), problems);
  std::vector<Part> parts;
  if (with_marks) {
    // Their images stay behind, so the marks become marks from no frame.
    const SheetContext context{
        venue, rig.camera, [](const std::string&) { return std::optional<std::string>{}; }};
    const fs::path sheet = other / "marks.csv";
    std::vector<Mark> marks = read_marks(read_file(sheet), sheet.string(), context, problems);
    for (Mark& mark : marks) mark.image.clear();
    parts.push_back({"marks.csv", marks_csv(marks)});
  }
  if (!problems.empty()) throw InputError(std::move(problems));
  if (const auto points = points_file_of(rig_text)) {
    parts.push_back({*points, read_file(other / *points)});
  }
  parts.push_back({"rig.yaml", rig_text});
  parts.push_back({"venue.yaml", venue_from(venue_text, name, other.string())});
  return parts;
}

}  // namespace

Outcome new_command(const Arguments& arguments, Progress& progress) {
  const fs::path folder = arguments.words.at(0);
  std::error_code error;
  if (fs::exists(folder, error) && !fs::is_directory(folder, error)) {
    throw InputError(folder.string(), "is a file; name a folder that is not there yet");
  }
  std::string venue_name = arguments.value("--name").value_or("");
  if (venue_name.empty()) {
    const fs::path named = fs::weakly_canonical(folder);
    venue_name = (named.has_filename() ? named : named.parent_path()).filename().string();
  }
  if (venue_name.empty() || quotable(venue_name) != venue_name) {
    throw InputError("--name",
                     fmt::format("'{}' must be one line of at most 60 characters of UTF-8 text",
                                 quotable(venue_name)));
  }

  const auto from = arguments.value("--from");
  const bool with_marks = arguments.has("--marks");
  if (with_marks && !from) {
    throw InputError("--marks", "goes with --from, which names the venue that has the marks");
  }
  std::vector<Part> parts;
  if (from) {
    parts = parts_from(*from, with_marks, venue_name);
  } else {
    parts.push_back({"rig.yaml", rig_template()});
    parts.push_back({"venue.yaml", venue_template(venue_name)});
  }
  // Nothing is written over, and nothing at all unless it passes the validation it will meet.
  std::vector<Problem> problems;
  for (const Part& part : parts) {
    if (fs::exists(folder / part.name, error)) {
      problems.push_back(
          {(folder / part.name).string(), "is there already; choose another folder"});
    }
    if (part.name == "venue.yaml") {
      (void)read_venue(part.text, (folder / part.name).string(), problems);
    }
  }
  if (!problems.empty()) throw InputError(std::move(problems));

  for (const Part& part : parts) write_file(folder / part.name, part.text);
  fs::create_directories(folder / "frames");
  progress.note(safety_line());

  Outcome outcome;
  std::vector<std::string> written;
  for (const Part& part : parts) written.push_back((folder / part.name).string());
  std::sort(written.begin(), written.end());
  outcome.document = {{"venue", folder.string()}, {"name", venue_name}, {"written", written}};
  outcome.summary = fmt::format(
      "{0}: a new venue{1}.\n"
      "Next:\n"
      "  {2}\n"
      "  take frames for each light:    rondel grab {0} --light noon /dev/video0\n"
      "  write {3}\n"
      "  then, as often as you like:    rondel run {0}\n",
      folder.string(),
      from ? fmt::format(" with the rig of {}", *from) : "",
      from ? "look over venue.yaml, and rig.yaml where mirror or mount changed"
           : "fill in rig.yaml (the camera's size first) and venue.yaml (the objects)",
      with_marks ? "two or three new marks into marks.csv to verify the old ones, and swatches.csv"
                 : "marks.csv (a pixel and its tape-measured place) and swatches.csv");
  return outcome;
}

}  // namespace rondel::app
