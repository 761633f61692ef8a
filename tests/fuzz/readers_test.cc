// Whatever bytes a file holds, a reader answers with values or with problems of one line each. Run
// under the sanitizers too.
#include <fmt/format.h>
#include <gtest/gtest.h>

#include <opencv2/imgcodecs.hpp>

#include "calib/venue/read_sheets.h"
#include "calib/venue/read_yaml.h"
#include "tests/fuzz/mutate.h"
#include "vision/frames/load.h"

namespace rondel {
namespace {

const std::vector<std::string_view> kYamlTokens = {"[",
                                                   "]",
                                                   "{",
                                                   "}",
                                                   ": ",
                                                   "- ",
                                                   "\n",
                                                   "\r\n",
                                                   "\t",
                                                   "'",
                                                   "\"",
                                                   "#",
                                                   "&a ",
                                                   "*a",
                                                   "<<: ",
                                                   "!!binary ",
                                                   "|",
                                                   ">",
                                                   "---\n",
                                                   "...",
                                                   "? ",
                                                   "%YAML 1.2\n",
                                                   "nan",
                                                   "1e999",
                                                   "-",
                                                   "0x1",
                                                   "~",
                                                   "null",
                                                   "\xEF\xBB\xBF",
                                                   "\xff",
                                                   "\\u0000",
                                                   "value:",
                                                   "tolerance:",
                                                   "9999999999999999999"};
const std::vector<std::string_view> kCsvTokens = {",",
                                                  "\"",
                                                  "\"\"",
                                                  "\n",
                                                  "\r",
                                                  "\r\n",
                                                  ";",
                                                  "nan",
                                                  "-1",
                                                  "1e999",
                                                  " ",
                                                  "\t",
                                                  "\xEF\xBB\xBF",
                                                  "\xff",
                                                  "frames/",
                                                  "../",
                                                  "polygon",
                                                  "grow",
                                                  "surroundings"};

void expect_one_line_each(const std::vector<Problem>& problems, const std::string& text) {
  for (const Problem& problem : problems) {
    EXPECT_EQ(problem.where.compare(0, 6, "f.text"), 0) << problem.where;
    for (const char c : to_text(problem)) {
      ASSERT_GE(static_cast<unsigned char>(c), 0x20) << to_text(problem) << "\nof\n" << text;
    }
    EXPECT_LT(problem.what.size(), 1000U) << problem.what.substr(0, 200);
  }
}

const std::string kVenue =
    "name: Quay\nobjects:\n  buoy: {shape: ball, diameter_mm: 74}\n  dock: {shape: box, height_mm: "
    "0}\n"
    "lights: {noon: sun}\nlink: {baud: 115200, near_m: 0.15, far_m: 3.0, check_byte: crc8, "
    "measure: "
    "rms}\nbudget: {table_bytes: 1024}\ntolerance: {range_relative: 0.05}\nlighting: {stops: [-1, "
    "1], "
    "kelvin: [5000, 7000]}\nnoise: {mark_px: 0.5}\nprefix: rondel\ncentre: {u_px: 161, v_px: "
    "118}\n";
const std::vector<std::string> kRigs = {
    "camera: {width_px: 320, height_px: 240, focal_px: {value: 260, tolerance: 5}}\nmirror:\n  "
    "shape: "
    "conic\n  vertex_radius_mm: 40\n  conic_constant: -2.25\n  rim_radius_mm: 30\n  distance_mm: "
    "60\n"
    "mounting: {eye_height_mm: 160, mirrored: true, heading_deg: 0}\n",
    "camera: {width_px: 320, height_px: 240}\nmirror: {shape: profile, rim_radius_mm: 9, "
    "distance_mm: "
    "60, points_mm: [[0, 0], [2, 0.1], [4, 0.4], [6, 0.9], [8, 1.6], [10, 2.5]], sag_sd_mm: "
    "0.05}\n",
    "camera: {width_px: 320, height_px: 240}\nmirror: {shape: cone, slope_deg: 40, rim_radius_mm: "
    "30, "
    "distance_mm: 60}\n"};

TEST(Fuzz, YamlReaders) {
  std::mt19937_64 rng{1};
  for (int i = 0; i < 1500; ++i) {
    std::vector<Problem> problems;
    const std::string venue = fuzz::mutated(kVenue, kYamlTokens, rng);
    (void)read_venue(venue, "f.text", problems);
    expect_one_line_each(problems, venue);
    problems.clear();
    const std::string rig = fuzz::mutated(kRigs[rng() % kRigs.size()], kYamlTokens, rng);
    (void)read_rig(rig, "f.text", "/nowhere", problems);
    expect_one_line_each(problems, rig);
    if (HasFatalFailure()) return;
  }
}

/// Forty lists, each of the last one twice: 2^40 elements for who follows them.
std::string yaml_bomb() {
  std::string text = "a0: &a0 [x]\n";
  for (int i = 1; i < 40; ++i) {
    text += fmt::format("a{0}: &a{0} [*a{1}, *a{1}]\n", i, i - 1);
  }
  return text;
}

TEST(Fuzz, YamlThatNestsOrRefersToItself) {
  for (const std::string& text : {std::string(200000, '['),
                                  std::string(200000, '{'),
                                  std::string("a: &a [*a, *a]\nname: *a\n"),
                                  std::string("objects: &o {x: *o}\n"),
                                  yaml_bomb()}) {
    std::vector<Problem> problems;
    (void)read_venue(text, "f.text", problems);
    EXPECT_FALSE(problems.empty());
    expect_one_line_each(problems, text.substr(0, 200));
  }
}

TEST(Fuzz, CsvReaders) {
  VenueSpec venue;
  venue.objects.resize(1);
  venue.objects[0].name = "buoy";
  CameraSpec camera;
  camera.width_px = 320;
  camera.height_px = 240;
  const SheetContext context{venue, camera, [](const std::string& image) {
                               return image.empty() ? std::optional<std::string>("is empty")
                                                    : std::nullopt;
                             }};
  std::mt19937_64 rng{2};
  const auto feed = [&](const std::string& seed, auto reader) {
    const std::string text = fuzz::mutated(seed, kCsvTokens, rng);
    std::vector<Problem> problems;
    (void)reader(text, "f.text", context, problems);
    expect_one_line_each(problems, text);
  };
  for (int i = 0; i < 3000 && !HasFatalFailure(); ++i) {
    feed("image,u_px,v_px,object,range_m,bearing_deg\nframes/1.png,10,20,buoy,1.5,-90\n,1,2,,3,\n",
         read_marks);
    feed(
        "image,label,shape,points\nf/1.png,buoy,disc,1 2 3\nf/1.png,surroundings,polygon,0 0 9 0 9 "
        "9\n",
        read_swatches);
    feed("kind,width_px,points\nhide,5,1 2 3 4\nshow,1.5,7 8\n", read_strokes);
    feed("image,object,range_m,bearing_deg\n\"f/1.png\",buoy,1.5,\nf/2.png,buoy,,\n", read_tape);
  }
}

TEST(Fuzz, ImageDecoder) {
  cv::Mat picture(30, 40, CV_8UC3);
  cv::randu(picture, 0, 255);
  std::mt19937_64 rng{3};
  int accepted = 0;
  for (const char* ending : {".png", ".jpg", ".bmp", ".ppm", ".565"}) {
    std::string seed;
    if (std::string(ending) == ".565") {
      seed = vision::encode_rgb565(picture, ByteOrder::low_first);
    } else {
      std::vector<unsigned char> bytes;
      cv::imencode(ending, picture, bytes);
      seed.assign(bytes.begin(), bytes.end());
    }
    for (int i = 0; i < 800; ++i) {
      const std::string bytes = fuzz::mutated(seed, {}, rng);
      try {
        const cv::Mat read = vision::decode_image(bytes, std::string("f.text") + ending, {40, 30});
        ++accepted;
        EXPECT_EQ(read.size(), cv::Size(40, 30));
        EXPECT_EQ(read.type(), CV_8UC3);
      } catch (const InputError& error) {
        ASSERT_EQ(error.problems().size(), 1U);
        expect_one_line_each(error.problems(), ending);
      }
    }
  }
  EXPECT_GT(accepted, 100) << "a change to a pixel alone is no trouble";
}

}  // namespace
}  // namespace rondel
