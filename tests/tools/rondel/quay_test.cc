// The main job on a copy of the sample venue, against its truth.
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <map>
#include <nlohmann/json.hpp>
#include <opencv2/imgcodecs.hpp>
#include <sstream>

#include "calib/base/file.h"
#include "tests/tools/rondel/run_rondel.h"

namespace rondel {
namespace {

namespace fs = std::filesystem;
using nlohmann::json;
using testing::Ran;

const fs::path kDatasets = fs::path(RONDEL_SOURCE_DIR) / "datasets";

std::vector<std::vector<std::string>> rows_of(const std::string& csv) {
  std::vector<std::vector<std::string>> rows;
  std::istringstream lines(csv);
  for (std::string line; std::getline(lines, line);) {
    std::vector<std::string> fields;
    std::istringstream in(line);
    for (std::string field; std::getline(in, field, ',');) fields.push_back(field);
    rows.push_back(fields);
  }
  return rows;
}

/// One run for all tests: a fresh copy of the venue, calibrated.
class Quay : public ::testing::Test {
 protected:
  static void SetUpTestSuite() {
    // Of this process alone: it is long enough for two of them to meet.
    folder_ = fs::path(::testing::TempDir()) / ("quay_test-" + std::to_string(::getpid()));
    fs::remove_all(folder_);
    fs::create_directories(folder_);
    fs::copy(kDatasets / "quay", folder_ / "quay", fs::copy_options::recursive);
    fs::remove_all(folder_ / "quay/results");
    first_ = testing::rondel_in(folder_, {"run", "quay", "--json"});
    truth_ = json::parse(read_file(kDatasets / "quay-truth/truth.json"));
  }

  static void TearDownTestSuite() { fs::remove_all(folder_); }

  /// The steps that a run did, by its own account.
  static std::vector<std::string> done_in(const Ran& ran) {
    std::vector<std::string> done;
    const json document = json::parse(ran.out, nullptr, false);
    EXPECT_FALSE(document.is_discarded()) << ran.out << ran.err;
    if (document.is_discarded()) return done;
    for (const json& step : document["steps"]) {
      if (step["state"] != "fresh") done.push_back(step["step"]);
    }
    return done;
  }

