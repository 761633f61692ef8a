#include "calib/link/link_plan.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <algorithm>
#include <string>

#include "calib/base/problem.h"
#include "calib/link/checksums.h"

namespace rondel::link {
namespace {

using ::testing::HasSubstr;

// Check values of the CRC catalogue for "123456789".
TEST(Checksums, HaveTheirCheckValues) {
  const std::string text = "123456789";
  const std::vector<std::uint8_t> bytes(text.begin(), text.end());
  EXPECT_EQ(crc8(bytes), 0xF4);
  EXPECT_EQ(crc16(bytes), 0x29B1);
  EXPECT_EQ(sum7(bytes), (9 * 0x30 + 45) % 128);
}

// CRC-8 with polynomial 07 has Hamming distance 4 up to 119 data bits (computed): no one, two or
// three flipped bits go unseen.
TEST(Checksums, Crc8SeesUpToThreeFlippedBits) {
  const std::vector<std::uint8_t> bytes(5, 0x5A);
  const std::uint8_t right = crc8(bytes);
  for (unsigned a = 0; a < 40; ++a) {
    for (unsigned b = a; b < 40; ++b) {
      for (unsigned c = b; c < 40; ++c) {
        std::vector<std::uint8_t> wrong = bytes;
        for (const unsigned bit : {a, b, c}) {
          wrong[bit / 8] = static_cast<std::uint8_t>(wrong[bit / 8] ^ (1U << bit % 8));
        }
        if (wrong != bytes) {
          EXPECT_NE(crc8(wrong), right);
        }
      }
    }
  }
}

// Computed for a 16 MHz clock; limits recommended for 8N1 in AVR data sheets.
TEST(ClockError, HasTheDataSheetsFigures) {
  EXPECT_NEAR(clock_error(16e6, 16, 115200).relative, -0.0355, 5e-5);
  EXPECT_NEAR(clock_error(16e6, 8, 115200).relative, 0.0212, 5e-5);
  EXPECT_NEAR(clock_error(16e6, 16, 57600).relative, 0.0212, 5e-5);
  EXPECT_NEAR(clock_error(16e6, 8, 57600).relative, -0.0079, 5e-5);
  EXPECT_EQ(clock_error(16e6, 16, 115200).tolerable, 0.02);
  EXPECT_EQ(clock_error(16e6, 8, 115200).tolerable, 0.015);
}

TEST(LinkPlan, CountsBytesAndTime) {
  LinkSpec link;
  link.baud = 9600;
  link.reports_per_second = 60;
  // 8N1: 960 bytes a second, 16 per frame at 60 frames a second.
  const LinkPlan plan = plan_link(link, 7, "venue.yaml");
  EXPECT_EQ(plan.report.bytes, 15);
  EXPECT_DOUBLE_EQ(plan.utilisation, 15.0 / 16.0);
  EXPECT_DOUBLE_EQ(plan.report_s, 15.0 / 960.0);
  EXPECT_DOUBLE_EQ(plan.worst_age_s, 1.0 / 60.0 + 15.0 / 960.0);
}

TEST(LinkPlan, CodesAboveSevenBitsTakeTwoBytes) {
  LinkSpec link;
  link.bearing_codes = 129;
  link.range_bits = 8;
  link.check = CheckByte::crc8;
  EXPECT_EQ(report_layout(link, 2).bytes, 2 * 4 + 2);
  link.bearing_codes = 128;
  link.range_bits = 7;
  link.check = CheckByte::none;
  EXPECT_EQ(report_layout(link, 2).bytes, 4);
}

TEST(LinkPlan, RefusesWithTheArithmetic) {
  LinkSpec link;
  link.baud = 9600;
  link.reports_per_second = 60;
  try {
    (void)plan_link(link, 8, "venue.yaml");
    FAIL();
  } catch (const InputError& error) {
    EXPECT_THAT(error.what(), HasSubstr("17 bytes a report x 10 bits a byte x 60 reports"));
    EXPECT_THAT(error.what(), HasSubstr("10200 bits"));
    EXPECT_THAT(error.what(), HasSubstr("at most 56.4 reports"));
  }
}

TEST(LinkPlan, WarnsAboutClocksThatDoNotAgree) {
  LinkSpec link;
  EXPECT_FALSE(plan_link(link, 1, "venue.yaml").warnings.empty());
  link.baud = 250000;  // divides 8, 16, 20 and 48 MHz
  for (const std::string& warning : plan_link(link, 1, "venue.yaml").warnings) {
    EXPECT_THAT(warning, ::testing::Not(HasSubstr("16 MHz")));
  }
}

}  // namespace
}  // namespace rondel::link
