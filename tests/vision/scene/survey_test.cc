#include "vision/scene/survey.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <sstream>
#include <string>
#include <vector>

namespace rondel::scene {
namespace {

std::vector<std::vector<std::string>> rows_of(const std::string& csv) {
  std::vector<std::vector<std::string>> rows;
  std::istringstream lines(csv);
  for (std::string line; std::getline(lines, line);) {
    std::vector<std::string> fields;
    std::string field;
    std::istringstream in(line);
    while (std::getline(in, field, ',')) fields.push_back(field);
    if (line.ends_with(',')) fields.emplace_back();
    rows.push_back(fields);
  }
  return rows;
}

struct Surveyed {
  Scene scene;
  std::vector<FrameTruth> truths;
};

Surveyed trace_all() {
  Surveyed s;
  s.scene = practice_scene(SceneRig{}, 11, 2);
  s.scene.sensor.supersample = 1;
  s.scene.survey = Survey{};
  s.scene.survey->floor_marks = 12;
  s.scene.survey->object_marks = 12;
  for (std::size_t f = 0; f < s.scene.frames.size(); ++f) {
    s.truths.push_back(trace_truth(s.scene, f));
  }
  return s;
}

/// Traced once for all tests.
const Surveyed& surveyed() {
  static const Surveyed all = trace_all();
  return all;
}

double number(const std::string& text) { return std::stod(text); }

TEST(Survey, MarksAreOffByAPersonsErrorsAndNoMore) {
  Surveyed s = surveyed();
  double square_px = 0.0;
  double square_m = 0.0;
  int count = 0;
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    s.scene.survey->seed = seed;
    // The same draws without their errors: what they should have been.
    Scene exact = s.scene;
    exact.survey->mark_px = 0.0;
    exact.survey->tape_m = 0.0;
    const auto noisy = rows_of(survey(s.scene, s.truths).marks_csv);
    const auto true_rows = rows_of(survey(exact, s.truths).marks_csv);
    ASSERT_EQ(noisy.size(), true_rows.size());
    for (std::size_t k = 1; k < noisy.size(); ++k) {
      ASSERT_EQ(noisy[k].size(), 6U);
      const double height = noisy[k][3].empty() ? 0.0 : 0.037;
      const FloorSpot spot{number(true_rows[k][4]), kRadPerDeg * number(true_rows[k][5])};
      const auto at = pixel_of(s.scene.rig, spot, height);
      ASSERT_TRUE(at);
      // Rows are rounded to 0.1 px, 1 mm and 0.1 degrees: at 0.25 m and beyond within 0.5 px.
      EXPECT_NEAR(at->u_px, number(true_rows[k][1]), 0.5);
      EXPECT_NEAR(at->v_px, number(true_rows[k][2]), 0.5);
      const double du = number(noisy[k][1]) - number(true_rows[k][1]);
      const double dv = number(noisy[k][2]) - number(true_rows[k][2]);
      square_px += du * du + dv * dv;
      const double dr = number(noisy[k][4]) - number(true_rows[k][4]);
      square_m += dr * dr;
      ++count;
    }
  }
  ASSERT_GT(count, 300);
  // Rounding adds 2 x 0.1^2 / 12 and 2 x 0.001^2 / 12; four standard errors of a variance.
  const double share = 4.0 * std::sqrt(2.0 / count);
  EXPECT_NEAR(square_px / (2.0 * count) / (0.25 + 0.01 / 6.0), 1.0, share);
  EXPECT_NEAR(square_m / count / (9e-6 + 1e-6 / 6.0), 1.0, share);
}

TEST(Survey, SwatchesLieOnWhatTheyName) {
  const Surveyed s = surveyed();
  const auto rows = rows_of(survey(s.scene, s.truths).swatches_csv);
  int of_objects = 0;
  int of_surroundings = 0;
  for (std::size_t k = 1; k < rows.size(); ++k) {
    ASSERT_EQ(rows[k].size(), 4U);
    const auto truth = std::find_if(s.truths.begin(), s.truths.end(), [&](const FrameTruth& t) {
      return t.image == rows[k][0];
    });
    ASSERT_NE(truth, s.truths.end());
    std::istringstream points(rows[k][3]);
    double u = 0.0;
    double v = 0.0;
    points >> u >> v;
    if (rows[k][2] == "box") {
      double u1 = 0.0;
      double v1 = 0.0;
      points >> u1 >> v1;
      u = std::round(0.5 * (u + u1));
      v = std::round(0.5 * (v + v1));
    }
    const int seen = truth->objects.at<unsigned char>(static_cast<int>(v), static_cast<int>(u));
    if (rows[k][1] == "surroundings") {
      EXPECT_EQ(seen, 0);
      EXPECT_EQ(truth->mask.at<unsigned char>(static_cast<int>(v), static_cast<int>(u)), 255);
      ++of_surroundings;
    } else {
      ASSERT_GT(seen, 0) << k;
      EXPECT_EQ(s.scene.objects[static_cast<std::size_t>(seen - 1)].name, rows[k][1]);
      ++of_objects;
    }
  }
  EXPECT_GE(of_objects, 9);
  EXPECT_GE(of_surroundings, 30);
}

TEST(Survey, TapeListsWhatStandsFreeNearItsTruth) {
  const Surveyed s = surveyed();
  const auto rows = rows_of(survey(s.scene, s.truths).tape_csv);
  ASSERT_GT(rows.size(), 20U);
  for (std::size_t k = 1; k < rows.size(); ++k) {
    ASSERT_EQ(rows[k].size(), 4U);
    if (rows[k][2].empty()) continue;
    const auto truth = std::find_if(s.truths.begin(), s.truths.end(), [&](const FrameTruth& t) {
      return t.image == rows[k][0];
    });
    const FloorPoint at = to_point(FloorSpot{number(rows[k][2]), kRadPerDeg * number(rows[k][3])});
    double nearest = 1e9;
    for (const ObjectTruth& seen : truth->seen) {
      if (seen.name != rows[k][1]) continue;
      const FloorPoint p = to_point(seen.spot);
      nearest = std::min(nearest, std::hypot(p.x_m - at.x_m, p.y_m - at.y_m));
    }
    // Six standard deviations of 3 mm, and the bearing's rounding at 1.4 m.
    EXPECT_LT(nearest, 0.018 + 0.0013) << k;
  }
}

}  // namespace
}  // namespace rondel::scene
