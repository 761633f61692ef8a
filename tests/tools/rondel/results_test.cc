#include "tools/rondel/results.h"

#include <gmock/gmock.h>

#include <filesystem>

#include "calib/base/file.h"

namespace rondel::app {
namespace {

using ::testing::ElementsAre;
using ::testing::IsEmpty;

/// A folder with every kind of input; frames need not be images to be hashed.
class Results : public ::testing::Test {
 protected:
  Results() {
    std::filesystem::remove_all(folder_);
    write("venue.yaml", "objects: {buoy: {shape: ball, diameter_mm: 74}}\n");
    write("rig.yaml", "camera: {width_px: 64, height_px: 48}\n");
    write("marks.csv", "image,u_px,v_px,object,range_m,bearing_deg\n,1,2,,0.5,\n");
    write("frames/noon/1.png", "one");
    write("frames/noon/2.png", "two");
    for (const std::string& step : step_names()) make(step);
  }
  void write(const std::string& name, const std::string& text) { write_file(folder_ / name, text); }
  /// Writes the step's results as the step itself would.
  void make(const std::string& step) {
    const Workspace workspace = open_workspace(folder_);
    const std::filesystem::path results = workspace.results();
    if (step == "mask") write_file(results / "mask.png", "mask");
    if (step == "tables") write_file(results / "tables/rondel.bin", "tables");
    const MadeFrom record = inputs_of(workspace, step);
    if (step == "check") {
      std::string json = "{\"accepted\": true, \"made_from\": {";
      for (const auto& [name, hash] : record) {
        json += (json.back() == '{' ? "\"" : ", \"") + name + "\": \"" + hash + "\"";
      }
      write_file(result_of(workspace, step), json + "}}");
    } else {
      write_file(result_of(workspace, step), with_made_from("step: " + step + "\n", record));
    }
  }
  /// The steps that are not fresh now, each with what has changed.
  std::vector<std::string> stale() {
    const Workspace workspace = open_workspace(folder_);
    std::vector<std::string> all;
    for (const std::string& step : step_names()) {
      const StepState state = state_of(workspace, step);
      if (state.freshness == Freshness::fresh) continue;
      std::string said = step + (state.freshness == Freshness::missing ? " missing" : "");
      for (const std::string& name : state.changed) said += " [" + name + "]";
      all.push_back(said);
    }
    return all;
  }
  std::filesystem::path folder_ = std::filesystem::path(::testing::TempDir()) / "results_test";
};

TEST_F(Results, AreFreshWhereNothingChanged) { EXPECT_THAT(stale(), IsEmpty()); }

TEST_F(Results, DoNotCareForTimesCommentsAndSpelling) {
  write("marks.csv", read_file(folder_ / "marks.csv"));
  write("venue.yaml",
        "# a comment\nobjects:\n  buoy: {diameter_mm: 7.40e1, shape: ball}\nname: New\n");
  EXPECT_THAT(stale(), IsEmpty());
}

TEST_F(Results, AMarkMakesTheRangeStaleAndNothingBeforeIt) {
  write("marks.csv", "image,u_px,v_px,object,range_m,bearing_deg\n,1,2,,0.51,\n");
  EXPECT_THAT(stale(), ElementsAre("range [marks.csv]"));
  write("results/range.yaml",
        with_made_from("step: another\n", inputs_of(open_workspace(folder_), "range")));
  EXPECT_THAT(stale(), ElementsAre("tables [results/range.yaml]", "check [results/range.yaml]"));
}

TEST_F(Results, AResultMadeAgainWithTheSameContentChangesNothingBehindIt) {
  write("strokes.csv", "kind,width_px,points\n");
  EXPECT_THAT(stale(), ElementsAre("mask [strokes.csv]"));
  make("mask");  // its record is another one now, its content is the same
  EXPECT_THAT(stale(), IsEmpty());
}

TEST_F(Results, OnlyThePartsOfVenueYamlThatAStepReadsCount) {
  write("venue.yaml", "objects: {buoy: {shape: ball, diameter_mm: 74}}\nlink: {baud: 9600}\n");
  EXPECT_THAT(stale(), ElementsAre("range [venue.yaml: link]", "tables [venue.yaml: link]"));
  write("venue.yaml",
        "objects: {buoy: {shape: ball, diameter_mm: 74}}\nlighting: {stops: [-2, 2]}\n");
  EXPECT_THAT(stale(),
              ElementsAre("colours [venue.yaml: lighting]", "tables [venue.yaml: lighting]"));
}

TEST_F(Results, AFrameThatIsNewChangedOrGoneCounts) {
  const auto about_frames =
      ElementsAre("centre [frames]", "mask [frames]", "colours [frames]", "check [frames]");
  write("frames/noon/3.png", "three");
  EXPECT_THAT(stale(), about_frames);
  std::filesystem::remove(folder_ / "frames/noon/3.png");
  EXPECT_THAT(stale(), IsEmpty());
  write("frames/noon/2.png", "TWO");
  EXPECT_THAT(stale(), about_frames);
  std::filesystem::remove(folder_ / "frames/noon/2.png");
  EXPECT_THAT(stale(), about_frames);
}

TEST_F(Results, ACentreByHandReplacesTheFrames) {
  write("venue.yaml",
        "objects: {buoy: {shape: ball, diameter_mm: 74}}\ncentre: {u_px: 30, v_px: 20}\n");
  const auto said = stale();
  ASSERT_EQ(said.size(), 1U);
  EXPECT_THAT(said[0], ::testing::StartsWith("centre ["));
  EXPECT_THAT(said[0], ::testing::HasSubstr("[venue.yaml: centre]"));
}

TEST_F(Results, DamagedAndMissingResultsAreMadeAgain) {
  write("results/range.yaml", "step: range\n");
  write("results/check.json", "{not json");
  std::filesystem::remove(folder_ / "results/mask.png");
  const auto said = stale();
  EXPECT_THAT(said, ::testing::Contains("mask missing"));
  EXPECT_THAT(said, ::testing::Contains(::testing::StartsWith("range [rondel] [rig.yaml]")));
  EXPECT_THAT(said, ::testing::Contains(::testing::StartsWith("check [rondel]")));
}

TEST_F(Results, TheRecordIsReadBackAndCanBeCutOff) {
  const MadeFrom plain = {{"rondel", "1"}, {"venue.yaml: link", "abc"}};
  const std::string text = with_made_from("a: 1\nb: 2", plain);
  write("results/range.yaml", text);
  EXPECT_EQ(made_from_of(folder_ / "results/range.yaml"), plain);
  EXPECT_EQ(without_made_from(text), "a: 1\nb: 2\n");
  EXPECT_EQ(without_made_from("a: 1\n"), "a: 1\n");
}

}  // namespace
}  // namespace rondel::app
