#include "calib/venue/csv.h"

#include <gmock/gmock.h>

#include "calib/venue/yaml_map.h"

namespace rondel {
namespace {

using testing::ElementsAre;
using testing::IsEmpty;

struct Read {
  std::vector<std::vector<std::string>> cells;  ///< of columns a and b
  std::vector<int> lines;
  std::vector<std::string> problems;
};

Read read(std::string_view text) {
  std::vector<Problem> problems;
  Read result;
  for (const CsvRow& row : read_csv(text, "f.csv", {{"a", "b"}, {"note"}}, problems).rows) {
    result.cells.push_back({row.cell("a"), row.cell("b")});
    result.lines.push_back(row.line());
  }
  for (const Problem& problem : problems) result.problems.push_back(to_text(problem));
  return result;
}

TEST(ReadCsv, TakesWhatSpreadsheetsWrite) {
  // A byte-order mark, Windows line endings, blanks around cells, blank lines, rows of commas only,
  // columns in another order, and no line end at the end.
  const Read r = read("\xEF\xBB\xBF b , a,note\r\n\r\n2,1,\r\n,,\r\n \t 4,3 ,x");
  EXPECT_THAT(r.problems, IsEmpty());
  EXPECT_THAT(r.cells, ElementsAre(ElementsAre("1", "2"), ElementsAre("3", "4")));
  EXPECT_THAT(r.lines, ElementsAre(3, 5));
}

TEST(ReadCsv, TakesOldLineEndings) {
  const Read r = read("a,b\r1,2\r3,4\r");
  EXPECT_THAT(r.problems, IsEmpty());
  EXPECT_THAT(r.cells, ElementsAre(ElementsAre("1", "2"), ElementsAre("3", "4")));
  EXPECT_THAT(r.lines, ElementsAre(2, 3));
}

TEST(ReadCsv, QuotedCellsHoldCommasQuotesAndLineBreaks) {
  const Read r = read("a,b\n\"x, y\", \"say \"\"hm\"\"\" \n\"one\ntwo\",2\n3,4\n");
  EXPECT_THAT(r.problems, IsEmpty());
  EXPECT_THAT(
      r.cells,
      ElementsAre(
          ElementsAre("x, y", "say \"hm\""), ElementsAre("one\ntwo", "2"), ElementsAre("3", "4")));
  EXPECT_THAT(r.lines, ElementsAre(2, 3, 5)) << "a line break inside quotes counts as a line";
}

TEST(ReadCsv, WhatItWritesReadsBack) {
  for (const std::string cell : {"plain", "a,b", "\"", "\"\"", "one\ntwo", "a\"b"}) {
    const Read r = read("a,b\n" + csv_cell(cell) + ",2\n");
    ASSERT_THAT(r.problems, IsEmpty()) << cell;
    EXPECT_EQ(r.cells.at(0).at(0), cell);
  }
}

TEST(ReadCsv, NamesEveryTroubleWithItsLine) {
  struct Case {
    const char* text;
    std::vector<std::string> problems;
  };
  const std::vector<Case> cases = {
      {"", {"f.csv: is empty; its first line must be a,b"}},
      {"\n\n", {"f.csv: is empty; its first line must be a,b"}},
      {"\na;b\n1;2\n", {"f.csv:2: the columns are separated by ';'; save the file with commas"}},
      {"a\tb\n", {"f.csv:1: the columns are separated by tabs; save the file with commas"}},
      {"1,2\n3,4\n", {"f.csv:1: the header is missing; the first line must be a,b"}},
      {"a\n1\n", {"f.csv:1: column 'b' is missing; the header must name a,b"}},
      {"a,b,a\n", {"f.csv:1: column 'a' is there twice; keep one"}},
      {"a,b,notr\n", {"f.csv:1: column 'notr': unknown column; did you mean 'note'?"}},
      {"a,b,\n", {"f.csv:1: column '': unknown column; allowed: a, b, note"}},
      {"a,b\n1\n1,2,3\n",
       {"f.csv:2: the row has 1 cells and the header 2; leave unused cells empty, but keep their "
        "commas",
        "f.csv:3: the row has 3 cells and the header 2; leave unused cells empty, but keep their "
        "commas"}},
      {"a,b\n\"1,2\n3,4\n", {"f.csv:2: a quote is not closed; add the closing '\"'"}},
      {"a,b\n\"1\"x,2\n",
       {"f.csv:2: text follows a closing quote; double a quote that belongs to the text"}},
  };
  for (const Case& c : cases) EXPECT_EQ(read(c.text).problems, c.problems) << c.text;
  EXPECT_THAT(read(std::string_view("a,b\n1,\0\n", 8)).problems,
              ElementsAre("f.csv: holds zero bytes; save it as plain text (UTF-8)"));
}

TEST(CsvRow, NumbersKeepToTheirLimits) {
  std::vector<Problem> problems;
  const Limits limits{0.0, 2.0, true};
  const auto table = read_csv("a,b\n2,\n0,x\nnan,-1\n,3\n", "f.csv", {{"a", "b"}}, problems);
  std::vector<std::optional<double>> values;
  for (const CsvRow& row : table.rows) {
    values.push_back(row.number("a", limits));
    values.push_back(row.number_if_any("b", limits));
  }
  EXPECT_THAT(values.at(0), testing::Optional(2.0));
  for (std::size_t i = 1; i < values.size(); ++i) EXPECT_EQ(values[i], std::nullopt) << i;
  std::vector<std::string> said;
  for (const Problem& problem : problems) said.push_back(to_text(problem));
  EXPECT_THAT(said,
              ElementsAre("f.csv:3: a = 0: must be above 0 and at most 2",
                          "f.csv:3: b = x: is not a number; it must be above 0 and at most 2",
                          "f.csv:4: a = nan: is not a number; it must be above 0 and at most 2",
                          "f.csv:4: b = -1: must be above 0 and at most 2",
                          "f.csv:5: a is empty; it must be above 0 and at most 2",
                          "f.csv:5: b = 3: must be above 0 and at most 2"));
}

}  // namespace
}  // namespace rondel
