#include "tools/rondel/help.h"

#include <fmt/format.h>

#include <algorithm>
#include <vector>

#include "calib/base/problem.h"
#include "tools/rondel/command_line.h"

namespace rondel::app {
namespace {

std::string flag_with_value(const Flag& flag) {
  std::string text(flag.name);
  if (!flag.value.empty()) text.append(" ").append(flag.value);
  return text;
}

std::string usage_of(const Command& command) {
  std::string text = "rondel " + std::string(command.name);
  if (!command.words.empty()) text.append(" ").append(command.words);
  return text;
}

bool takes_path(std::string_view placeholder) {
  return placeholder == "FILE" || placeholder == "FOLDER" || placeholder == "VENUE";
}

bool takes_folder(const Command& command) { return command.words.substr(0, 5) == "VENUE"; }

/// `text` between single quotes of a POSIX shell.
std::string shell_quoted(std::string_view text) {
  std::string out = "'";
  for (const char c : text) {
    if (c == '\'') {
      out += "'\\''";
    } else {
      out += c;
    }
  }
  return out + "'";
}

std::vector<Flag> all_flags(const Command& command) {
  std::vector<Flag> flags(command.flags.begin(), command.flags.end());
  const auto common = common_flags();
  flags.insert(flags.end(), common.begin(), common.end());
  return flags;
}

std::string words_joined(const std::vector<std::string>& words, std::string_view between) {
  std::string out;
  for (const std::string& word : words) {
    if (!out.empty()) out += between;
    out += word;
  }
  return out;
}

std::string bash_script() {
  std::vector<std::string> names;
  for (const Command& command : commands()) names.emplace_back(command.name);
  std::string out =
      "# bash completion for rondel. Use: source <(rondel completion bash)\n"
      "_rondel() {\n"
      "  local word=${COMP_WORDS[COMP_CWORD]} before=${COMP_WORDS[COMP_CWORD-1]} flags=''\n"
      "  COMPREPLY=()\n"
      "  if [ \"$COMP_CWORD\" -eq 1 ]; then\n"
      "    COMPREPLY=($(compgen -W " +
      shell_quoted(words_joined(names, " ") + " --help --version") +
      " -- \"$word\"))\n"
      "    return\n"
      "  fi\n"
      "  case ${COMP_WORDS[1]}:$before in\n";
  for (const Command& command : commands()) {
    for (const Flag& flag : command.flags) {
      const auto choices = choices_of(flag.value);
      if (!choices.empty()) {
        out += fmt::format("    {}:{}) COMPREPLY=($(compgen -W {} -- \"$word\")); return ;;\n",
                           command.name,
                           flag.name,
                           shell_quoted(words_joined(choices, " ")));
      } else if (!flag.value.empty() && !takes_path(flag.value)) {
        out += fmt::format("    {}:{}) return ;;\n", command.name, flag.name);
      } else if (flag.value == "FOLDER" || flag.value == "VENUE") {
        out += fmt::format("    {}:{}) COMPREPLY=($(compgen -d -- \"$word\")); return ;;\n",
                           command.name,
                           flag.name);
      }
    }
  }
  out += "  esac\n  case ${COMP_WORDS[1]} in\n";
  for (const Command& command : commands()) {
    std::vector<std::string> flags;
    for (const Flag& flag : all_flags(command)) flags.emplace_back(flag.name);
    out +=
        fmt::format("    {}) flags={} ;;\n", command.name, shell_quoted(words_joined(flags, " ")));
  }
  out +=
      "  esac\n"
      "  case $word in\n"
      "    -*) COMPREPLY=($(compgen -W \"$flags\" -- \"$word\")) ;;\n"
      "    *) COMPREPLY=($(compgen -f -- \"$word\")) ;;\n"
      "  esac\n"
      "}\n"
      "complete -o filenames -F _rondel rondel\n";
  return out;
}

/// Text of a zsh _arguments specification: brackets and colons have a meaning there.
std::string zsh_escaped(std::string_view text) {
  std::string out;
  for (const char c : text) {
    if (c == '[' || c == ']' || c == ':' || c == '\\') out += '\\';
    out += c;
  }
  return out;
}

std::string zsh_script() {
  std::string out =
      "#compdef rondel\n"
      "# zsh completion for rondel. Put it as _rondel into a folder of $fpath.\n"
      "_rondel() {\n"
      "  local -a names\n"
      "  names=(\n";
  for (const Command& command : commands()) {
    out += fmt::format(
        "    {}\n", shell_quoted(fmt::format("{}:{}", command.name, zsh_escaped(command.brief))));
  }
  out +=
      "  )\n"
      "  if (( CURRENT == 2 )); then\n"
      "    _describe 'command' names\n"
      "    return\n"
      "  fi\n"
      "  local name=$words[2]\n"
      "  shift words\n"
      "  (( CURRENT-- ))\n"
      "  case $name in\n";
  for (const Command& command : commands()) {
    out += fmt::format("    {})\n      _arguments", command.name);
    for (const Flag& flag : all_flags(command)) {
      std::string spec = fmt::format("{}[{}]", flag.name, zsh_escaped(flag.brief));
      if (!flag.value.empty()) {
        const auto choices = choices_of(flag.value);
        if (!choices.empty()) {
          spec += fmt::format(":word:({})", words_joined(choices, " "));
        } else if (flag.value == "FILE") {
          spec += ":file:_files";
        } else if (takes_path(flag.value)) {
          spec += ":folder:_files -/";
        } else {
          spec += fmt::format(":{}:", zsh_escaped(flag.value));
        }
      }
      out += fmt::format(" \\\n        {}", shell_quoted(spec));
    }
    if (!command.words.empty()) {
      out += std::string(" \\\n        ") +
             (takes_folder(command) ? "'1:venue:_files -/'" : "'1:file:_files'");
      out += " \\\n        '*:word:_files'";
    }
    out += "\n      ;;\n";
  }
  out +=
      "  esac\n"
      "}\n"
      "_rondel \"$@\"\n";
  return out;
}

std::string fish_script() {
  std::string out =
      "# fish completion for rondel. Use: rondel completion fish | source\n"
      "complete -c rondel -n __fish_use_subcommand -f -l version -d 'Print the version.'\n";
  const auto fish_quoted = [](std::string_view text) {
    std::string quoted = "'";
    for (const char c : text) {
      if (c == '\'' || c == '\\') quoted += '\\';
      quoted += c;
    }
    return quoted + "'";
  };
  for (const Command& command : commands()) {
    out += fmt::format("complete -c rondel -n __fish_use_subcommand -f -a {} -d {}\n",
                       command.name,
                       fish_quoted(command.brief));
    for (const Flag& flag : all_flags(command)) {
      out += fmt::format("complete -c rondel -n '__fish_seen_subcommand_from {}' -l {} -d {}",
                         command.name,
                         flag.name.substr(2),
                         fish_quoted(flag.brief));
      if (!flag.value.empty()) {
        const auto choices = choices_of(flag.value);
        if (!choices.empty()) {
          out += " -x -a " + fish_quoted(words_joined(choices, " "));
        } else if (takes_path(flag.value)) {
          out += " -r -F";
        } else {
          out += " -x";
        }
      }
      out += "\n";
    }
  }
  return out;
}

}  // namespace

std::string safety_line() {
  return "Before you take frames: lift the wheels off the floor or cut motor and kicker power; "
         "keep "
         "the sun out of the mirror; lamps and LED rings dazzle, do not look into them; the "
         "venue's "
         "and the event's rules come first.";
}

std::string program_help() {
  std::string out =
      "rondel - calibrates a robot that sees the floor through a camera under a convex mirror\n"
      "\n"
      "usage: rondel COMMAND [WORDS] [FLAGS]\n"
      "\n"
      "commands\n";
  std::size_t width = 0;
  for (const Command& command : commands()) width = std::max(width, command.name.size());
  for (const Command& command : commands()) {
    out += fmt::format("  {:<{}}  {}\n", command.name, width, command.brief);
  }
  out += "\nflags of every command\n";
  for (const Flag& flag : common_flags()) {
    out += fmt::format("  {:<{}}  {}\n", flag.name, width, flag.brief);
  }
  out +=
      "\n"
      "rondel COMMAND --help says what a command takes; rondel --version says which rondel it is.\n"
      "Exit status: 0 done; 1 done, and the verdict is 'not accepted'; 2 bad usage or bad input;\n"
      "70 a fault of rondel's own.\n"
      "\n"
      "Before you take frames: lift the wheels off the floor or cut motor and kicker power. Keep "
      "the\n"
      "sun out of the mirror. Lamps and LED rings dazzle: do not look into them. The venue's and "
      "the\n"
      "event's rules come first.\n";
  return out;
}

std::string command_help(const Command& command) {
  std::string out =
      fmt::format("{}\n\nusage: {} [FLAGS]\n\nflags\n", command.brief, usage_of(command));
  std::size_t width = 0;
  const std::vector<Flag> flags = all_flags(command);
  for (const Flag& flag : flags) width = std::max(width, flag_with_value(flag).size());
  for (const Flag& flag : flags) {
    out += fmt::format("  {:<{}}  {}\n", flag_with_value(flag), width, flag.brief);
  }
  return out;
}

std::string help_as_markdown() {
  const auto in_table = [](std::string_view text) {
    std::string escaped;
    for (const char c : text) {
      if (c == '|') escaped += '\\';
      escaped += c;
    }
    return escaped;
  };
  std::string out = "| command | does |\n| --- | --- |\n";
  for (const Command& command : commands()) {
    const std::string usage = usage_of(command).substr(std::string_view("rondel ").size());
    out += fmt::format("| `{}` | {}", in_table(usage), command.brief);
    for (const Flag& flag : command.flags) {
      out += fmt::format("<br>`{}` {}", in_table(flag_with_value(flag)), flag.brief);
    }
    out += " |\n";
  }
  return out;
}

std::string completion_script(std::string_view shell) {
  if (shell == "zsh") return zsh_script();
  if (shell == "fish") return fish_script();
  return bash_script();
}

}  // namespace rondel::app
