#include <gmock/gmock.h>

#include <functional>
#include <nlohmann/json.hpp>
#include <set>
#include <string>
#include <vector>

#include "calib/base/problem.h"
#include "tools/rondel/steps/check_batch.h"
#include "tools/rondel/steps/check_causes.h"
#include "tools/rondel/steps/check_files.h"

namespace rondel::app {
namespace {

using ::testing::AllOf;
using ::testing::ElementsAre;
using ::testing::HasSubstr;

VenueSpec quay() {
  VenueSpec venue;
  venue.name = "Quay";
  venue.objects = {{"buoy", Shape::ball, 0.074, {}}, {"dock", Shape::box, 0.0, {}}};
  return venue;
}

std::vector<FrameFile> frames(int count) {
  std::vector<FrameFile> files;
  for (int i = 0; i < count; ++i) {
    const std::string image = "frames/noon/" + std::to_string(1000 + i) + ".png";
    files.push_back({image, "noon", image});
  }
  return files;
}

TapeRow row(int line, const std::string& image, const std::string& object, double range_m) {
  TapeRow r;
  r.line = line;
  r.image = image;
  r.object = object;
  r.range_m = range_m;
  r.bearing_rad = 0.25;
  return r;
}

/// The problems that `run` is refused with, as people read them.
std::vector<std::string> refused(const std::function<void()>& run) {
  try {
    run();
  } catch (const InputError& error) {
    std::vector<std::string> texts;
    for (const Problem& problem : error.problems()) texts.push_back(to_text(problem));
    return texts;
  }
  return {};
}

std::vector<std::string> refused(const std::vector<TapeRow>& tape) {
  return refused([&] { (void)make_batch(quay(), frames(2), tape, "hall/tape.csv"); });
}

TEST(CheckBatch, NamesEveryBadRowByItsLine) {
  const std::string image = "frames/noon/1000.png";
  TapeRow absent = row(5, image, "buoy", 0.0);
  absent.absent = true;
  EXPECT_THAT(
      refused({row(2, image, "buoy", 1.0),
               row(3, image, "buoy", 1.0),
               row(4, "frames/noon/9.png", "buoy", 1.0),
               absent,
               row(6, image, "kite", 1.0)}),
      ElementsAre(
          AllOf(HasSubstr("hall/tape.csv:3: "), HasSubstr("listed twice, first in line 2")),
          AllOf(HasSubstr("hall/tape.csv:5: "), HasSubstr("both there (line 2) and absent")),
          HasSubstr("hall/tape.csv:4: image frames/noon/9.png: there is no such frame"),
          HasSubstr("hall/tape.csv:6: object kite: venue.yaml has no such object")));
}

TEST(CheckBatch, RefusesAnEmptySheetAndOneOfAMillionRows) {
  EXPECT_THAT(refused(std::vector<TapeRow>{}),
              ElementsAre(HasSubstr("hall/tape.csv: has no rows")));
  std::vector<TapeRow> million;
  for (int i = 0; i < 1000000; ++i) {
    million.push_back(row(i + 2, "frames/noon/1000.png", "buoy", 0.2 + 1e-6 * i));
  }
  EXPECT_THAT(refused(million),
              ElementsAre(AllOf(HasSubstr("hall/tape.csv:200002: row 200001 of 1000000"),
                                HasSubstr("split the sheet"))));
}

TEST(CheckBatch, DoesNotDependOnTheSheetsOrderOfImages) {
  const std::string first = "frames/noon/1000.png";
  const std::string second = "frames/noon/1001.png";
  const auto a = make_batch(
      quay(), frames(2), {row(2, second, "buoy", 1.0), row(3, first, "dock", 2.0)}, "tape.csv");
  ASSERT_EQ(a.images.size(), 2U);
  EXPECT_EQ(a.images[0].image, first);
  EXPECT_EQ(a.tape[0].line, 3);
  EXPECT_EQ(a.tape[0].image, 0);
  EXPECT_EQ(a.tape[1].image, 1);
}

/// An archive of `images` images with three rows each, and what was seen in them: numbers without a
/// short decimal form, misses, a false find.
struct Archive {
  VenueSpec venue = quay();
  TapeBatch batch;
  std::vector<std::vector<verdict::Find>> finds;
};

Archive archive(int images) {
  Archive a;
  std::vector<TapeRow> tape;
  int line = 2;
  const std::vector<FrameFile> files = frames(images);
  for (int i = 0; i < images; ++i) {
    const std::string& image = files[static_cast<std::size_t>(i)].image;
    tape.push_back(row(line++, image, "buoy", 0.5 + i / 97.0));
    tape.push_back(row(line++, image, "buoy", 1.5 + i / 89.0));
    TapeRow absent = row(line++, image, "dock", 0.0);
    absent.absent = true;
    tape.push_back(absent);
  }
  a.batch = make_batch(a.venue, files, tape, "tape.csv");
  a.finds.resize(a.batch.images.size());
  for (std::size_t i = 0; i < a.finds.size(); ++i) {
    for (int f = 0; f < (i % 5 == 3 ? 1 : 2); ++f) {
      verdict::Find find;
      find.measured = {100.0 + 1.0 / (3.0 + static_cast<double>(i)), 60.0 + 1.0 / 7.0};
      find.area_px = 40;
      find.range_code = 17;
      const double truth_m = (f == 0 ? 0.5 : 1.5) + static_cast<double>(i) / 97.0;
      find.reported = FloorSpot{truth_m * (1.0 + 0.01 / (1.0 + static_cast<double>(i))), 0.26};
      find.unrounded = FloorSpot{truth_m, 0.25 + 1e-3 / 3.0};
      find.noise_range_m = truth_m / 300.0;
      a.finds[i].push_back(find);
    }
    if (i % 11 == 0) {
      verdict::Find find;
      find.object = 1;
      find.reported = FloorSpot{1.0, 1.0};
      a.finds[i].push_back(find);
    }
  }
  return a;
}

std::string json_of(const Archive& a, std::vector<std::vector<verdict::Find>> finds) {
  CheckReport report;
  report.venue = &a.venue;
  report.batch = &a.batch;
  report.finds = std::move(finds);
  report.images_in_sheet = static_cast<int>(a.batch.images.size());
  report.verdict = verdict::judge(a.venue, a.batch.images, a.batch.tape, report.finds);
  return check_json(report, {{"tape.csv", "abc"}}) + check_csv(report) + check_junit(report);
}

TEST(CheckShards, JoinedGiveByteForByteWhatOneRunGives) {
  const Archive a = archive(61);
  const std::string one = json_of(a, a.finds);
  for (int count = 1; count <= 7; ++count) {
    std::vector<std::vector<verdict::Find>> joined(a.finds.size());
    for (int index = 0; index < count; ++index) {
      ShardFile file{{index, count}, {{"tape.csv", "abc"}}, false, {}};
      for (std::size_t i = 0; i < a.finds.size(); ++i) {
        if (static_cast<int>(i) % count != index) continue;
        file.images.emplace_back(a.batch.images[i].image, a.finds[i]);
      }
      const ShardFile read = parse_shard(shard_text(file), "check-shard.json");
      EXPECT_EQ(read.shard.index, index);
      EXPECT_EQ(read.made_from, file.made_from);
      for (const auto& [image, finds] : read.images) {
        for (std::size_t i = 0; i < a.batch.images.size(); ++i) {
          if (a.batch.images[i].image == image) joined[i] = finds;
        }
      }
    }
    EXPECT_EQ(json_of(a, joined), one) << count << " shards";
  }
}

TEST(CheckShards, WhatIsNoShardIsNamed) {
  EXPECT_THAT(refused([] { (void)parse_shard("{\"shard\": [1", "check-shard-1-of-2.json"); }),
              ElementsAre(HasSubstr("check-shard-1-of-2.json: is not a shard's result")));
}

TEST(CheckFiles, HaveARowForEachMeasurementAndTheNumbersOfTheDesign) {
  const Archive a = archive(12);
  CheckReport report;
  report.venue = &a.venue;
  report.batch = &a.batch;
  report.finds = a.finds;
  report.verdict = verdict::judge(a.venue, a.batch.images, a.batch.tape, report.finds);
  const auto json = nlohmann::ordered_json::parse(check_json(report, {{"tape.csv", "abc"}}));
  for (const char* key : {"accepted",
                          "rows",
                          "recall",
                          "range_bias_m",
                          "range_rms_relative",
                          "range_p95_relative",
                          "bearing_rms_deg",
                          "reasons",
                          "causes"}) {
    EXPECT_TRUE(json.contains(key)) << key;
  }
  EXPECT_EQ(json.at("measurements").size(), a.batch.tape.size());
  EXPECT_EQ(json.at("made_from").at("tape.csv"), "abc");
  const std::string csv = check_csv(report);
  EXPECT_EQ(static_cast<std::size_t>(std::count(csv.begin(), csv.end(), '\n')),
            a.batch.tape.size() + 1);
  const std::string xml = check_junit(report);
  // Each false find and each miss is a failure of its own: images 0 and 11, and 3 and 8.
  EXPECT_THAT(xml, HasSubstr("tests=\"36\" failures=\"4\""));
}

TEST(CheckFiles, NamesThatAreNoTextDoNotStopTheReport) {
  Archive a = archive(2);
  a.batch.images[0].light = "no\xFFon<&";
  const std::string all = json_of(a, a.finds);
  EXPECT_THAT(all, HasSubstr("no\xEF\xBF\xBDon<&"));
  EXPECT_THAT(all, HasSubstr("on&lt;&amp;"));
}

}  // namespace
}  // namespace rondel::app
