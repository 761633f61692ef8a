#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <nlohmann/json.hpp>
#include <system_error>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/read_yaml.h"
#include "calib/venue/words.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/help.h"
#include "tools/rondel/venue_template.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

/// Files that belong to the robot and its rig: what the rig names, and the hand strokes of the mask
/// are not among them, since those belong to where the robot stood.
std::vector<std::string> files_of_rig(const fs::path& venue, const std::string& rig_text) {
  std::vector<Problem> problems;
  std::vector<std::string> files;
  (void)read_rig(rig_text, (venue / "rig.yaml").string(), venue, problems);
  if (!problems.empty()) throw InputError(std::move(problems));
  if (const auto points = points_file_of(rig_text)) files.push_back(*points);
  return files;
}

struct Part {
  std::string name;
  std::string text;
};

}  // namespace

Outcome new_command(const Arguments& arguments, Progress& progress) {
  const fs::path folder = arguments.words.at(0);
  std::error_code error;
  if (fs::exists(folder, error) && !fs::is_directory(folder, error)) {
    throw InputError(folder.string(), "is a file; name a folder that is not there yet");
  }
  for (const char* name : {"venue.yaml", "rig.yaml"}) {
    if (fs::exists(folder / name, error)) {
      throw InputError((folder / name).string(), "is there already; choose another folder");
    }
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

  std::vector<Part> parts;
  const auto from = arguments.value("--from");
  if (from) {
    const fs::path other = *from;
    if (!fs::is_directory(other, error)) {
      throw InputError("--from", fmt::format("'{}': there is no such folder", other.string()));
    }
    const std::string rig_text = read_file(other / "rig.yaml");
    const std::string venue_text = read_file(other / "venue.yaml");
    for (const std::string& name : files_of_rig(other, rig_text)) {
      parts.push_back({name, read_file(other / name)});
    }
    std::vector<Problem> problems;
    (void)read_venue(venue_text, (other / "venue.yaml").string(), problems);
    if (!problems.empty()) throw InputError(std::move(problems));
    parts.push_back({"rig.yaml", rig_text});
    parts.push_back({"venue.yaml", venue_from(venue_text, venue_name, other.string())});
  } else {
    parts.push_back({"rig.yaml", rig_template()});
    parts.push_back({"venue.yaml", venue_template(venue_name)});
  }
  // Nothing is written unless the new files pass the validation they will meet.
  std::vector<Problem> problems;
  for (const Part& part : parts) {
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
      "{}: a new venue{}.\n"
      "Next: {}, then put frames into {} (rondel grab {} SOURCE),\n"
      "write marks.csv and swatches.csv, and type: rondel run {}\n",
      folder.string(),
      from ? fmt::format(" with the rig of {}", *from) : "",
      from ? "look over venue.yaml" : "fill in rig.yaml and venue.yaml",
      (folder / "frames" / "LIGHT").string(),
      folder.string(),
      folder.string());
  return outcome;
}

}  // namespace rondel::app
