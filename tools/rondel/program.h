#pragma once

#include <string>
#include <vector>

namespace rondel::app {

/// What the program answers to the shell.
enum class Exit : int {
  done = 0,
  not_accepted = 1,  ///< done, and the verdict is 'not accepted'
  bad_input = 2,     ///< bad usage or bad input; nothing was written
  own_fault = 70,    ///< a mistake of the program itself
};

/// The whole program: parses `arguments` (without the program's name), runs the command, prints
/// what it answers to standard output and everything else to standard error. Never throws.
int run_program(const std::vector<std::string>& arguments) noexcept;

}  // namespace rondel::app
