#include "calib/venue/words.h"

#include <gmock/gmock.h>

#include <locale>

namespace rondel {
namespace {

using testing::Optional;

TEST(ParseNumber, TakesPlainFiniteNumbersOnly) {
  EXPECT_THAT(parse_number("1.5"), Optional(1.5));
  EXPECT_THAT(parse_number("+.5e1"), Optional(5.0));
  EXPECT_THAT(parse_number("-0"), Optional(-0.0));
  for (const char* text :
       {"",     "+",     "-",    ".",     "1,5",   "1 ",  " 1",  "nan", "NaN", "inf",
        "-inf", "1e999", "0x10", "1_000", "1.2.3", "--1", "+-1", "1e",  "1m",  "1\n"}) {
    EXPECT_EQ(parse_number(text), std::nullopt) << "'" << text << "'";
  }
}

TEST(ParseNumber, IgnoresTheGlobalLocale) {
  class Awkward : public std::numpunct<char> {
    char do_decimal_point() const override { return ','; }
  };
  const std::locale before = std::locale::global({std::locale::classic(), new Awkward});
  const auto point = parse_number("1.5");
  const auto comma = parse_number("1,5");
  std::locale::global(before);
  EXPECT_THAT(point, Optional(1.5));
  EXPECT_EQ(comma, std::nullopt);
}

TEST(ParseWhole, TakesWhatFitsAnInt) {
  EXPECT_THAT(parse_whole("2147483647"), Optional(2147483647));
  EXPECT_THAT(parse_whole("-2147483648"), Optional(-2147483647 - 1));
  for (const char* text : {"2147483648", "1.0", "1e3", "", "+-1", "12a"}) {
    EXPECT_EQ(parse_whole(text), std::nullopt) << text;
  }
}

TEST(WhyNoNumber, SaysWhatToDoAboutTheUsualMistakes) {
  EXPECT_EQ(why_no_number("0,74"), "is not a number; write the decimals after a point");
  EXPECT_EQ(why_no_number("74 mm"),
            "is not a number; write the number alone, its unit is in the name");
  EXPECT_EQ(why_no_number("5%"),
            "is not a number; write the number alone, its unit is in the name");
  EXPECT_EQ(why_no_number("nan"), "is not a number");
  EXPECT_EQ(why_no_number(""), "is empty; write a number");
}

TEST(EditDistance, CountsTheFourKindsOfSlips) {
  EXPECT_EQ(edit_distance("range", "range"), 0);
  EXPECT_EQ(edit_distance("range", "rnage"), 1);  // two letters swapped
  EXPECT_EQ(edit_distance("range", "rang"), 1);
  EXPECT_EQ(edit_distance("range", "ranges"), 1);
  EXPECT_EQ(edit_distance("range", "renge"), 1);
  EXPECT_EQ(edit_distance("Range", "rANGE"), 0);
  EXPECT_EQ(edit_distance("", "abc"), 3);
  // The textbook pair for insertions, deletions and substitutions (Wagner and Fischer, 1974).
  EXPECT_EQ(edit_distance("kitten", "sitting"), 3);
  // Restricted to optimal string alignment: no letter is touched twice.
  EXPECT_EQ(edit_distance("ca", "abc"), 3);
}

TEST(NearMiss, GivesOneWordOrNone) {
  const std::vector<std::string> words = {"width_px", "height_px", "focal_px"};
  EXPECT_THAT(near_miss("widht_px", words), Optional(std::string("width_px")));
  EXPECT_THAT(near_miss("FOCAL_PX", words), Optional(std::string("focal_px")));
  EXPECT_EQ(near_miss("colour", words), std::nullopt);
  const std::vector<std::string> alike = {"red", "rod"};
  EXPECT_EQ(near_miss("rud", alike), std::nullopt) << "two words are equally near";
  EXPECT_EQ(hint_for("rud", alike), "; allowed: red, rod");
  EXPECT_EQ(hint_for("widht_px", words), "; did you mean 'width_px'?");
}

TEST(Quotable, IsOneLineOfWellFormedText) {
  EXPECT_EQ(quotable("a\nb\x1b[31m\x7f"), "a?b?[31m?");
  EXPECT_EQ(quotable("stra\xc3\x9f"
                     "e"),
            "stra\xc3\x9f"
            "e");
  EXPECT_EQ(quotable("\xff\xc3("), "?\?(");
  EXPECT_EQ(quotable(std::string(61, 'x')), std::string(60, 'x') + "...");
  EXPECT_EQ(quotable(std::string(60, 'x')), std::string(60, 'x'));
}

}  // namespace
}  // namespace rondel
