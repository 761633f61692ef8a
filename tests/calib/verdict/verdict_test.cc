#include "calib/verdict/verdict.h"

#include <gmock/gmock.h>

#include <cmath>

namespace rondel::verdict {
namespace {

using testing::ElementsAre;
using testing::HasSubstr;

VenueSpec quay() {
  VenueSpec venue;
  venue.name = "Test";
  venue.objects = {{"buoy", Shape::ball, 0.074, {}}, {"dock", Shape::box, 0.0, {}}};
  return venue;
}

Find reported(double range_m, double bearing_deg, int object = 0, int area_px = 50) {
  Find find;
  find.object = object;
  find.area_px = area_px;
  find.reported = FloorSpot{range_m, bearing_deg * kRadPerDeg};
  find.unrounded = FloorSpot{range_m - 0.004, bearing_deg * kRadPerDeg};
  find.noise_range_m = 0.003;
  return find;
}

TapeEntry taped(int image, double range_m, double bearing_deg, int object = 0) {
  TapeEntry entry;
  entry.line = 2 + image;
  entry.image = image;
  entry.object = object;
  entry.range_m = range_m;
  entry.bearing_rad = bearing_deg * kRadPerDeg;
  return entry;
}

TapeEntry absent(int image, int object = 0) {
  TapeEntry entry;
  entry.image = image;
  entry.object = object;
  entry.absent = true;
  return entry;
}

TEST(Judge, AcceptsWhatIsInsideAndSaysWhatHeld) {
  const std::vector<ImageEntry> images = {{"frames/noon/1.png", "noon"},
                                          {"frames/dusk/2.png", "dusk"}};
  const std::vector<TapeEntry> tape = {taped(0, 1.0, 10.0), taped(1, 2.0, -170.0)};
  const std::vector<std::vector<Find>> finds = {{reported(1.03, 11.0)},
                                                {reported(1.94, 179.0 - 360.0 + 11.0)}};
  const Verdict v = judge(quay(), images, tape, finds);
  EXPECT_TRUE(v.accepted);
  EXPECT_EQ(v.counted, 2);
  EXPECT_EQ(v.found, 2);
  EXPECT_NEAR(*v.rows[0].range_error_m, 0.03, 1e-12);
  EXPECT_NEAR(*v.rows[0].bearing_error_rad, 1.0 * kRadPerDeg, 1e-12);
  EXPECT_NEAR(*v.rows[0].rounding_range_m, 0.004, 1e-12);
  EXPECT_NEAR(*v.rows[1].range_error_m, -0.06, 1e-12);
  // By hand: relative errors +0.03, -0.03.
  EXPECT_NEAR(*v.all.range_rms_relative.value, 0.03, 1e-12);
  EXPECT_NEAR(*v.all.range_bias_m.value, -0.015, 1e-12);
  EXPECT_THAT(v.reasons, testing::SizeIs(3));
  EXPECT_THAT(v.reasons[0], HasSubstr("2 of 2 rows found"));
}

TEST(Judge, WrapsBearingsAtTheBack) {
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v = judge(quay(),
                          images,
                          std::vector{taped(0, 1.0, 179.5)},
                          std::vector<std::vector<Find>>{{reported(1.0, -179.5)}});
  EXPECT_NEAR(*v.rows[0].bearing_error_rad, 1.0 * kRadPerDeg, 1e-9);
}

TEST(Judge, RefusesByRangeAndNamesTheNumbers) {
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v = judge(quay(),
                          images,
                          std::vector{taped(0, 1.0, 0.0)},
                          std::vector<std::vector<Find>>{{reported(1.08, 0.0)}});
  EXPECT_FALSE(v.accepted);
  ASSERT_THAT(v.reasons, testing::SizeIs(1));
  EXPECT_THAT(v.reasons[0], HasSubstr("1.60 times the tolerance (5 %, at least 20 mm)"));
}

TEST(Judge, NearTheRobotTheFloorOfTheToleranceCounts) {
  // 15 mm at 0.2 m is 7.5 %, but below 20 mm nothing counts.
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v = judge(quay(),
                          images,
                          std::vector{taped(0, 0.2, 0.0)},
                          std::vector<std::vector<Find>>{{reported(0.215, 0.0)}});
  EXPECT_TRUE(v.accepted);
}

TEST(Judge, PairsByLeastTotalDistanceBesideTheLargestOnly) {
  // Two buoys; the patch that stands first is the far one.
  const std::vector<ImageEntry> images = {{"1", ""}};
  const std::vector<TapeEntry> tape = {taped(0, 1.0, 0.0), taped(0, 1.1, 90.0)};
  const std::vector<std::vector<Find>> finds = {
      {reported(1.1, 91.0, 0, 90), reported(1.0, 1.0, 0, 50)}};
  const Verdict v = judge(quay(), images, tape, finds);
  EXPECT_EQ(v.rows[0].find, 1);
  EXPECT_EQ(v.rows[1].find, 0);
  EXPECT_FALSE(v.rows[0].largest);
  EXPECT_TRUE(v.rows[1].largest);
  EXPECT_EQ(v.found, 2);
  EXPECT_EQ(v.largest_only.found, 1);
  EXPECT_EQ(v.largest_only.rows, 2);
  EXPECT_EQ(v.extra_finds, 0);
}

TEST(Judge, WhatIsFarOffIsAMissNotAnError) {
  const std::vector<ImageEntry> images = {{"1", ""}, {"2", ""}};
  const std::vector<TapeEntry> tape = {taped(0, 1.0, 0.0), taped(1, 1.0, 0.0)};
  const std::vector<std::vector<Find>> finds = {{reported(1.0, 120.0)}, {reported(2.5, 0.0)}};
  const Verdict v = judge(quay(), images, tape, finds);
  EXPECT_EQ(v.found, 0);
  EXPECT_EQ(v.rows[0].state, RowState::elsewhere);
  EXPECT_EQ(v.rows[1].state, RowState::elsewhere);
  EXPECT_FALSE(v.accepted);
  EXPECT_EQ(*v.all.recall.value, 0.0);
}

TEST(Judge, AbsentHiddenAndBeyondAreNoMisses) {
  const std::vector<ImageEntry> images = {{"1", ""}, {"2", ""}, {"3", ""}, {"4", ""}, {"5", ""}};
  std::vector<TapeEntry> tape = {
      taped(0, 1.0, 0.0), absent(1), absent(2), taped(3, 0.5, 0.0), taped(4, 3.5, 0.0)};
  tape[3].hidden = true;
  const std::vector<std::vector<Find>> finds = {
      {reported(1.0, 0.0)}, {}, {reported(0.7, 0.0)}, {}, {}};
  const Verdict v = judge(quay(), images, tape, finds);
  EXPECT_EQ(v.counted, 1);
  EXPECT_EQ(v.found, 1);
  EXPECT_EQ(v.absent, 1);
  EXPECT_EQ(v.false_finds, 1);
  EXPECT_EQ(v.hidden, 1);
  EXPECT_EQ(v.beyond, 1);
  // One of two absent objects was reported: not accepted for that alone.
  EXPECT_FALSE(v.accepted);
  ASSERT_THAT(v.reasons, testing::SizeIs(1));
  EXPECT_THAT(v.reasons[0], HasSubstr("1 of 2 absent objects were reported"));
}

TEST(Judge, ARowWithoutBearingIsHeldToItsRange) {
  std::vector<TapeEntry> tape = {taped(0, 1.0, 0.0)};
  tape[0].bearing_rad.reset();
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v =
      judge(quay(), images, tape, std::vector<std::vector<Find>>{{reported(1.01, 120.0)}});
  EXPECT_TRUE(v.accepted);
  EXPECT_FALSE(v.rows[0].bearing_error_rad);
  EXPECT_FALSE(v.all.bearing_rms_rad.value);
}

TEST(Judge, NothingToJudgeIsNotAccepted) {
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v =
      judge(quay(), images, std::vector{absent(0)}, std::vector<std::vector<Find>>{{}});
  EXPECT_FALSE(v.accepted);
  EXPECT_THAT(v.reasons, ElementsAre(HasSubstr("No row of the tape sheet could be judged")));
}

TEST(Judge, ABlobThatIsNotReportedIsAMiss) {
  Find beyond = reported(1.0, 0.0);
  beyond.reported.reset();
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v = judge(
      quay(), images, std::vector{taped(0, 1.0, 0.0)}, std::vector<std::vector<Find>>{{beyond}});
  EXPECT_EQ(v.rows[0].state, RowState::missed);
}

TEST(Judge, SharesAddUp) {
  const std::vector<ImageEntry> images = {{"1", ""}};
  const Verdict v = judge(quay(),
                          images,
                          std::vector{taped(0, 1.0, 0.0)},
                          std::vector<std::vector<Find>>{{reported(1.01, 0.0)}});
  ASSERT_TRUE(v.range_shares);
  // Error 10 mm, of which rounding 4 mm and noise 3 mm: 0.16 and 0.09 of the square.
  EXPECT_NEAR(v.range_shares->rounding, 0.16, 1e-9);
  EXPECT_NEAR(v.range_shares->pixel_noise, 0.09, 1e-9);
  EXPECT_NEAR(v.range_shares->rest, 0.75, 1e-9);
}

TEST(Judge, GroupsByObjectLightRangeAndBearing) {
  const std::vector<ImageEntry> images = {{"1", "dusk"}, {"2", "noon"}};
  const std::vector<TapeEntry> tape = {taped(0, 0.7, 0.0), taped(1, 1.2, 90.0, 1)};
  const std::vector<std::vector<Find>> finds = {{reported(0.7, 0.0)}, {}};
  const Verdict v = judge(quay(), images, tape, finds);
  std::vector<std::string> names;
  for (const Group& g : v.groups) names.push_back(g.kind + " " + g.name);
  EXPECT_THAT(names,
              ElementsAre("object buoy",
                          "object dock",
                          "light dusk",
                          "light noon",
                          "range 0.5-1.0 m",
                          "range 1.0-1.5 m",
                          "bearing around 0 deg",
                          "bearing around 90 deg"));
  EXPECT_EQ(v.groups[1].found, 0);
  EXPECT_EQ(v.groups[1].rows, 1);
}

}  // namespace
}  // namespace rondel::verdict
