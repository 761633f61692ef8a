// What the program says to bad input: one line that names the place, the mistake and what to do;
// exit status 2; standard output empty; nothing written. Runs the program itself.
#include <gtest/gtest.h>

#include <atomic>
#include <filesystem>
#include <functional>
#include <mutex>
#include <opencv2/imgcodecs.hpp>
#include <string>
#include <thread>
#include <vector>

#include "calib/base/file.h"
#include "tests/tools/rondel/run_rondel.h"

namespace rondel {
namespace {

namespace fs = std::filesystem;

/// A folder of its own for each case, so that cases can run side by side.
fs::path folder_of(const std::string& name) {
  return fs::path(::testing::TempDir()) / "bad_inputs_test" / name;
}

const std::string kVenue =
    "name: Hall\n"
    "objects:\n"
    "  buoy: {shape: ball, diameter_mm: 74}\n"
    "link: {near_m: 0.2}\n";
const std::string kRig = "camera: {width_px: 64, height_px: 48}\n";
const std::string kMarks = "image,u_px,v_px,object,range_m,bearing_deg\n";
const std::string kSwatches = "image,label,shape,points\n";
const std::string kTape = "image,object,range_m,bearing_deg\n";
const std::string kStrokes = "kind,width_px,points\n";

std::string encoded(const std::string& ending, int width_px = 64, int height_px = 48) {
  std::vector<unsigned char> bytes;
  cv::imencode(ending, cv::Mat(height_px, width_px, CV_8UC3, cv::Scalar(9, 99, 200)), bytes);
  return {bytes.begin(), bytes.end()};
}

/// Puts a venue that is as it should be into `folder`, as "hall".
void make_hall(const fs::path& folder) {
  fs::remove_all(folder);
  const fs::path hall = folder / "hall";
  write_file(hall / "venue.yaml", kVenue);
  write_file(hall / "rig.yaml", kRig);
  write_file(hall / "frames/noon/0001.png", encoded(".png"));
  write_file(hall / "frames/noon/0002.png", encoded(".png"));
  write_file(hall / "marks.csv", kMarks + "frames/noon/0001.png,10,20,,0.5,\n");
}

using Spoil = std::function<void(const fs::path& folder)>;

struct BadInput {
  const char* name;
  std::vector<std::string> arguments;
  std::string problem;                   ///< the one line, without its line end
  Spoil spoil = [](const fs::path&) {};  ///< what is done to the good venue
};

Spoil with(const std::string& file, const std::string& text) {
  return [=](const fs::path& folder) { write_file(folder / "hall" / file, text); };
}

/// An image offered to `grab`, and refused.
BadInput image(const char* name, const std::string& file, std::string bytes, std::string problem) {
  return {name,
          {"grab", "hall", file},
          file + ": " + std::move(problem),
          [file, bytes = std::move(bytes)](const fs::path& folder) {
            write_file(folder / file, bytes);
          }};
}

const std::vector<std::string> kRun = {"run", "hall"};

std::vector<BadInput> in_venue_yaml() {
  return {
      {"unknown_key",
       kRun,
       "hall/venue.yaml:5: tolerances: unknown key; did you mean 'tolerance'?",
       with("venue.yaml", kVenue + "tolerances: {recall: 0.9}\n")},
      {"unknown_inner_key",
       kRun,
       "hall/venue.yaml:5: noise.mark_pixel: unknown key; allowed: mark_px, tape_m",
       with("venue.yaml", kVenue + "noise: {mark_pixel: 1}\n")},
      {"no_number",
       kRun,
       "hall/venue.yaml:5: budget.table_bytes = plenty: is not a number; it must be from 16 to "
       "16777216",
       with("venue.yaml", kVenue + "budget: {table_bytes: plenty}\n")},
      {"out_of_range",
       kRun,
       "hall/venue.yaml:5: tolerance.recall = 95: must be above 0 and at most 1",
       with("venue.yaml", kVenue + "tolerance: {recall: 95}\n")},
      {"decimal_comma",
       kRun,
       "hall/venue.yaml:6: noise.mark_px = 0,5: is not a number; write the decimals after a point; "
       "it "
       "must be above 0 and at most 50",
       with("venue.yaml", kVenue + "noise:\n  mark_px: 0,5\n")},
      {"unit_behind",
       kRun,
       "hall/venue.yaml:6: noise.tape_m = 3 mm: is not a number; write the number alone, its unit "
       "is "
       "in the name; it must be above 0 and at most 1",
       with("venue.yaml", kVenue + "noise:\n  tape_m: 3 mm\n")},
      {"quoted_number",
       kRun,
       "hall/venue.yaml:5: budget.table_bytes = 512: is text in quotes; write the number without "
       "them",
       with("venue.yaml", kVenue + "budget: {table_bytes: '512'}\n")},
      {"key_twice",
       kRun,
       "hall/venue.yaml:5: name: the key is given twice; keep one",
       with("venue.yaml", kVenue + "name: Other\n")},
      {"empty_file",
       kRun,
       "hall/venue.yaml: is empty; 'rondel new' shows what it may hold",
       with("venue.yaml", "")},
      {"a_list",
       kRun,
       "hall/venue.yaml:1: the file holds a list; it must hold 'key: value' lines",
       with("venue.yaml", "- name\n")},
      {"second_document",
       kRun,
       "hall/venue.yaml:5: what begins here belongs to nothing above; check brackets and "
       "indentation, and leave no line '---'",
       with("venue.yaml", kVenue + "---\nname: B\n")},
      {"broken_yaml",
       kRun,
       "hall/venue.yaml:2: cannot be read as YAML (illegal map value); check colons, brackets and "
       "indentation (spaces, no tabs)",
       with("venue.yaml", "name: Hall\n  link: {near_m: 0.2}\n")},
      {"ball_without_diameter",
       kRun,
       "hall/venue.yaml:2: objects.buoy.diameter_mm: is missing; a ball is seen at the height of "
       "its "
       "radius",
       with("venue.yaml", "objects:\n  buoy: {shape: ball}\n")},
      {"unknown_shape",
       kRun,
       "hall/venue.yaml:2: objects.cone.shape = cone: must be one of: ball, box, post",
       with("venue.yaml", "objects:\n  cone: {shape: cone}\n")},
      {"object_name",
       kRun,
       "hall/venue.yaml:2: objects.my buoy: a name is a letter, then letters, digits and '_', at "
       "most "
       "32; it stands in the boards' code",
       with("venue.yaml", "objects:\n  my buoy: {shape: box}\n")},
      {"near_beyond_far",
       kRun,
       "hall/venue.yaml:1: link.far_m = 1: near_m must be below far_m (2 and 1 now)",
       with("venue.yaml", "link: {near_m: 2, far_m: 1}\n")},
      {"centre_outside",
       kRun,
       "hall/venue.yaml: centre = 161.2, 20: is outside the image of 64 x 48 pixels",
       with("venue.yaml", kVenue + "centre: {u_px: 161.2, v_px: 20}\n")},
      {"no_venue_yaml",
       kRun,
       "hall/venue.yaml: is missing; 'rondel new' writes one into a new folder to start from",
       [](const fs::path& folder) { fs::remove(folder / "hall" / "venue.yaml"); }},
  };
}

std::vector<BadInput> in_rig_yaml() {
  return {
      {"no_rig_yaml",
       kRun,
       "hall/rig.yaml: is missing; 'rondel new' writes one into a new folder to start from",
       [](const fs::path& folder) { fs::remove(folder / "hall" / "rig.yaml"); }},
      {"no_height",
       kRun,
       "hall/rig.yaml:1: camera.height_px: is missing; write the frames' height in pixels",
       with("rig.yaml", "camera: {width_px: 64}\n")},
      {"zero_bytes",
       kRun,
       "hall/rig.yaml: holds zero bytes; save it as plain text (UTF-8)",
       with("rig.yaml", kRig + std::string(3, '\0'))},
      {"negative_length",
       kRun,
       "hall/rig.yaml:2: mounting.eye_height_mm = -160: must be above 0 and at most 5000",
       with("rig.yaml", kRig + "mounting: {eye_height_mm: -160}\n")},
      {"rim_beyond_sphere",
       kRun,
       "hall/rig.yaml:2: mirror.rim_radius_mm = 30: this conic is only 20 mm wide from its axis; "
       "check its numbers",
       with("rig.yaml",
            kRig + "mirror: {rim_radius_mm: 30, distance_mm: 60, vertex_radius_mm: 20, "
                   "conic_constant: 0}\n")},
      {"no_points_file",
       kRun,
       "hall/rig.yaml:2: mirror.points_file = p.csv: there is no such file beside rig.yaml",
       with("rig.yaml",
            kRig + "mirror: {shape: profile, rim_radius_mm: 30, distance_mm: 60, "
                   "points_file: p.csv}\n")},
      {"giant_camera",
       kRun,
       "hall/rig.yaml:1: camera.width_px = 10000: with this height_px it is more than 64 "
       "megapixels",
       with("rig.yaml", "camera: {width_px: 10000, height_px: 10000}\n")},
  };
}

std::vector<BadInput> in_sheets() {
  const std::string frame = "frames/noon/0001.png";
  return {
      {"missing_column",
       kRun,
       "hall/marks.csv:1: column 'range_m' is missing; the header must name "
       "image,u_px,v_px,object,range_m,bearing_deg",
       with("marks.csv", "image,u_px,v_px,object,bearing_deg\n")},
      {"semicolons",
       kRun,
       "hall/marks.csv:1: the columns are separated by ';'; save the file with commas",
       with("marks.csv", "image;u_px;v_px;object;range_m;bearing_deg\n")},
      {"nan",
       kRun,
       "hall/marks.csv:2: u_px = NaN: is not a number; it must be from -0.5 to 63.5",
       with("marks.csv", kMarks + ",NaN,20,,0.5,\n")},
      {"negative_range",
       kRun,
       "hall/marks.csv:3: range_m = -0.4: must be above 0 and at most 100",
       with("marks.csv", kMarks + "\r\n,10,20,,-0.4,\r\n")},
      {"unknown_object",
       kRun,
       "hall/marks.csv:2: object = bouy: is no object of venue.yaml; did you mean 'buoy'?",
       with("marks.csv", kMarks + ",10,20,bouy,0.5,\n")},
      {"pixel_outside",
       kRun,
       "hall/marks.csv:2: v_px = 48: must be from -0.5 to 47.5",
       with("marks.csv", kMarks + ",10,48,,0.5,\n")},
      {"bearing_too_large",
       kRun,
       "hall/marks.csv:2: bearing_deg = 1000: must be from -360 to 360",
       with("marks.csv", kMarks + ",10,20,,0.5,1000\n")},
      {"too_few_cells",
       kRun,
       "hall/marks.csv:2: the row has 3 cells and the header 6; leave unused cells empty, but keep "
       "their commas",
       with("marks.csv", kMarks + ",10,20\n")},
      {"open_quote",
       kRun,
       "hall/marks.csv:2: a quote is not closed; add the closing '\"'",
       with("marks.csv", kMarks + "\"frames,10,20,,0.5,\n")},
      {"image_in_other_light",
       kRun,
       "hall/marks.csv:2: image = frames/night/0001.png: there is no such image; did you mean "
       "'frames/noon/0001.png'?",
       with("marks.csv", kMarks + "frames/night/0001.png,10,20,,0.5,\n")},
      {"image_unknown",
       kRun,
       "hall/marks.csv:2: image = 7.png: there is no such image; name it from the folder on, as in "
       "frames/noon/0001.png",
       with("marks.csv", kMarks + "7.png,10,20,,0.5,\n")},
      {"image_absolute",
       kRun,
       "hall/marks.csv:2: image = /tmp/1.png: must be named relative to the folder, as in "
       "frames/noon/0001.png",
       with("marks.csv", kMarks + "/tmp/1.png,10,20,,0.5,\n")},
      {"image_backslash",
       kRun,
       "hall/marks.csv:2: image = frames\\noon\\0001.png: write '/' between folders, as in "
       "frames/noon/0001.png",
       with("marks.csv", kMarks + "frames\\noon\\0001.png,10,20,,0.5,\n")},
      {"swatch_label",
       kRun,
       "hall/swatches.csv:2: label = surrounding: is no object of venue.yaml; did you mean "
       "'surroundings'?",
       with("swatches.csv", kSwatches + frame + ",surrounding,disc,1 2 3\n")},
      {"swatch_shape",
       kRun,
       "hall/swatches.csv:2: shape = circle: is no shape; allowed: disc, box, polygon, grow",
       with("swatches.csv", kSwatches + frame + ",buoy,circle,1 2 3\n")},
      {"swatch_points",
       kRun,
       "hall/swatches.csv:2: points = 1 2: a disc is 'u v radius', three numbers",
       with("swatches.csv", kSwatches + frame + ",buoy,disc,1 2\n")},
      {"swatch_outside",
       kRun,
       "hall/swatches.csv:2: points = 100 100: no corner is inside the 64 x 48 image",
       with("swatches.csv", kSwatches + frame + ",buoy,grow,100 100\n")},
      {"tape_twice",
       kRun,
       "hall/tape.csv:3: object = buoy: line 2 says just the same; remove one",
       with("tape.csv", kTape + frame + ",buoy,1,\n" + frame + ",buoy,1,\n")},
      {"tape_contradiction",
       kRun,
       "hall/tape.csv:3: object = buoy: line 2 says the contrary; is the object in the image or "
       "not?",
       with("tape.csv", kTape + frame + ",buoy,1,\n" + frame + ",buoy,,\n")},
      {"tape_half_empty",
       kRun,
       "hall/tape.csv:2: range_m is empty, but bearing_deg is not; fill in both, or neither where "
       "the object is not in the image",
       with("tape.csv", kTape + frame + ",buoy,,12\n")},
      {"stroke_kind",
       kRun,
       "hall/strokes.csv:2: kind = erase: is no kind of stroke; allowed: hide, "
       "show",
       with("strokes.csv", kStrokes + "erase,3,1 2\n")},
      {"stroke_points",
       kRun,
       "hall/strokes.csv:2: points = 1 2 3: a stroke is 'u0 v0 u1 v1 ...', one point or more",
       with("strokes.csv", kStrokes + "hide,3,1 2 3\n")},
      {"nested_folder",
       kRun,
       "hall/frames/noon/more: is a folder inside a light's folder; put its images into "
       "frames/LIGHT/",
       with("frames/noon/more/1.png", encoded(".png"))},
      {"batch_without_tape",
       {"check", "hall", "--batch", "other"},
       "other/tape.csv: is missing; its first line is image,object,range_m,bearing_deg",
       [](const fs::path& folder) { write_file(folder / "other/frames/1.png", encoded(".png")); }},
  };
}

std::vector<BadInput> images() {
  return {
      image("image_empty", "a.png", "", "is empty; capture it again"),
      image("image_cut",
            "a.png",
            encoded(".png").substr(0, 80),
            "is cut short; copy or capture it again"),
      image("jpeg_cut",
            "a.jpg",
            encoded(".jpg").substr(0, 640),
            "is cut short; copy or capture it again"),
      image("image_renamed",
            "a.jpg",
            encoded(".png"),
            "holds a PNG image; its name's ending must say so"),
      image("image_of_text",
            "a.png",
            "these are no pixels",
            "is no PNG image, whatever its name says; save it as PNG, JPEG, BMP or PPM"),
      image("image_giant",
            "a.ppm",
            "P6 9000 9000 255\n",
            "is 9000 x 9000 pixels; more than 64 megapixels are refused"),
      image("image_of_other_size",
            "a.bmp",
            encoded(".bmp", 32, 32),
            "is 32 x 32 pixels; rig.yaml says 64 x 48"),
      image("image_without_header", "a.bmp", "BM", "its BMP header is damaged; capture it again"),
      image("dump_cut",
            "a.565",
            std::string(6143, 'x'),
            "has 6143 bytes; a raw RGB565 dump of 64 x 48 pixels has 6144: it is cut short"),
      image(
          "no_video",
          "a.mp4",
          "these are no pictures",
          "is no video that can be read; check the file, or take its frames as images in a folder"),
  };
}

std::vector<BadInput> flags() {
  return {
      {"no_such_command", {"rnu", "hall"}, "rondel: unknown command 'rnu'; did you mean 'run'?"},
      {"flag_first",
       {"--again", "run", "hall"},
       "rondel: the command comes first; usage: rondel COMMAND [WORDS] [FLAGS]"},
      {"unknown_flag",
       {"run", "hall", "--agian"},
       "rondel run: unknown flag '--agian'; did you mean '--again'?"},
      {"flag_without_value",
       {"new", "other", "--name"},
       "rondel new: --name needs a value: --name "
       "NAME"},
      {"flag_twice",
       {"new", "other", "--name", "a", "--name", "b"},
       "rondel new: --name is given twice; once is enough"},
      {"none_of_its_words",
       {"completion", "tcsh"},
       "rondel completion: 'tcsh' is none of its words; allowed: bash, zsh, fish"},
      {"too_few_words",
       {"grab", "hall"},
       "rondel grab: too few words; usage: rondel grab VENUE SOURCE"},
      {"too_many_words",
       {"run", "hall", "other"},
       "rondel run: 'other' is one word too many; usage: rondel run VENUE"},
      {"count_no_number",
       {"grab", "hall", "hall/frames/noon", "--count", "many"},
       "--count: 'many' is not a whole number"},
      {"count_zero",
       {"grab", "hall", "hall/frames/noon", "--count", "0"},
       "--count: 0 must be from 1 to 100000"},
      {"every_negative",
       {"grab", "hall", "hall/frames/noon", "--every", "-1"},
       "--every: -1 must be from 0 to 86400 seconds"},
      {"light_a_path",
       {"grab", "hall", "hall/frames/noon", "--light", "../x"},
       "--light: '../x' is no name for a folder; use letters, digits, '-' and '_'"},
      {"no_source",
       {"grab", "hall", "nowhere"},
       "nowhere: there is no such source; it may be a folder of images, a video file, a camera "
       "such "
       "as /dev/video0 or a stream such as rtsp://address/name"},
      {"source_without_images",
       {"grab", "hall", "hall/frames"},
       "hall/frames: holds no images itself; name one of its folders, such as 'hall/frames/noon'"},
      {"bad_address",
       {"grab", "hall", "hhtp://camera/1"},
       "hhtp://camera/1: is no stream address; did you mean 'http'?"},
      {"no_camera",
       {"grab", "hall", "/dev/null"},
       "/dev/null: cannot be opened as a camera; is another program using it, and are you in the "
       "group 'video'?"},
      {"no_venue", {"run", "hal"}, "hal: there is no such folder; 'rondel new' starts a venue"},
      {"venue_a_file",
       {"run", "hall/venue.yaml"},
       "hall/venue.yaml: is a file; a venue is a folder with a venue.yaml"},
      {"from_nowhere",
       {"new", "other", "--from", "last"},
       "--from: 'last': there is no such folder"},
      {"marks_without_from",
       {"new", "other", "--marks"},
       "--marks: goes with --from, which names the venue that has the marks"},
      {"new_on_a_file",
       {"new", "hall/marks.csv"},
       "hall/marks.csv: is a file; name a folder that is not there yet"},
      {"new_with_a_long_name",
       {"new", "other", "--name", std::string(61, 'n')},
       "--name: '" + std::string(60, 'n') +
           "...' must be one line of at most 60 characters of UTF-8 text"},
      {"batch_nowhere",
       {"check", "hall", "--batch", "nowhere"},
       "nowhere: there is no such folder; --batch takes one with frames/ and tape.csv"},
  };
}

std::vector<BadInput> all() {
  std::vector<BadInput> table;
  for (auto part : {in_venue_yaml(), in_rig_yaml(), in_sheets(), images(), flags()}) {
    table.insert(table.end(), part.begin(), part.end());
  }
  return table;
}

TEST(BadInputs, AreRefusedInOneLineWithNothingWritten) {
  const std::vector<BadInput> table = all();
  ASSERT_GE(table.size(), 40U);
  std::atomic<std::size_t> next{0};
  std::mutex mutex;  // of the expectations
  const auto work = [&] {
    for (std::size_t i = next++; i < table.size(); i = next++) {
      const BadInput& bad = table[i];
      const fs::path folder = folder_of(bad.name);
      make_hall(folder);
      bad.spoil(folder);
      const auto before = testing::snapshot(folder);
      const testing::Ran ran = testing::rondel_in(folder, bad.arguments);
      const auto after = testing::snapshot(folder);
      const std::lock_guard lock(mutex);
      EXPECT_EQ(ran.err, bad.problem + "\n") << bad.name;
      EXPECT_EQ(ran.status, 2) << bad.name;
      EXPECT_EQ(ran.out, "") << bad.name;
      EXPECT_EQ(after, before) << bad.name;
    }
  };
  std::jthread other(work);
  work();
}

TEST(BadInputs, AllOfAFilesAndOfAllFilesComeTogether) {
  const fs::path folder = folder_of("AllOfAFilesAndOfAllFilesComeTogether");
  make_hall(folder);
  write_file(folder / "hall" / "venue.yaml", kVenue + "nois: 1\nbudgt: 2\n");
  write_file(folder / "hall" / "marks.csv", kMarks + ",x,20,,0.5,\n,10,20,,,\n");
  const testing::Ran ran = testing::rondel_in(folder, kRun);
  EXPECT_EQ(ran.status, 2);
  EXPECT_EQ(ran.err,
            "hall/venue.yaml:5: nois: unknown key; did you mean 'noise'?\n"
            "hall/venue.yaml:6: budgt: unknown key; did you mean 'budget'?\n"
            "hall/marks.csv:2: u_px = x: is not a number; it must be from -0.5 to 63.5\n"
            "hall/marks.csv:3: range_m is empty; it must be above 0 and at most 100\n");
}

TEST(BadInputs, NewWritesOverNothing) {
  const fs::path folder = folder_of("NewWritesOverNothing");
  make_hall(folder);
  const auto before = testing::snapshot(folder);
  const testing::Ran ran = testing::rondel_in(folder, {"new", "hall"});
  EXPECT_EQ(ran.status, 2);
  EXPECT_EQ(ran.err,
            "hall/rig.yaml: is there already; choose another folder\n"
            "hall/venue.yaml: is there already; choose another folder\n");
  EXPECT_EQ(testing::snapshot(folder), before);
}

TEST(BadInputs, SitInTheJsonDocumentToo) {
  const fs::path folder = folder_of("SitInTheJsonDocumentToo");
  make_hall(folder);
  const testing::Ran ran = testing::rondel_in(folder, {"run", "hal", "--json"});
  EXPECT_EQ(ran.status, 2);
  EXPECT_EQ(ran.out,
            "{\n  \"problems\": [\n    {\n      \"where\": \"hal\",\n      \"what\": \"there is no "
            "such folder; 'rondel new' starts a venue\"\n    }\n  ]\n}\n");
}

}  // namespace
}  // namespace rondel
