#include <fmt/core.h>

#include <cstdio>

#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/steps/check_step.h"

namespace rondel::app {
namespace {

constexpr int kMostShards = 100000;

Shard shard_of(const std::string& value) {
  int index = 0;
  int count = 0;
  int end = 0;
  const bool read = std::sscanf(value.c_str(), "%d/%d%n", &index, &count, &end) == 2 &&
                    end == static_cast<int>(value.size());
  if (!read || index < 1 || count < 1 || index > count || count > kMostShards) {
    throw InputError(
        "--shard",
        fmt::format("'{}': must be I/N with 1 <= I <= N <= {}, as in 2/7", value, kMostShards));
  }
  return {index - 1, count};
}

}  // namespace

Outcome check_command(const Arguments& arguments, Progress& progress) {
  CheckOptions options;
  if (const auto batch = arguments.value("--batch")) options.batch = *batch;
  if (const auto shard = arguments.value("--shard")) options.shard = shard_of(*shard);
  options.merge = arguments.has("--merge");
  options.repair = arguments.has("--repair");
  return run_check(open_workspace(arguments.words.at(0)), options, progress);
}

}  // namespace rondel::app
