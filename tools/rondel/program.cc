#include "tools/rondel/program.h"

#include <unistd.h>

#include <atomic>
#include <csignal>
#include <cstdio>
#include <exception>
#include <filesystem>
#include <mutex>
#include <nlohmann/json.hpp>
#include <string_view>

#include "calib/base/problem.h"
#include "calib/venue/words.h"
#include "tools/rondel/command_line.h"
#include "tools/rondel/help.h"

namespace rondel::app {
namespace {

// The one thing a signal handler can reach.
std::atomic<bool> stop_asked{false};  // NOLINT(readability-identifier-naming)
static_assert(std::atomic<bool>::is_always_lock_free);

void on_interrupt(int /*signal*/) { stop_asked = true; }

void print(std::FILE* stream, std::string_view text) {
  std::fwrite(text.data(), 1, text.size(), stream);
}

/// Progress on a terminal: one line that is written over; elsewhere only the remarks.
class TerminalProgress : public Progress {
 public:
  TerminalProgress() : terminal_(::isatty(STDERR_FILENO) == 1) {}
  ~TerminalProgress() override { clear(); }
  TerminalProgress(const TerminalProgress&) = delete;
  TerminalProgress& operator=(const TerminalProgress&) = delete;

  void at(std::string_view what, int done, int total) override {
    if (!terminal_) return;
    const std::lock_guard lock(mutex_);
    const std::string line =
        std::string(what) + " " + std::to_string(done) + " of " + std::to_string(total);
    if (line == shown_) return;
    clear_line();
    if (done < total) {
      print(stderr, line);
      shown_ = line;
    }
  }
  void note(std::string_view text) override {
    const std::lock_guard lock(mutex_);
    clear_line();
    print(stderr, std::string(text) + "\n");
  }
  [[nodiscard]] bool cancelled() const override { return stop_asked; }

  void clear() {
    const std::lock_guard lock(mutex_);
    clear_line();
  }

 private:
  void clear_line() {
    if (!shown_.empty()) print(stderr, "\r\x1b[K");
    shown_.clear();
  }

  bool terminal_ = false;
  std::mutex mutex_;
  std::string shown_;
};

int status_of(Exit exit) { return static_cast<int>(exit); }

int print_problems(const std::vector<Problem>& problems, bool as_json) {
  for (const Problem& problem : problems) print(stderr, to_text(problem) + "\n");
  if (as_json) {
    nlohmann::ordered_json document;
    document["problems"] = nlohmann::ordered_json::array();
    for (const Problem& problem : problems) {
      document["problems"].push_back({{"where", problem.where}, {"what", problem.what}});
    }
    print(stdout,
          document.dump(2, ' ', false, nlohmann::ordered_json::error_handler_t::replace) + "\n");
  }
  return status_of(Exit::bad_input);
}

/// Help, version and the like: what needs no command of the table. -1 where it is none of these.
int answer_about_itself(const std::vector<std::string>& arguments) {
  if (arguments.empty()) {
    print(stderr, program_help());
    return status_of(Exit::bad_input);
  }
  const std::string& first = arguments.front();
  if (first == "--version" || first == "version") {
    print(stdout, "rondel " RONDEL_VERSION "\n");
    return status_of(Exit::done);
  }
  if (first == "--help" || first == "-h" || first == "help") {
    if (arguments.size() == 1) {
      print(stdout, program_help());
    } else if (arguments[1] == "--markdown") {
      print(stdout, help_as_markdown());
    } else {
      print(stdout, command_help(find_command(arguments[1])));
    }
    return status_of(Exit::done);
  }
  return -1;
}

int run_command_line(const std::vector<std::string>& arguments) {
  if (const int status = answer_about_itself(arguments); status >= 0) return status;
  if (arguments.front().substr(0, 1) == "-") {
    throw InputError("rondel", "the command comes first; usage: rondel COMMAND [WORDS] [FLAGS]");
  }
  const Command& command = find_command(arguments.front());
  const std::vector<std::string> line(arguments.begin() + 1, arguments.end());
  if (line.size() == 1 && line.front() == "-h") {
    print(stdout, command_help(command));
    return status_of(Exit::done);
  }
  const Arguments parsed = parse(command, line);
  if (parsed.has("--help")) {
    print(stdout, command_help(command));
    return status_of(Exit::done);
  }
  std::signal(SIGINT, on_interrupt);
  TerminalProgress progress;
  const Outcome outcome = command.run(parsed, progress);
  progress.clear();
  if (parsed.has("--json")) {
    if (!outcome.document.is_null()) {
      print(stdout,
            outcome.document.dump(2, ' ', false, nlohmann::ordered_json::error_handler_t::replace) +
                "\n");
    }
  } else if (!outcome.summary.empty()) {
    print(stdout, outcome.summary + (outcome.summary.back() == '\n' ? "" : "\n"));
  }
  if (std::fflush(stdout) != 0) {
    throw InputError("standard output", "cannot be written; is the disk full?");
  }
  return outcome.status;
}

}  // namespace

int run_program(const std::vector<std::string>& arguments) noexcept {
  bool as_json = false;
  for (const std::string& argument : arguments) as_json = as_json || argument == "--json";
  try {
    return run_command_line(arguments);
  } catch (const InputError& error) {
    return print_problems(error.problems(), as_json);
  } catch (const std::filesystem::filesystem_error& error) {
    return print_problems({{error.path1().string(),
                            error.code().message() + "; check the folder and its permissions"}},
                          as_json);
  } catch (const std::exception& error) {
    print(stderr,
          std::string("rondel: a fault of its own: ") + error.what() +
              "; please report it with the command that led to it\n");
  }
  return status_of(Exit::own_fault);
}

}  // namespace rondel::app