  static inline fs::path folder_;
  static inline Ran first_;
  static inline json truth_;
};

TEST_F(Quay, IsAccepted) {
  ASSERT_EQ(first_.status, 0) << first_.err;
  EXPECT_EQ(json::parse(first_.out)["accepted"], true) << first_.out;
  EXPECT_EQ(done_in(first_),
            (std::vector<std::string>{"centre", "mask", "range", "colours", "tables", "check"}));
}

TEST_F(Quay, CentreIsWithinHalfAPixel) {
  const Ran ran = testing::rondel_in(folder_, {"centre", "quay", "--json"});
  ASSERT_EQ(ran.status, 0) << ran.err;
  const json centre = json::parse(ran.out)["centre"];
  EXPECT_NEAR(centre["u_px"].get<double>(), truth_["centre"]["u_px"].get<double>(), 0.5);
  EXPECT_NEAR(centre["v_px"].get<double>(), truth_["centre"]["v_px"].get<double>(), 0.5);
}

TEST_F(Quay, MaskCoversTheRobot) {
  const cv::Mat made =
      cv::imread((folder_ / "quay/results/mask.png").string(), cv::IMREAD_GRAYSCALE);
  const cv::Mat truth =
      cv::imread((kDatasets / "quay-truth/mask.png").string(), cv::IMREAD_GRAYSCALE);
  ASSERT_EQ(made.size(), truth.size());
  const auto overlap = [](const cv::Mat& a, const cv::Mat& b) {
    return static_cast<double>(cv::countNonZero(a & b)) / cv::countNonZero(a | b);
  };
  EXPECT_GE(overlap(made, truth), 0.95);
  // The hidden part of the mirror alone; the picture's corners would flatter it.
  cv::Mat mirror(truth.size(), CV_8U, cv::Scalar(0));
  const double u0 = truth_["centre"]["u_px"];
  const double v0 = truth_["centre"]["v_px"];
  const double rim = truth_["rim"]["b_px"].get<double>() - 1.0;
  for (int v = 0; v < mirror.rows; ++v) {
    for (int u = 0; u < mirror.cols; ++u) {
      if (std::hypot(u - u0, v - v0) <= rim) mirror.at<unsigned char>(v, u) = 255;
    }
  }
  EXPECT_GE(overlap(mirror & ~made, mirror & ~truth), 0.95);
}

TEST_F(Quay, RangeIsWithinThreePercentOverTheMarksSpan) {
  const auto marks = rows_of(read_file(folder_ / "quay/marks.csv"));
  ASSERT_EQ(marks.size(), 9U);
  double nearest = 1e9;
  double farthest = 0.0;
  for (std::size_t k = 1; k < marks.size(); ++k) {
    nearest = std::min(nearest, std::stod(marks[k][4]));
    farthest = std::max(farthest, std::stod(marks[k][4]));
  }
  std::string points = "u_px,v_px\n";
  std::vector<double> ranges;
  for (const json& sample : truth_["ranges"]) {
    const double range = sample["range_m"];
    if (range < nearest || range > farthest) continue;
    ranges.push_back(range);
    points += sample["u_px"].dump() + "," + sample["v_px"].dump() + "\n";
  }
  ASSERT_GT(ranges.size(), 100U);
  write_file(folder_ / "points.csv", points);
  const Ran ran = testing::rondel_in(folder_, {"at", "quay", "--points", "points.csv"});
  ASSERT_EQ(ran.status, 0) << ran.err;
  const auto rows = rows_of(ran.out);
  ASSERT_EQ(rows.size(), ranges.size() + 1);
  ASSERT_EQ(rows[0][2], "range_m");
  double square = 0.0;
  for (std::size_t k = 0; k < ranges.size(); ++k) {
    const double off = std::stod(rows[k + 1][2]) / ranges[k] - 1.0;
    square += off * off / static_cast<double>(ranges.size());
  }
  EXPECT_LT(std::sqrt(square), 0.03);
}

TEST_F(Quay, EveryBuoyOfTheTapeSheetIsFound) {
  const auto rows = rows_of(read_file(folder_ / "quay/results/check.csv"));
  const auto column = [&](const std::string& name) {
    return static_cast<std::size_t>(std::find(rows[0].begin(), rows[0].end(), name) -
                                    rows[0].begin());
  };
  const std::size_t object = column("object");
  const std::size_t state = column("state");
  const std::size_t tape = column("tape_range_m");
  int buoys = 0;
  for (std::size_t k = 1; k < rows.size(); ++k) {
    if (rows[k][object] != "buoy" || rows[k].size() <= tape || rows[k][tape].empty()) continue;
    ++buoys;
    EXPECT_EQ(rows[k][state], "found") << rows[k][0] << " " << rows[k][1];
  }
  int in_sheet = 0;
  for (const auto& row : rows_of(read_file(folder_ / "quay/tape.csv"))) {
    if (row.size() > 2 && row[1] == "buoy" && !row[2].empty()) ++in_sheet;
  }
  EXPECT_EQ(buoys, in_sheet);
  EXPECT_GT(buoys, 100);
}

TEST_F(Quay, RunsAgainOnlyWhatHasChanged) {
  const Ran second = testing::rondel_in(folder_, {"run", "quay", "--json"});
  ASSERT_EQ(second.status, 0) << second.err;
  EXPECT_TRUE(done_in(second).empty());
  const Ran in_words = testing::rondel_in(folder_, {"run", "quay"});
  EXPECT_NE(in_words.out.find("Nothing to do"), std::string::npos) << in_words.out;

  // The first mark a tenth of a pixel further right.
  std::string marks = read_file(folder_ / "quay/marks.csv");
  const std::size_t begin = marks.find(',', marks.find('\n')) + 1;
  const std::size_t end = marks.find(',', begin);
  const double u_px = std::stod(marks.substr(begin, end - begin));
  std::ostringstream moved;
  moved << u_px + 0.1;
  write_file(folder_ / "quay/marks.csv", marks.replace(begin, end - begin, moved.str()));
  const Ran third = testing::rondel_in(folder_, {"run", "quay", "--json"});
  ASSERT_EQ(third.status, 0) << third.err;
  EXPECT_EQ(done_in(third), (std::vector<std::string>{"range", "tables", "check"}));
}

}  // namespace
}  // namespace rondel
