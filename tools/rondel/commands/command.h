#pragma once

#include <map>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/progress.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

/// One flag of a command. The tables of these feed parsing, --help, shell completion and the
/// README's block; nothing else describes a flag.
struct Flag {
  std::string_view name;   ///< "--object"
  std::string_view value;  ///< "NAME", or empty for a switch
  std::string_view brief;  ///< one sentence with a full stop
};

/// A parsed command line: positional words and the flags that were given.
class Arguments {
 public:
  std::vector<std::string> words;                         ///< positional, in order
  std::map<std::string, std::string, std::less<>> flags;  ///< name -> value ("" for a switch)

  [[nodiscard]] bool has(std::string_view flag) const { return flags.find(flag) != flags.end(); }
  [[nodiscard]] std::optional<std::string> value(std::string_view flag) const;
  /// The flag's value as a finite number; InputError "--flag: 'x' is not a number".
  [[nodiscard]] std::optional<double> number(std::string_view flag) const;
  [[nodiscard]] std::optional<int> whole_number(std::string_view flag) const;
};

/// One command. `run` may write data to standard output itself only when it streams (at --points);
/// otherwise it answers with an Outcome and main prints it (as JSON under --json).
struct Command {
  std::string_view name;
  std::string_view words;  ///< "VENUE", "VENUE [IMAGE...]"
  std::string_view brief;  ///< one sentence
  std::span<const Flag> flags;
  Outcome (*run)(const Arguments&, Progress&);
};

/// All commands in the order --help lists them.
[[nodiscard]] std::span<const Command> commands();

Outcome new_command(const Arguments& arguments, Progress& progress);
Outcome grab_command(const Arguments& arguments, Progress& progress);
Outcome centre_command(const Arguments& arguments, Progress& progress);
Outcome mask_command(const Arguments& arguments, Progress& progress);
Outcome range_command(const Arguments& arguments, Progress& progress);
Outcome colours_command(const Arguments& arguments, Progress& progress);
Outcome tables_command(const Arguments& arguments, Progress& progress);
Outcome check_command(const Arguments& arguments, Progress& progress);
Outcome run_command(const Arguments& arguments, Progress& progress);
Outcome advise_command(const Arguments& arguments, Progress& progress);
Outcome at_command(const Arguments& arguments, Progress& progress);
Outcome where_command(const Arguments& arguments, Progress& progress);
Outcome locate_command(const Arguments& arguments, Progress& progress);
Outcome compare_command(const Arguments& arguments, Progress& progress);
Outcome send_command(const Arguments& arguments, Progress& progress);
Outcome scene_command(const Arguments& arguments, Progress& progress);
Outcome desk_command(const Arguments& arguments, Progress& progress);
Outcome completion_command(const Arguments& arguments, Progress& progress);

}  // namespace rondel::app
