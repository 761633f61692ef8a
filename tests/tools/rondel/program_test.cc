// The program itself, run in a folder of its own: new, grab, run, and what goes to which stream.
#include <gmock/gmock.h>

#include <filesystem>
#include <nlohmann/json.hpp>
#include <opencv2/imgcodecs.hpp>
#include <opencv2/videoio.hpp>
#include <regex>

#include "calib/base/file.h"
#include "calib/venue/canonical.h"
#include "calib/venue/read_yaml.h"
#include "tests/tools/rondel/run_rondel.h"

namespace rondel {
namespace {

namespace fs = std::filesystem;
using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::IsEmpty;
using testing::Ran;

class Program : public ::testing::Test {
 protected:
  Program() {
    fs::remove_all(folder_);
    fs::create_directories(folder_);
  }
  Ran rondel(const std::vector<std::string>& arguments) {
    return testing::rondel_in(folder_, arguments);
  }
  nlohmann::json json(std::vector<std::string> arguments, int status = 0) {
    arguments.emplace_back("--json");
    const Ran ran = rondel(arguments);
    EXPECT_EQ(ran.status, status) << ran.err;
    const auto document = nlohmann::json::parse(ran.out, nullptr, false);
    EXPECT_FALSE(document.is_discarded())
        << "standard output must be one JSON document: " << ran.out;
    return document;
  }
  void small_rig() {
    write_file(folder_ / "hall/rig.yaml", "camera: {width_px: 64, height_px: 48}\n");
  }
  std::string image(const std::string& name, int grey, int width_px = 64) {
    fs::create_directories((folder_ / name).parent_path());
    cv::imwrite((folder_ / name).string(), cv::Mat(48, width_px, CV_8UC3, cv::Scalar::all(grey)));
    return testing::content_of(folder_ / name);
  }
  std::string read(const std::string& name) { return testing::content_of(folder_ / name); }

