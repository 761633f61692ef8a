#include "tools/rondel/results.h"

#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include <algorithm>
#include <cassert>
#include <nlohmann/json.hpp>
#include <optional>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/canonical.h"
#include "tools/rondel/hash_store.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

constexpr std::string_view kRecord = "\nmade_from:\n";

std::string hash_of(const Workspace& workspace, const fs::path& path) {
  if (workspace.hashes) return workspace.hashes->hash_of(path);
  HashStore once;
  return once.hash_of(path);
}

/// One step's inputs as they are collected.
class Inputs {
 public:
  explicit Inputs(const Workspace& workspace) : workspace_(workspace) {
    made_from_.emplace_back("rondel", RONDEL_VERSION);
  }

  Inputs& part(const char* name, const std::string& canonical) {
    made_from_.emplace_back(name, sha256_hex(canonical));
    return *this;
  }
  /// A file that people write, as it is.
  Inputs& sheet(const char* name) {
    made_from_.emplace_back(name, hash_of(workspace_, workspace_.folder / name));
    return *this;
  }
  /// A result of an earlier step; a YAML file's own record does not count.
  Inputs& result(const std::string& name) {
    const fs::path path = workspace_.results() / name;
    std::string hash = "absent";
    std::error_code error;
    if (path.extension() != ".yaml") {
      hash = hash_of(workspace_, path);
    } else if (fs::is_regular_file(path, error)) {
      hash = sha256_hex(without_made_from(read_file(path)));
    }
    made_from_.emplace_back("results/" + name, std::move(hash));
    return *this;
  }
  Inputs& frames(const std::vector<FrameFile>& files) {
    std::vector<fs::path> paths;
    paths.reserve(files.size());
    for (const FrameFile& file : files) paths.push_back(file.path);
    HashStore once;
    const std::vector<std::string> hashes =
        (workspace_.hashes ? *workspace_.hashes : once).hashes_of(paths);
    std::string all;
    for (std::size_t i = 0; i < files.size(); ++i) {
      all += fmt::format("{} {}\n", hashes[i], files[i].image);
    }
    made_from_.emplace_back("frames", sha256_hex(all));
    return *this;
  }

  [[nodiscard]] MadeFrom take() { return std::move(made_from_); }

 private:
  const Workspace& workspace_;
  MadeFrom made_from_;
};

/// The files without which a step's result is not there.
std::vector<fs::path> outputs_of(const Workspace& workspace, std::string_view step) {
  const fs::path results = workspace.results();
  if (step == "mask") return {results / "mask.yaml", results / "mask.png"};
  if (step == "tables") {
    return {results / "tables" / "manifest.yaml",
            results / "tables" / (workspace.venue.prefix + ".bin")};
  }
  return {result_of(workspace, step)};
}

}  // namespace

const std::vector<std::string>& step_names() {
  static const std::vector<std::string> kSteps = {
      "centre", "mask", "range", "colours", "tables", "check"};
  return kSteps;
}

fs::path result_of(const Workspace& workspace, std::string_view step) {
  assert(std::find(step_names().begin(), step_names().end(), step) != step_names().end());
  if (step == "tables") return workspace.results() / "tables" / "manifest.yaml";
  if (step == "check") return workspace.results() / "check.json";
  return workspace.results() / (std::string(step) + ".yaml");
}

