#include <fmt/format.h>

#include <array>

#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/desk/bench.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/check_step.h"

namespace rondel::app {
namespace {

struct StepRow {
  std::string_view name;
  Outcome (*run)(const Workspace&, Progress&);
};
constexpr std::array kStepRows = {StepRow{"centre", centre_step},
                                  StepRow{"mask", mask_step},
                                  StepRow{"range", range_step},
                                  StepRow{"colours", colours_step},
                                  StepRow{"tables", tables_step},
                                  StepRow{"check", check_step}};

}  // namespace

nlohmann::ordered_json Bench::run(const std::string& step,
                                  const std::string& batch,
                                  Progress& progress) {
  if (step == "all") {
    Arguments arguments;
    arguments.words = {folder_.string()};
    const Outcome outcome = run_command(arguments, progress);
    return {{"summary", outcome.summary}, {"status", outcome.status}};
  }
  const Workspace w = open();
  if (!batch.empty()) {
    CheckOptions options;
    options.batch = batch;
    const Outcome outcome = run_check(w, options, progress);
    return {{"summary", outcome.summary}, {"status", outcome.status}, {"batch", batch}};
  }
  for (const StepRow& row : kStepRows) {
    if (row.name != step) continue;
    try {
      const Outcome outcome = row.run(w, progress);
      const std::lock_guard lock(failing_);
      failures_.erase(step);
      return {{"summary", outcome.summary}, {"status", outcome.status}};
    } catch (const InputError& error) {
      Failure failure;
      for (const auto& [input, hash] : inputs_of(w, step)) failure.inputs += input + hash;
      failure.text = error.what();
      const std::lock_guard lock(failing_);
      failures_[step] = std::move(failure);
      throw;
    }
  }
  throw InputError("step", fmt::format("'{}' is no step", step));
}

}  // namespace rondel::app
