#include "tools/rondel/command_line.h"

#include <gmock/gmock.h>

#include <filesystem>
#include <set>

#include "calib/base/file.h"
#include "tests/tools/rondel/run_rondel.h"
#include "tools/rondel/help.h"

namespace rondel::app {
namespace {

using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::IsEmpty;
using ::testing::Optional;

Outcome nothing(const Arguments& /*arguments*/, Progress& /*progress*/) { return {}; }

constexpr std::array kFlags = {Flag{"--name", "NAME", "A name."},
                               Flag{"--goal", "worst|mean", "A choice."},
                               Flag{"--again", "", "A switch."}};
constexpr Command kCommand{"at", "VENUE [U_PX V_PX]", "A command.", kFlags, nothing};

std::string complaint(const std::vector<std::string>& line) {
  try {
    (void)parse(kCommand, line);
  } catch (const InputError& error) {
    return error.what();
  }
  return "accepted";
}

TEST(Parse, TakesWordsAndFlagsInAnyOrder) {
  const Arguments a =
      parse(kCommand, {"--again", "hall", "--name", "x y", "-4.5", "--goal=mean", "-.5"});
  EXPECT_THAT(a.words, ElementsAre("hall", "-4.5", "-.5")) << "negative numbers are words";
  EXPECT_TRUE(a.has("--again"));
  EXPECT_FALSE(a.has("--json"));
  EXPECT_THAT(a.value("--name"), Optional(std::string("x y")));
  EXPECT_THAT(a.value("--goal"), Optional(std::string("mean")));
}

TEST(Parse, AfterTwoDashesAllAreWords) {
  EXPECT_THAT(parse(kCommand, {"--again", "--", "--odd", "-1", "--"}).words,
              ElementsAre("--odd", "-1", "--"));
}

TEST(Parse, SaysAllThatIsWrongAtOnce) {
  EXPECT_EQ(complaint({"--nam", "--goal", "best"}),
            "rondel at: unknown flag '--nam'; did you mean '--name'?\n"
            "rondel at: --goal: 'best' is none of its words; allowed: worst, mean\n"
            "rondel at: too few words; usage: rondel at VENUE [U_PX V_PX]");
}

TEST(Parse, NamesEachMistake) {
  EXPECT_EQ(complaint({"a", "1", "2", "3"}),
            "rondel at: '3' is one word too many; usage: rondel at VENUE [U_PX V_PX]");
  EXPECT_EQ(complaint({"a", "--name"}), "rondel at: --name needs a value: --name NAME");
  EXPECT_EQ(complaint({"a", "--name", ""}), "rondel at: --name needs a value: --name NAME");
  EXPECT_EQ(complaint({"a", "--name", "--again"}), "rondel at: --name needs a value: --name NAME");
  EXPECT_EQ(complaint({"a", "--name", "x", "--name", "y"}),
            "rondel at: --name is given twice; once is enough");
  EXPECT_EQ(complaint({"a", "-x"}),
            "rondel at: unknown flag '-x'; allowed: --name, --goal, "
            "--again, --json, --help");
  EXPECT_EQ(complaint({"a", "--again=yes"}), "rondel at: --again takes no value");
  EXPECT_EQ(complaint({"--help"}), "accepted") << "who asks for help need not give words";
}

TEST(Arguments, NumbersAreHeldAgainstTheirForm) {
  const Arguments a = parse(kCommand, {"hall", "--name", "1,5"});
  EXPECT_EQ(a.number("--goal"), std::nullopt);
  try {
    (void)a.number("--name");
    FAIL();
  } catch (const InputError& error) {
    EXPECT_STREQ(error.what(), "--name: '1,5' is not a number; write the decimals after a point");
  }
  EXPECT_THAT(parse(kCommand, {"hall", "--name", "-1.5"}).number("--name"), Optional(-1.5));
  EXPECT_THROW((void)parse(kCommand, {"hall", "--name", "1.5"}).whole_number("--name"), InputError);
}

TEST(WordCount, FollowsTheUsageLine) {
  const auto count = [](std::string_view words) {
    const WordCount c = word_count(words);
    return std::pair{c.least, c.most};
  };
  EXPECT_EQ(count(""), std::pair(0, 0));
  EXPECT_EQ(count("VENUE"), std::pair(1, 1));
  EXPECT_EQ(count("VENUE [U_PX V_PX]"), std::pair(1, 3));
  EXPECT_EQ(count("VENUE [IMAGE...]"), std::pair(1, -1));
  EXPECT_EQ(count("bash|zsh|fish"), std::pair(1, 1));
}

TEST(CommandTable, IsWellFormed) {
  std::set<std::string_view> names;
  for (const Command& command : commands()) {
    EXPECT_TRUE(names.insert(command.name).second) << command.name;
    EXPECT_TRUE(command.brief.ends_with(".")) << command.name;
    std::set<std::string_view> flags;
    for (const Flag& flag : common_flags()) flags.insert(flag.name);
    for (const Flag& flag : command.flags) {
      EXPECT_TRUE(flag.name.starts_with("--")) << flag.name;
      EXPECT_TRUE(flag.brief.ends_with(".")) << flag.name;
      EXPECT_TRUE(flags.insert(flag.name).second) << command.name << " " << flag.name;
    }
  }
}

TEST(Help, NamesEveryCommandAndEveryFlag) {
  const std::string all = program_help();
  for (const Command& command : commands()) {
    EXPECT_THAT(all, HasSubstr("  " + std::string(command.name) + " "));
    const std::string own = command_help(command);
    for (const Flag& flag : command.flags)
      EXPECT_THAT(own, HasSubstr(std::string(flag.name) + " "));
  }
  EXPECT_THAT(all, HasSubstr("cut motor and kicker power"));
}

TEST(Readme, BlockOfCommandsIsTheTablesOwn) {
  const std::string readme = read_file(std::filesystem::path(RONDEL_SOURCE_DIR) / "README.md");
  const std::string open = "<!-- commands -->\n";
  const std::size_t begin = readme.find(open);
  const std::size_t end = readme.find("<!-- /commands -->");
  ASSERT_NE(begin, std::string::npos);
  ASSERT_NE(end, std::string::npos);
  EXPECT_EQ(readme.substr(begin + open.size(), end - begin - open.size()), help_as_markdown())
      << "put what 'rondel help --markdown' prints between the markers";
}

/// What bash offers for a line whose last word is being typed.
std::vector<std::string> offered_by_bash(const std::string& words) {
  const std::filesystem::path folder = std::filesystem::path(::testing::TempDir()) / "completion";
  std::filesystem::remove_all(folder);
  std::filesystem::create_directories(folder / "hall");
  write_file(folder / "hat.csv", "");
  write_file(folder / "completion.bash", completion_script("bash"));
  const std::string line = "source ./completion.bash; COMP_WORDS=(" + words +
                           "); COMP_CWORD=$((${#COMP_WORDS[@]}-1)); _rondel; "
                           "printf '%s\\n' \"${COMPREPLY[@]}\"";
  const auto ran = rondel::testing::run_in(folder, "/bin/bash", {"-c", line});
  EXPECT_EQ(ran.status, 0) << ran.err;
  EXPECT_EQ(ran.err, "");
  std::vector<std::string> offered;
  std::string word;
  for (const char c : ran.out) {
    if (c != '\n') {
      word += c;
    } else if (!word.empty()) {
      offered.push_back(std::exchange(word, {}));
    }
  }
  return offered;
}

TEST(Completion, BashOffersCommandsFlagsWordsAndPaths) {
  EXPECT_THAT(offered_by_bash("rondel ru"), ElementsAre("run"));
  EXPECT_THAT(offered_by_bash("rondel new --"),
              ::testing::IsSupersetOf({"--from", "--name", "--json", "--help"}));
  EXPECT_THAT(offered_by_bash("rondel advise hall --goal ''"), ElementsAre("worst", "mean"));
  EXPECT_THAT(offered_by_bash("rondel run ha"), ::testing::UnorderedElementsAre("hall", "hat.csv"));
  EXPECT_THAT(offered_by_bash("rondel check hall --batch ha"), ElementsAre("hall"));
  EXPECT_THAT(offered_by_bash("rondel grab hall --count ha"), IsEmpty());
}

TEST(Completion, EveryShellsScriptNamesEveryFlag) {
  for (const Command& command : commands()) {
    for (const Flag& flag : command.flags) {
      for (const char* shell : {"bash", "zsh", "fish"}) {
        const std::string name(shell == std::string("fish") ? flag.name.substr(2) : flag.name);
        EXPECT_THAT(completion_script(shell), HasSubstr(name)) << shell;
      }
    }
  }
}

}  // namespace
}  // namespace rondel::app
