#include "tools/desk/journal.h"

#include <gmock/gmock.h>

#include <filesystem>
#include <random>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel::desk {
namespace {

class JournalTest : public testing::Test {
 protected:
  JournalTest() : folder_(std::filesystem::path(testing::TempDir()) / "journal_test") {
    std::filesystem::remove_all(folder_);
    std::filesystem::create_directories(folder_);
  }
  std::filesystem::path folder_;
};

constexpr const char* kHeader = "image,u_px";

TEST_F(JournalTest, AddsToAMissingFileAndToOneWithoutALastLineEnd) {
  Journal journal(folder_);
  journal.add_row("marks.csv", kHeader, "a,1");
  EXPECT_EQ(read_file(folder_ / "marks.csv"), "image,u_px\na,1\n");
  write_file(folder_ / "tape.csv", "image,u_px\nb,2");
  journal.add_row("tape.csv", kHeader, "c,3");
  EXPECT_EQ(read_file(folder_ / "tape.csv"), "image,u_px\nb,2\nc,3\n");
  journal.undo();
  journal.undo();
  EXPECT_EQ(read_file(folder_ / "tape.csv"), "image,u_px\nb,2");
  EXPECT_FALSE(std::filesystem::exists(folder_ / "marks.csv"));
}

TEST_F(JournalTest, ChangesARowAndKeepsEveryOtherByte) {
  write_file(folder_ / "marks.csv", "\xEF\xBB\xBFimage,u_px\r\na,1\r\na,1\r\nb,2\r\n");
  Journal journal(folder_);
  journal.change_row("marks.csv", 3, "a,1", "a,9");
  EXPECT_EQ(read_file(folder_ / "marks.csv"), "\xEF\xBB\xBFimage,u_px\r\na,1\r\na,9\r\nb,2\r\n");
  journal.change_row("marks.csv", 2, "a,1", "");
  EXPECT_EQ(read_file(folder_ / "marks.csv"), "\xEF\xBB\xBFimage,u_px\r\na,9\r\nb,2\r\n");
}

TEST_F(JournalTest, FindsARowThatMovedAndRefusesOneThatChanged) {
  write_file(folder_ / "marks.csv", "image,u_px\na,1\nb,2\n");
  Journal journal(folder_);
  write_file(folder_ / "marks.csv", "image,u_px\nnew,0\na,1\nb,2\n");  // another hand
  journal.change_row("marks.csv", 3, "b,2", "b,3");
  EXPECT_EQ(read_file(folder_ / "marks.csv"), "image,u_px\nnew,0\na,1\nb,3\n");
  EXPECT_THROW(journal.change_row("marks.csv", 2, "x,1", "x,2"), Conflict);
  EXPECT_THROW(journal.change_row("marks.csv", 1, "image,u_px", "z"), Conflict) << "the header";
}

TEST_F(JournalTest, NeverOverwritesAnothersChange) {
  write_file(folder_ / "venue.yaml", "name: A\n");
  Journal journal(folder_);
  const std::string base = sha256_hex("name: A\n");
  journal.replace("venue.yaml", base, "name: B\n");
  write_file(folder_ / "venue.yaml", "name: C\n");
  EXPECT_THROW(journal.undo(), Conflict);
  EXPECT_THROW(journal.replace("venue.yaml", base, "name: D\n"), Conflict);
  EXPECT_EQ(read_file(folder_ / "venue.yaml"), "name: C\n");
}

TEST_F(JournalTest, FiftyUndosAndRedosReturnToTheSameBytes) {
  Journal journal(folder_);
  std::mt19937 rng{20261201};
  std::vector<std::string> states;
  const auto state = [&] {
    return std::filesystem::exists(folder_ / "marks.csv") ? read_file(folder_ / "marks.csv")
                                                          : std::string("absent");
  };
  states.push_back(state());
  for (int i = 0; i < 50; ++i) {
    if (i % 3 == 2) {
      const std::string text = state();
      const std::size_t end = text.rfind('\n', text.size() - 2);
      const std::string last = text.substr(end + 1, text.size() - end - 2);
      journal.change_row("marks.csv", 0, last, i % 2 == 0 ? "" : "changed," + std::to_string(i));
    } else {
      journal.add_row("marks.csv", kHeader, "row," + std::to_string(rng() % 1000));
    }
    states.push_back(state());
  }
  for (int i = 49; i >= 0; --i) {
    journal.undo();
    ASSERT_EQ(state(), states[static_cast<std::size_t>(i)]) << i;
  }
  EXPECT_THROW(journal.undo(), InputError);
  for (std::size_t i = 1; i <= 50; ++i) {
    journal.redo();
    ASSERT_EQ(state(), states[i]) << i;
  }
  EXPECT_THROW(journal.redo(), InputError);
}

TEST(CsvLine, QuotesWhatNeedsIt) {
  // RFC 4180, section 2, rules 5 to 7.
  EXPECT_EQ(csv_line({"a", "b,c", "say \"x\"", ""}), "a,\"b,c\",\"say \"\"x\"\"\",");
}

}  // namespace
}  // namespace rondel::desk
