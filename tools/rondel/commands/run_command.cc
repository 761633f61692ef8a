#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <nlohmann/json.hpp>
#include <optional>
#include <set>
#include <string>
#include <system_error>
#include <utility>
#include <vector>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/words.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/report/page.h"
#include "tools/rondel/results.h"

namespace rondel::app {
namespace {

struct StepRow {
  std::string name;
  Outcome (*run)(const Workspace&, Progress&);
  std::vector<std::string> needs;  ///< steps without whose results it cannot run
  std::vector<std::string> uses;   ///< steps whose results it takes where there are such
  /// Why the step has nothing to do in this venue; nothing when it has.
  std::optional<std::string> (*idle)(const Workspace&);
};

std::optional<std::string> never_idle(const Workspace& /*workspace*/) { return std::nullopt; }

std::optional<std::string> centre_idle(const Workspace& workspace) {
  if (workspace.venue.centre || !workspace.frames.empty()) return std::nullopt;
  return "no frames in frames/, and no 'centre:' in venue.yaml";
}

std::optional<std::string> mask_idle(const Workspace& workspace) {
  if (workspace.frames.size() >= 2 || !workspace.strokes.empty()) return std::nullopt;
  return "fewer than two frames in frames/, and no strokes.csv";
}

std::optional<std::string> range_idle(const Workspace& workspace) {
  if (!workspace.marks.empty() || workspace.rig.mirror) return std::nullopt;
  return "no marks.csv, and no mirror in rig.yaml";
}

std::optional<std::string> colours_idle(const Workspace& workspace) {
  if (workspace.venue.objects.empty()) return "no objects in venue.yaml";
  if (workspace.swatches.empty()) return "no swatches.csv";
  return std::nullopt;
}

std::optional<std::string> check_idle(const Workspace& workspace) {
  if (workspace.tape.empty()) return "no tape sheet (tape.csv)";
  return std::nullopt;
}

const std::vector<StepRow>& step_rows() {
  static const std::vector<StepRow> kRows = {
      {"centre", centre_step, {}, {}, centre_idle},
      {"mask", mask_step, {"centre"}, {}, mask_idle},
      {"range", range_step, {"centre"}, {}, range_idle},
      {"colours", colours_step, {"mask"}, {}, colours_idle},
      {"tables", tables_step, {"range"}, {"mask", "colours"}, never_idle},
      {"check", check_step, {"tables", "colours"}, {}, check_idle},
  };
  return kRows;
}

enum class Verdict { none, accepted, not_accepted };

/// The verdict that is on file.
Verdict verdict_on_file(const Workspace& workspace) {
  const std::filesystem::path path = workspace.results() / "check.json";
  std::error_code error;
  if (!std::filesystem::is_regular_file(path, error)) return Verdict::none;
  const auto json = nlohmann::json::parse(read_file(path), nullptr, false);
  if (!json.is_object() || !json.contains("accepted") || !json["accepted"].is_boolean()) {
    return Verdict::none;
  }
  return json["accepted"].get<bool>() ? Verdict::accepted : Verdict::not_accepted;
}

std::string indented(const std::string& text) {
  std::string out;
  std::size_t at = 0;
  while (at < text.size()) {
    const std::size_t end = std::min(text.find('\n', at), text.size());
    if (end > at) out.append("  ").append(text, at, end - at).append("\n");
    at = end + 1;
  }
  return out;
}

/// One run over all steps, and what it has to say.
class Run {
 public:
  Run(const Workspace& workspace, bool again, Progress& progress)
      : workspace_(workspace), again_(again), progress_(progress) {}

  void step(const StepRow& row) {
    if (const auto idle = row.idle(workspace_)) {
      std::error_code error;
      if (std::filesystem::is_regular_file(result_of(workspace_, row.name), error)) {
        kept_ = true;
        say(row, "kept from before", *idle, {});
      } else {
        absent_.insert(row.name);
        say(row, "left out", *idle, {});
      }
      return;
    }
    if (const std::string lacking = lacking_for(row); !lacking.empty()) {
      absent_.insert(row.name);
      say(row, "left out", lacking, {});
      return;
    }
    const StepState state = state_of(workspace_, row.name);
    if (state.freshness == Freshness::fresh && !again_) {
      kept_ = true;
      say(row, "fresh", "nothing it was made from has changed", {});
      return;
    }
    std::string why = "not made before";
    if (state.freshness == Freshness::stale) {
      why = state.changed.empty() ? "asked for" : "changed: " + joined(state.changed);
    } else if (state.freshness == Freshness::fresh) {
      why = "asked for";
    }
    progress_.note(fmt::format("{}: {}", row.name, why));
    try {
      const Outcome outcome = row.run(workspace_, progress_);
      ran_ = true;
      say(row, "done", why, outcome);
    } catch (const InputError& error) {
      failed_.insert(row.name);
      for (const Problem& problem : error.problems()) progress_.note(to_text(problem));
      say(row, "failed", error.what(), {});
    }
  }

