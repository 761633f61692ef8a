#pragma once

#include <string>
#include <vector>

#include "tools/rondel/commands/command.h"

namespace rondel::app {

/// Flags that every command has, besides its own.
[[nodiscard]] std::span<const Flag> common_flags();

/// The command called `name`; InputError with 'did you mean' when there is none.
[[nodiscard]] const Command& find_command(const std::string& name);

/// How many words a command takes, from its `words`: "VENUE [IMAGE...]" is 1 to any number.
struct WordCount {
  int least = 0;
  int most = 0;  ///< -1: any number
};
[[nodiscard]] WordCount word_count(std::string_view words);

/// The words a flag may take, from its `value`: {"bash", "zsh"} for "bash|zsh", else empty.
[[nodiscard]] std::vector<std::string> choices_of(std::string_view value);

/// Parses what follows the command's name by the command's table. All that is wrong is reported at
/// once (InputError): unknown flags, missing values, words too few or too many. Where --help is
/// among the flags the words are not counted. A word such as -45 or -.5 is a number, not a flag;
/// all after
/// "--" are words.
[[nodiscard]] Arguments parse(const Command& command, const std::vector<std::string>& line);

}  // namespace rondel::app