  fs::path folder_ = fs::path(::testing::TempDir()) / "program_test";
};

std::vector<std::string> lines_of(const std::string& text) {
  std::vector<std::string> lines;
  std::istringstream in(text);
  for (std::string line; std::getline(in, line);) lines.push_back(line);
  return lines;
}

/// `text` with the comment sign taken from lines that hold nothing but "# key: value".
std::string uncommented(const std::string& text) {
  static const std::regex kKey("^( *)# ( *[a-z_0-9]+:( .*)?)$");
  std::string out;
  for (const std::string& line : lines_of(text)) {
    out += std::regex_replace(line, kKey, "$1$2") + "\n";
  }
  return out;
}

TEST_F(Program, NewWritesFilesThatPassTheirOwnValidation) {
  const auto document = json({"new", "hall", "--name", "The \"old\" hall: 2"});
  EXPECT_EQ(document["written"], (nlohmann::json{"hall/rig.yaml", "hall/venue.yaml"}));
  std::vector<Problem> problems;
  const VenueSpec venue = read_venue(read("hall/venue.yaml"), "venue.yaml", problems);
  (void)read_rig(read("hall/rig.yaml"), "rig.yaml", folder_ / "hall", problems);
  EXPECT_EQ(InputError(problems).what(), std::string());
  EXPECT_EQ(venue.name, "The \"old\" hall: 2");
}

TEST_F(Program, EveryKeyThatNewShowsInAVenueIsValidAndItsDefault) {
  (void)rondel({"new", "hall"});
  const std::string text = uncommented(read("hall/venue.yaml"));
  std::vector<Problem> problems;
  const VenueSpec shown = read_venue(text, "venue.yaml", problems);
  EXPECT_EQ(InputError(problems).what(), std::string()) << text;
  for (const char* key : {"lights",
                          "budget",
                          "noise",
                          "lighting",
                          "hsv_scale",
                          "prefix",
                          "centre",
                          "false_positive_cap",
                          "measure",
                          "width_mm"}) {
    EXPECT_THAT(text, ::testing::ContainsRegex(std::string("\n *") + key + ":"));
  }
  const VenueSpec usual;
  EXPECT_EQ(canonical_link(shown), canonical_link(usual));
  EXPECT_EQ(canonical_budget(shown), canonical_budget(usual));
  EXPECT_EQ(canonical_tolerance(shown), canonical_tolerance(usual));
  EXPECT_EQ(canonical_noise(shown), canonical_noise(usual));
  EXPECT_EQ(canonical_lighting(shown), canonical_lighting(usual));
}

TEST_F(Program, EveryMirrorThatNewShowsIsValid) {
  (void)rondel({"new", "hall"});
  std::string text;  // the two blocks that are commented out as a whole, taken in
  for (const std::string& line : lines_of(read("hall/rig.yaml"))) {
    const bool inside = line.starts_with("#   ") || line == "# mirror:" || line == "# mounting:";
    text += (inside ? line.substr(2) : line) + "\n";
  }
  const std::string all = uncommented(text);
  // The shapes' and the conic's keys exclude each other: each is tried alone.
  const std::vector<std::vector<std::string>> shapes = {
      {"vertex_radius_mm", "conic_constant"},
      {"semi_axis_a_mm", "semi_axis_b_mm"},
      {"eccentricity", "vertex_radius_mm"},
      {"slope_deg"},
      {"points_mm", "sag_sd_mm"},
  };
  for (const auto& keys : shapes) {
    std::string one;
    for (const std::string& line : lines_of(all)) {
      const auto begins = [&line](const std::string& key) {
        return std::regex_search(line, std::regex("^ *" + key + ":"));
      };
      if (begins("points_file")) continue;
      bool other = false;
      for (const auto& others : shapes) {
        for (const std::string& key : others) {
          other = other || (begins(key) && std::find(keys.begin(), keys.end(), key) == keys.end());
        }
      }
      if (other) continue;
      const char* shape = keys[0] == "slope_deg" ? "cone" : keys[0] == "points_mm" ? "profile" : "";
      one +=
          *shape != '\0' && begins("shape") ? std::string("  shape: ") + shape + "\n" : line + "\n";
    }
    std::vector<Problem> problems;
    const RigSpec rig = read_rig(one, "rig.yaml", folder_, problems);
    EXPECT_EQ(InputError(problems).what(), std::string()) << one;
    EXPECT_TRUE(rig.mirror) << one;
    EXPECT_TRUE(rig.mounting.eye_height_m) << one;
  }
}

TEST_F(Program, NewFromKeepsWhatBelongsToTheRobot) {
  const std::string rig =
      "# my rig\ncamera: {width_px: 64, height_px: 48}\n"
      "mirror: {shape: profile, rim_radius_mm: 8, distance_mm: 60, points_file: p.csv}\n";
  write_file(folder_ / "old/rig.yaml", rig);
  const std::string points = "distance_mm,sag_mm\n0,0\n2,0.1\n4,0.4\n6,0.9\n8,1.6\n10,2.5\n";
  write_file(folder_ / "old/p.csv", points);
  write_file(folder_ / "old/venue.yaml",
             "# one\nlights:\n  noon: sun\n# between\n\n  night: lamps\n\n# tolerances\n"
             "tolerance: {recall: 0.9}\nname: Old\nobjects: {cup: {shape: ball, diameter_mm: 60}}\n"
             "centre: {u_px: 30, v_px: 20}\n");
  write_file(folder_ / "old/marks.csv",
             "image,u_px,v_px,object,range_m,bearing_deg\nframes/1.png,10,20,cup,0.5,90\n");
  (void)image("old/frames/1.png", 3);

  ASSERT_EQ(rondel({"new", "bare", "--from", "old"}).status, 0);
  EXPECT_EQ(read("bare/rig.yaml"), rig);
  EXPECT_EQ(read("bare/p.csv"), points);
  EXPECT_EQ(read("bare/venue.yaml"),
            "# Taken over from old.\n# one\n\n# tolerances\ntolerance: {recall: 0.9}\n"
            "name: \"bare\"\nobjects: {cup: {shape: ball, diameter_mm: 60}}\n"
            "centre: {u_px: 30, v_px: 20}\n");
  EXPECT_FALSE(fs::exists(folder_ / "bare/marks.csv")) << "a mirror may have been changed";
  EXPECT_TRUE(fs::is_empty(folder_ / "bare/frames"));

  ASSERT_EQ(rondel({"new", "same", "--from", "old", "--marks"}).status, 0);
  EXPECT_EQ(read("same/marks.csv"),
            "image,u_px,v_px,object,range_m,bearing_deg\n,10,20,cup,0.5,90\n");
}

TEST_F(Program, GrabCopiesImagesAsTheyAreAndWritesOverNone) {
  (void)rondel({"new", "hall"});
  small_rig();
  const std::string a = image("card/a.png", 10);
  const std::string b = image("card/b.jpg", 20);
  (void)image("card/c.png", 30, 32);
  write_file(folder_ / "card/d.png", "");
  write_file(folder_ / "card/readme.txt", "no image");

  auto document = json({"grab", "hall", "card", "--light", "noon"});
  EXPECT_EQ(document["frames"], (nlohmann::json{"frames/noon/a.png", "frames/noon/b.jpg"}));
  EXPECT_EQ(read("hall/frames/noon/a.png"), a);
  EXPECT_EQ(read("hall/frames/noon/b.jpg"), b);
  ASSERT_EQ(document["left_out"].size(), 2U);
  EXPECT_EQ(document["left_out"][0]["image"], "card/c.png");
  EXPECT_EQ(document["left_out"][1]["reason"], "is empty; capture it again");

  const std::string changed = image("card/a.png", 11);
  document = json({"grab", "hall", "card", "--light", "noon"});
  EXPECT_EQ(document["frames"], (nlohmann::json{"frames/noon/a-2.png"}));
  EXPECT_EQ(document["already_there"], (nlohmann::json{"frames/noon/b.jpg"}));
  EXPECT_EQ(read("hall/frames/noon/a.png"), a);
  EXPECT_EQ(read("hall/frames/noon/a-2.png"), changed);

  EXPECT_THAT(json({"grab", "hall", "card", "--count", "1"})["frames"],
              ElementsAre("frames/a.png"));
}

TEST_F(Program, GrabNumbersAVideosFramesOnwards) {
  (void)rondel({"new", "hall"});
  small_rig();
  {
    cv::VideoWriter writer((folder_ / "v.avi").string(),
                           cv::CAP_OPENCV_MJPEG,
                           cv::VideoWriter::fourcc('M', 'J', 'P', 'G'),
                           10.0,
                           {64, 48});
    for (int i = 0; i < 10; ++i) writer.write(cv::Mat(48, 64, CV_8UC3, cv::Scalar::all(20 * i)));
  }
  const std::string before = image("hall/frames/noon/0007.png", 1);
  const auto document =
      json({"grab", "hall", "v.avi", "--light", "noon", "--every", "0.4", "--count", "2"});
  EXPECT_EQ(document["frames"], (nlohmann::json{"frames/noon/0008.png", "frames/noon/0009.png"}));
  EXPECT_EQ(read("hall/frames/noon/0007.png"), before);
  const cv::Mat second = cv::imread((folder_ / "hall/frames/noon/0009.png").string());
  ASSERT_EQ(second.size(), cv::Size(64, 48));
  EXPECT_NEAR(cv::mean(second)[0], 80.0, 5.0) << "the frame at 0.4 s is the fifth";

  const Ran short_video = rondel({"grab", "hall", "v.avi", "--light", "late", "--every", "0.4"});
  EXPECT_EQ(short_video.status, 0);
  EXPECT_EQ(short_video.out,
            "3 frames into hall/frames/late: 0001.png to 0003.png\n"
            "Fewer than asked for: the video ends there.\n");
}

TEST_F(Program, RunSaysWhatEachStepWaitsFor) {
  (void)rondel({"new", "hall"});
  const Ran ran = rondel({"run", "hall"});
  EXPECT_EQ(ran.status, 0);
  EXPECT_EQ(ran.err, "");
  EXPECT_EQ(ran.out,
            "centre: left out (no frames in frames/, and no 'centre:' in venue.yaml)\n"
            "mask: left out (fewer than two frames in frames/, and no strokes.csv)\n"
            "range: left out (no marks.csv, and no mirror in rig.yaml)\n"
            "colours: left out (no swatches.csv)\n"
            "tables: left out (range has no result)\n"
            "check: left out (no tape sheet (tape.csv))\n"
            "Nothing could be done yet: the lines above say what each step waits for.\n"
            "Verdict: none yet\n");
  const auto document = json({"run", "hall"});
  EXPECT_EQ(document["steps"].size(), 6U);
  EXPECT_TRUE(document["accepted"].is_null());
  EXPECT_FALSE(fs::exists(folder_ / "hall/results"));
}

TEST_F(Program, RunMakesWhatItCanOnceAndSaysWhy) {
  (void)rondel({"new", "hall"});
  small_rig();
  const auto centre_at = [&](const std::string& u_px) {
    write_file(folder_ / "hall/venue.yaml", "centre: {u_px: " + u_px + ", v_px: 23.5}\n");
  };
  const auto state = [&](const nlohmann::json& document) {
    const auto& step = document["steps"][0];
    return step["state"].get<std::string>() + ": " + step["why"].get<std::string>();
  };
  centre_at("31");
  EXPECT_EQ(state(json({"run", "hall"})), "done: not made before");
  const auto made = testing::snapshot(folder_ / "hall");
  EXPECT_TRUE(made.count("results/centre.yaml") == 1 && made.count("results/report.html") == 1);
  EXPECT_EQ(state(json({"run", "hall"})), "fresh: nothing it was made from has changed");
  EXPECT_EQ(testing::snapshot(folder_ / "hall"), made) << "a run with nothing to do writes nothing";
  centre_at("32");
  EXPECT_EQ(state(json({"run", "hall"})), "done: changed: venue.yaml: centre");
  EXPECT_EQ(state(json({"run", "hall", "--again"})), "done: asked for");
  write_file(folder_ / "hall/venue.yaml", "name: Hall\n");
  EXPECT_EQ(state(json({"run", "hall"})),
            "kept from before: no frames in frames/, and no 'centre:' in venue.yaml");
}

TEST_F(Program, AFailingStepLeavesItsFollowersOutAndIsReported) {
  (void)rondel({"new", "hall"});
  small_rig();
  // Frames without any mirror in them.
  (void)image("hall/frames/noon/1.png", 40);
  (void)image("hall/frames/noon/2.png", 40);
  write_file(folder_ / "hall/marks.csv",
             "image,u_px,v_px,object,range_m,bearing_deg\n,10,20,,0.5,\n,12,20,,0.4,\n");
  const Ran ran = rondel({"run", "hall"});
  EXPECT_EQ(ran.status, 2);
  EXPECT_THAT(ran.out, HasSubstr("centre: failed"));
  EXPECT_THAT(ran.out, HasSubstr("mask: left out (centre failed)\n"));
  EXPECT_THAT(ran.out, HasSubstr("range: left out (centre failed)\n"));
  EXPECT_THAT(ran.out, HasSubstr("tables: left out (range has no result)\n"));
  EXPECT_THAT(ran.err, ::testing::Not(IsEmpty()));
  EXPECT_FALSE(fs::exists(folder_ / "hall/results/centre.yaml"));
  const auto document = json({"run", "hall"}, 2);
  EXPECT_EQ(document["steps"][0]["state"], "failed");
}

TEST_F(Program, AnswersAboutItself) {
  EXPECT_THAT(rondel({"--version"}).out, ::testing::MatchesRegex("rondel [0-9.]+\n"));
  const Ran help = rondel({"--help"});
  EXPECT_EQ(help.status, 0);
  EXPECT_EQ(help.err, "");
  EXPECT_THAT(help.out, HasSubstr("usage: rondel COMMAND"));
  EXPECT_EQ(rondel({"help"}).out, help.out);
  EXPECT_EQ(rondel({"run", "--help"}).out, rondel({"help", "run"}).out);
  const Ran bare = rondel({});
  EXPECT_EQ(bare.status, 2);
  EXPECT_EQ(bare.out, "");
  EXPECT_EQ(bare.err, help.out);
}

}  // namespace
}  // namespace rondel
