#include <fmt/format.h>
#include <spawn.h>
#include <sys/wait.h>

#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <string>
#include <system_error>
#include <thread>

#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/desk/serve.h"
#include "tools/rondel/help.h"

extern char** environ;  // NOLINT(readability-redundant-declaration)

namespace rondel::app {
namespace {

/// Hands the address to the desktop, where there is one.
void open_browser(const std::string& address) {
  if (std::getenv("DISPLAY") == nullptr && std::getenv("WAYLAND_DISPLAY") == nullptr) return;
  std::string program = "xdg-open";
  std::string word = address;
  char* words[] = {program.data(), word.data(), nullptr};
  pid_t child = 0;
  if (::posix_spawnp(&child, program.c_str(), nullptr, nullptr, words, environ) != 0) return;
  std::thread([child] {
    int status = 0;
    ::waitpid(child, &status, 0);
  }).detach();
}

}  // namespace

Outcome desk_command(const Arguments& arguments, Progress& progress) {
  ServeOptions options;
  options.host = arguments.value("--host").value_or(options.host);
  options.port = arguments.whole_number("--port").value_or(0);
  if (options.port < 0 || options.port > 65535) {
    throw InputError("--port", fmt::format("{} must be from 0 to 65535", options.port));
  }
  options.opened = [&](const std::string& address) {
    progress.note(safety_line());
    if (!is_loopback(options.host)) {
      progress.note(fmt::format(
          "Everyone who can reach {} and knows the address below can read and change this venue, "
          "and reads along on an open network: the address is not encrypted. Give it to nobody "
          "else, and stop the desk when you are done.",
          options.host));
    }
    // At once and whole, so that a script that started the desk can go on.
    std::printf("%s\n", address.c_str());
    std::fflush(stdout);
    progress.note("The desk is open; Ctrl+C closes it.");
    if (!arguments.has("--no-open")) open_browser(address);
  };
  serve_desk(arguments.words.at(0), options, progress);
  return {};
}

}  // namespace rondel::app
