#pragma once

#include <string>
#include <string_view>

#include "tools/rondel/commands/command.h"

namespace rondel::app {

/// `rondel --help`: what it is, all commands, exit status, the safety line.
[[nodiscard]] std::string program_help();

/// `rondel COMMAND --help`.
[[nodiscard]] std::string command_help(const Command& command);

/// The README's block of commands, between its markers.
[[nodiscard]] std::string help_as_markdown();

/// A completion script for `shell` (bash, zsh or fish).
[[nodiscard]] std::string completion_script(std::string_view shell);

/// What has to be said before anybody takes frames.
[[nodiscard]] std::string safety_line();

}  // namespace rondel::app
