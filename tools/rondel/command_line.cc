#include "tools/rondel/command_line.h"

#include <CLI/CLI.hpp>
#include <algorithm>
#include <array>

#include "calib/base/problem.h"
#include "calib/venue/words.h"

namespace rondel::app {
namespace {

constexpr std::array kCommonFlags = {
    Flag{"--json", "", "Print one JSON document on standard output."},
    Flag{"--help", "", "Say what the command does and what it takes."},
};

bool looks_like_flag(const std::string& word) {
  return word.size() > 1 && word[0] == '-' && !parse_number(word);
}

/// Everything that is wrong with a command line, each with where to look.
class Complaints {
 public:
  explicit Complaints(const Command& command) : where_("rondel " + std::string(command.name)) {}
  void add(const std::string& what) { problems_.push_back({where_, what}); }
  void throw_if_any() const {
    if (!problems_.empty()) throw InputError(problems_);
  }

 private:
  std::string where_;
  std::vector<Problem> problems_;
};

std::string needs_a_value(const Flag& flag) {
  std::string text(flag.name);
  text.append(" needs a value: ").append(flag.name).append(" ").append(flag.value);
  return text;
}

struct Binding {
  const Flag* flag = nullptr;
  CLI::Option* option = nullptr;
  std::vector<std::string> values;
};

}  // namespace

std::optional<std::string> Arguments::value(std::string_view flag) const {
  const auto found = flags.find(flag);
  if (found == flags.end()) return std::nullopt;
  return found->second;
}

std::optional<double> Arguments::number(std::string_view flag) const {
  const auto text = value(flag);
  if (!text) return std::nullopt;
  const auto number = parse_number(*text);
  if (!number) {
    throw InputError(std::string(flag), "'" + quotable(*text) + "' " + why_no_number(*text));
  }
  return number;
}

std::optional<int> Arguments::whole_number(std::string_view flag) const {
  const auto text = value(flag);
  if (!text) return std::nullopt;
  const auto number = parse_whole(*text);
  if (!number) {
    throw InputError(std::string(flag), "'" + quotable(*text) + "' is not a whole number");
  }
  return number;
}

std::span<const Flag> common_flags() { return kCommonFlags; }

const Command& find_command(const std::string& name) {
  std::vector<std::string> names;
  for (const Command& command : commands()) {
    if (command.name == name) return command;
    names.emplace_back(command.name);
  }
  const auto meant = near_miss(name, names);
  throw InputError("rondel",
                   "unknown command '" + quotable(name) + "'; " +
                       (meant ? "did you mean '" + *meant + "'?" : "rondel --help lists them"));
}

WordCount word_count(std::string_view words) {
  WordCount count;
  int depth = 0;
  bool in_word = false;
  bool endless = false;
  for (std::size_t i = 0; i < words.size(); ++i) {
    const char c = words[i];
    if (c == '[') ++depth;
    if (c == ']') --depth;
    if (words.substr(i, 3) == "...") endless = true;
    const bool letter = c != '[' && c != ']' && c != ' ';
    if (letter && !in_word) {
      ++count.most;
      if (depth == 0) ++count.least;
    }
    in_word = letter;
  }
  if (endless) count.most = -1;
  return count;
}

std::vector<std::string> choices_of(std::string_view value) {
  std::vector<std::string> choices;
  if (value.find('|') == std::string_view::npos) return choices;
  while (true) {
    const std::size_t bar = value.find('|');
    choices.emplace_back(value.substr(0, bar));
    if (bar == std::string_view::npos) return choices;
    value.remove_prefix(bar + 1);
  }
}

Arguments parse(const Command& command, const std::vector<std::string>& line) {
  CLI::App parser;
  parser.set_help_flag();
  parser.allow_extras();
  std::vector<Binding> bindings;
  bindings.reserve(command.flags.size() + kCommonFlags.size());
  std::vector<std::string> names;
  const auto bind = [&](const Flag& flag) {
    Binding& binding = bindings.emplace_back();
    binding.flag = &flag;
    names.emplace_back(flag.name);
    if (flag.value.empty()) {
      binding.option = parser.add_flag(std::string(flag.name));
    } else {
      binding.option = parser.add_option(std::string(flag.name), binding.values);
      // One value each time: what follows is a word again.
      binding.option->expected(1)->take_all()->allow_extra_args(false);
    }
  };
  for (const Flag& flag : command.flags) bind(flag);
  for (const Flag& flag : kCommonFlags) bind(flag);

  Complaints complaints(command);
  Arguments arguments;
  // All after "--" are words whatever they look like; the parser below never sees them.
  const auto marker = std::find(line.begin(), line.end(), "--");
  for (auto word = line.begin(); word != marker; ++word) {
    const std::size_t equals = word->find('=');
    for (const Binding& binding : bindings) {
      if (equals != std::string::npos && binding.flag->value.empty() &&
          binding.flag->name == std::string_view(*word).substr(0, equals)) {
        complaints.add(std::string(binding.flag->name) + " takes no value");
      }
    }
  }
  std::vector<std::string> reversed;
  for (auto word = marker; word != line.begin();) reversed.push_back(*--word);
  try {
    parser.parse(reversed);
  } catch (const CLI::ArgumentMismatch&) {
    // A flag that takes a value stands last: find it to say so in our words.
    const Flag* last = nullptr;
    if (marker != line.begin()) {
      for (const Binding& binding : bindings) {
        if (binding.flag->name == *(marker - 1)) last = binding.flag;
      }
    }
    complaints.add(last != nullptr ? needs_a_value(*last) : "the flags cannot be read");
  } catch (const CLI::ParseError& error) {
    complaints.add(error.what());
  }
  complaints.throw_if_any();

  for (const std::string& word : parser.remaining()) {
    if (looks_like_flag(word)) {
      const std::string name = word.substr(0, word.find('='));
      complaints.add("unknown flag '" + quotable(name) + "'" + hint_for(name, names));
    } else {
      arguments.words.push_back(word);
    }
  }
  if (marker != line.end()) arguments.words.insert(arguments.words.end(), marker + 1, line.end());

  for (const Binding& binding : bindings) {
    if (binding.option->count() == 0) continue;
    const std::string name(binding.flag->name);
    if (binding.flag->value.empty()) {
      arguments.flags[name] = "";
      continue;
    }
    if (binding.values.size() > 1) complaints.add(name + " is given twice; once is enough");
    const std::string value = binding.values.empty() ? "" : binding.values.front();
    if (value.empty() || (looks_like_flag(value) && value.substr(0, 2) == "--")) {
      complaints.add(needs_a_value(*binding.flag));
    }
    const std::vector<std::string> choices = choices_of(binding.flag->value);
    if (!choices.empty() && std::find(choices.begin(), choices.end(), value) == choices.end()) {
      std::string text = name;
      text.append(": '").append(quotable(value)).append("' is none of its words");
      complaints.add(text.append(hint_for(value, choices)));
    }
    arguments.flags[name] = value;
  }

  if (!arguments.has("--help")) {
    const WordCount count = word_count(command.words);
    const int given = static_cast<int>(arguments.words.size());
    if (given < count.least) {
      complaints.add("too few words; usage: rondel " + std::string(command.name) + " " +
                     std::string(command.words));
    } else if (count.most >= 0 && given > count.most) {
      complaints.add("'" + quotable(arguments.words[static_cast<std::size_t>(count.most)]) +
                     "' is one word too many; usage: rondel " + std::string(command.name) + " " +
                     std::string(command.words));
    }
    const std::vector<std::string> choices = choices_of(command.words);
    if (!choices.empty() && given == 1 &&
        std::find(choices.begin(), choices.end(), arguments.words[0]) == choices.end()) {
      complaints.add("'" + quotable(arguments.words[0]) + "' is none of its words" +
                     hint_for(arguments.words[0], choices));
    }
  }
  complaints.throw_if_any();
  return arguments;
}

}  // namespace rondel::app