MadeFrom inputs_of(const Workspace& workspace, std::string_view step) {
  const VenueSpec& venue = workspace.venue;
  const RigSpec& rig = workspace.rig;
  Inputs inputs(workspace);
  if (step == "centre") {
    if (venue.centre) {
      inputs.part("rig.yaml: camera", canonical_camera(rig))
          .part("venue.yaml: centre", canonical_centre(venue));
    } else {
      inputs.part("rig.yaml", canonical_rig(rig)).frames(workspace.frames);
    }
  } else if (step == "mask") {
    inputs.part("rig.yaml: camera", canonical_camera(rig))
        .frames(workspace.frames)
        .sheet("strokes.csv")
        .result("centre.yaml");
  } else if (step == "range") {
    inputs.part("rig.yaml", canonical_rig(rig))
        .part("venue.yaml: objects", canonical_objects(venue))
        .part("venue.yaml: noise", canonical_noise(venue))
        .part("venue.yaml: tolerance", canonical_tolerance(venue))
        .part("venue.yaml: link", canonical_link(venue))
        .sheet("marks.csv")
        .result("centre.yaml");
  } else if (step == "colours") {
    inputs.part("rig.yaml: camera", canonical_camera(rig))
        .part("venue.yaml: objects", canonical_objects(venue))
        .part("venue.yaml: lighting", canonical_lighting(venue))
        .part("venue.yaml: tolerance", canonical_tolerance(venue))
        .frames(workspace.frames)
        .sheet("swatches.csv")
        .result("mask.png");
  } else if (step == "tables") {
    inputs.part("rig.yaml: camera", canonical_camera(rig))
        .part("venue.yaml: objects", canonical_objects(venue))
        .part("venue.yaml: link", canonical_link(venue))
        .part("venue.yaml: budget", canonical_budget(venue))
        .part("venue.yaml: tolerance", canonical_tolerance(venue))
        .part("venue.yaml: noise", canonical_noise(venue))
        .part("venue.yaml: lighting", canonical_lighting(venue))
        .result("centre.yaml")
        .result("mask.png")
        .result("range.yaml")
        .result("colours.yaml");
  } else if (step == "check") {
    inputs.part("rig.yaml: camera", canonical_camera(rig))
        .part("venue.yaml: objects", canonical_objects(venue))
        .part("venue.yaml: tolerance", canonical_tolerance(venue))
        .part("venue.yaml: noise", canonical_noise(venue))
        .frames(workspace.frames)
        .sheet("tape.csv")
        .result("centre.yaml")
        .result("range.yaml")
        .result("tables/" + venue.prefix + ".bin");
  } else {
    assert(false && "no such step");
  }
  return inputs.take();
}

std::string_view without_made_from(std::string_view yaml) {
  const std::size_t at = yaml.rfind(kRecord);
  return at == std::string_view::npos ? yaml : yaml.substr(0, at + 1);
}

std::string with_made_from(std::string yaml, const MadeFrom& made_from) {
  if (!yaml.empty() && yaml.back() != '\n') yaml += '\n';
  yaml += "made_from:\n";
  for (const auto& [name, hash] : made_from) yaml += fmt::format("  \"{}\": \"{}\"\n", name, hash);
  return yaml;
}

MadeFrom made_from_of(const fs::path& result) {
  MadeFrom record;
  std::error_code error;
  if (!fs::is_regular_file(result, error)) return record;
  const std::string text = read_file(result);
  try {
    if (result.extension() == ".json") {
      const auto json = nlohmann::ordered_json::parse(text);
      for (const auto& [name, hash] : json.at("made_from").items()) {
        record.emplace_back(name, hash.get<std::string>());
      }
      return record;
    }
    const std::size_t at = text.rfind(kRecord);
    if (at == std::string::npos) return record;
    const YAML::Node node = YAML::Load(text.substr(at + 1));
    for (const auto& entry : node["made_from"]) {
      record.emplace_back(entry.first.as<std::string>(), entry.second.as<std::string>());
    }
  } catch (const nlohmann::json::exception&) {
    record.clear();  // a damaged record is no record: the step runs again
  } catch (const YAML::Exception&) {
    record.clear();
  }
  return record;
}

StepState state_of(const Workspace& workspace, std::string_view step) {
  StepState state;
  for (const fs::path& output : outputs_of(workspace, step)) {
    std::error_code error;
    if (!fs::is_regular_file(output, error)) return state;
  }
  const MadeFrom now = inputs_of(workspace, step);
  const MadeFrom then = made_from_of(result_of(workspace, step));
  for (const auto& [name, hash] : now) {
    const auto recorded =
        std::find_if(then.begin(), then.end(), [&, &wanted = name](const auto& entry) {
          return entry.first == wanted;
        });
    if (recorded == then.end() || recorded->second != hash) state.changed.push_back(name);
  }
  for (const auto& [name, hash] : then) {
    const bool known = std::any_of(now.begin(), now.end(), [&, &wanted = name](const auto& entry) {
      return entry.first == wanted;
    });
    if (!known) state.changed.push_back(name);
  }
  state.freshness = state.changed.empty() ? Freshness::fresh : Freshness::stale;
  return state;
}

}  // namespace rondel::app
