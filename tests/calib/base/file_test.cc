#include "calib/base/file.h"

#include <gtest/gtest.h>

#include <cmath>
#include <filesystem>
#include <locale>
#include <random>

#include "calib/base/problem.h"

namespace rondel {
namespace {

TEST(Sha256, MatchesThePublishedExamples) {
  // FIPS 180-4 example messages (NIST, "SHA256.pdf" example values).
  EXPECT_EQ(sha256_hex("abc"), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
  EXPECT_EQ(sha256_hex(""), "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
  EXPECT_EQ(sha256_hex("abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq"),
            "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1");
  EXPECT_EQ(sha256_hex(std::string(1000000, 'a')),
            "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0");
}

TEST(Crc32, MatchesTheCatalogueCheckValue) { EXPECT_EQ(crc32("123456789"), 0xCBF43926U); }

TEST(NumberText, ReadsBackToTheSameNumberWhateverTheLocale) {
  class Awkward : public std::numpunct<char> {
    char do_decimal_point() const override { return ';'; }
    char do_thousands_sep() const override { return '_'; }
    std::string do_grouping() const override { return "\3"; }
  };
  const std::locale before = std::locale::global({std::locale::classic(), new Awkward});
  EXPECT_EQ(number_text(1234.5), "1234.5");
  std::locale::global(before);
  std::mt19937_64 rng{20261201};
  std::uniform_real_distribution<double> exponent{-300.0, 300.0};
  for (int i = 0; i < 1000; ++i) {
    const double value = std::pow(10.0, exponent(rng));
    EXPECT_EQ(std::stod(number_text(value)), value);
  }
}

TEST(WriteFile, ReplacesWholeAndLeavesNothingBeside) {
  const auto folder = std::filesystem::path(testing::TempDir()) / "write_file_test";
  std::filesystem::remove_all(folder);
  write_file(folder / "a.txt", "old");
  write_file(folder / "a.txt", std::string("n\0w", 3));
  EXPECT_EQ(read_file(folder / "a.txt"), std::string("n\0w", 3));
  int files = 0;
  for ([[maybe_unused]] const auto& entry : std::filesystem::directory_iterator(folder)) ++files;
  EXPECT_EQ(files, 1);
}

TEST(WriteNewFile, LeavesAloneWhatIsThere) {
  const auto folder = std::filesystem::path(testing::TempDir()) / "write_new_file_test";
  std::filesystem::remove_all(folder);
  EXPECT_TRUE(write_new_file(folder / "a.txt", "first"));
  EXPECT_FALSE(write_new_file(folder / "a.txt", "second"));
  EXPECT_EQ(read_file(folder / "a.txt"), "first");
  // A link that leads nowhere is there too.
  std::filesystem::create_symlink("nowhere", folder / "link");
  EXPECT_FALSE(write_new_file(folder / "link", "third"));
  int files = 0;
  for ([[maybe_unused]] const auto& entry : std::filesystem::directory_iterator(folder)) ++files;
  EXPECT_EQ(files, 2);
}

TEST(ReadFile, NamesWhatCannotBeRead) {
  try {
    (void)read_file("/nowhere/marks.csv");
    FAIL();
  } catch (const InputError& error) {
    EXPECT_EQ(std::string(error.what()),
              "/nowhere/marks.csv: cannot be read; check the name and its permissions");
  }
}

}  // namespace
}  // namespace rondel