  Outcome finish() {
    const std::filesystem::path page = workspace_.results() / "report.html";
    std::error_code error;
    const bool anything = std::filesystem::is_directory(workspace_.results(), error);
    const bool failed = !failed_.empty();
    if (anything && (ran_ || failed || !std::filesystem::is_regular_file(page, error))) {
      report::write_report(workspace_);
    }
    Outcome outcome;
    const Verdict verdict = missing("check").empty() ? verdict_on_file(workspace_) : Verdict::none;
    if (!ran_ && !failed) {
      summary_ +=
          kept_ ? "Nothing to do: what can be made is fresh.\n"
                : "Nothing could be done yet: the lines above say what each step waits for.\n";
    }
    if (anything) summary_ += fmt::format("Report: {}\n", page.string());
    summary_ += verdict == Verdict::none       ? "Verdict: none yet\n"
                : verdict == Verdict::accepted ? "Verdict: accepted\n"
                                               : "Verdict: not accepted; the report says why\n";
    document_["accepted"] = nullptr;
    if (verdict != Verdict::none) document_["accepted"] = verdict == Verdict::accepted;
    document_["report"] = nullptr;
    if (anything) document_["report"] = page.string();
    outcome.summary = std::move(summary_);
    outcome.document = std::move(document_);
    if (verdict == Verdict::not_accepted) outcome.status = 1;
    if (failed) outcome.status = 2;
    return outcome;
  }

 private:
  /// Why there is no result of `step` to go on with; "" where there is one.
  [[nodiscard]] std::string missing(const std::string& step) const {
    if (failed_.count(step) != 0) return step + " failed";
    if (absent_.count(step) != 0) return step + " has no result";
    return "";
  }

  /// Why `row` cannot run, "" when it can. What it merely uses may be absent, but a failure there
  /// would hand on a result that is out of date.
  [[nodiscard]] std::string lacking_for(const StepRow& row) const {
    std::vector<std::string> lacking;
    for (const std::string& need : row.needs) {
      if (const std::string why = missing(need); !why.empty()) lacking.push_back(why);
    }
    for (const std::string& use : row.uses) {
      if (failed_.count(use) != 0) lacking.push_back(missing(use));
    }
    return joined(lacking);
  }

  void say(const StepRow& row,
           const std::string& state,
           const std::string& why,
           const std::optional<Outcome>& outcome) {
    nlohmann::ordered_json entry = {{"step", row.name}, {"state", state}, {"why", why}};
    summary_ += fmt::format("{}: {}", row.name, state);
    if (outcome) {
      summary_ += fmt::format(" ({})\n{}", why, indented(outcome->summary));
      entry["result"] = outcome->document;
    } else if (why.find('\n') != std::string::npos) {
      summary_ += "\n" + indented(why);
    } else {
      summary_ += fmt::format(" ({})\n", why);
    }
    document_["steps"].push_back(std::move(entry));
  }

  const Workspace& workspace_;
  bool again_;
  Progress& progress_;
  bool ran_ = false;
  bool kept_ = false;  ///< some result of before still stands
  std::set<std::string> absent_;
  std::set<std::string> failed_;
  std::string summary_;
  nlohmann::ordered_json document_ = {{"steps", nlohmann::ordered_json::array()}};
};

}  // namespace

Outcome run_command(const Arguments& arguments, Progress& progress) {
  const Workspace workspace = open_workspace(arguments.words.at(0));
  Run run(workspace, arguments.has("--again"), progress);
  for (const StepRow& row : step_rows()) {
    run.step(row);
    if (progress.cancelled()) throw InputError("rondel run", "stopped; what is finished is kept");
  }
  return run.finish();
}

}  // namespace rondel::app
