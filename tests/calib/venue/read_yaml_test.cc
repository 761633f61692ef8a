#include "calib/venue/read_yaml.h"

#include <gmock/gmock.h>

#include <filesystem>

#include "calib/base/file.h"
#include "calib/venue/canonical.h"

namespace rondel {
namespace {

using testing::ElementsAre;
using testing::IsEmpty;

template <class Spec>
struct Read {
  Spec spec;
  std::vector<std::string> problems;
};

std::vector<std::string> texts(const std::vector<Problem>& problems) {
  std::vector<std::string> all;
  for (const Problem& problem : problems) all.push_back(to_text(problem));
  return all;
}

Read<RigSpec> rig(std::string_view text) {
  std::vector<Problem> problems;
  RigSpec spec = read_rig(text, "rig.yaml", testing::TempDir(), problems);
  return {std::move(spec), texts(problems)};
}

Read<VenueSpec> venue(std::string_view text) {
  std::vector<Problem> problems;
  VenueSpec spec = read_venue(text, "venue.yaml", problems);
  return {std::move(spec), texts(problems)};
}

const std::string kCamera = "camera: {width_px: 320, height_px: 240}\n";

TEST(ReadRig, TakesTheExampleOfTheDesign) {
  const auto r =
      rig("camera:\n  width_px: 320\n  height_px: 240\n  focal_px: {value: 260, tolerance: 5}\n"
          "mirror:\n  shape: conic\n  vertex_radius_mm: {value: 40, tolerance: 0.8}\n"
          "  conic_constant: {value: -2.25, tolerance: 0.08}\n  rim_radius_mm: 30\n"
          "  distance_mm: {value: 60, tolerance: 1}\n"
          "mounting:\n  eye_height_mm: {value: 160, tolerance: 3}\n  mirrored: true\n"
          "  heading_deg: 0\n");
  ASSERT_THAT(r.problems, IsEmpty());
  EXPECT_EQ(r.spec.camera.width_px, 320);
  EXPECT_EQ(r.spec.camera.focal_px->sd, 5.0);
  const auto& conic = std::get<ConicSpec>(r.spec.mirror->shape);
  EXPECT_DOUBLE_EQ(conic.vertex_radius_m.value, 0.040);
  EXPECT_DOUBLE_EQ(conic.vertex_radius_m.sd, 0.0008);
  EXPECT_EQ(conic.conic_constant.value, -2.25);
  EXPECT_DOUBLE_EQ(r.spec.mirror->rim_radius_m, 0.030);
  EXPECT_DOUBLE_EQ(r.spec.mounting.eye_height_m->value, 0.160);
  EXPECT_EQ(r.spec.mounting.mirrored, true);
  EXPECT_EQ(r.spec.mounting.heading_rad, 0.0);
}

TEST(ReadRig, NeedsTheCameraOnly) {
  const auto r = rig(kCamera);
  ASSERT_THAT(r.problems, IsEmpty());
  EXPECT_FALSE(r.spec.mirror);
  EXPECT_FALSE(r.spec.mounting.eye_height_m);
}

TEST(ReadRig, ABareNumberHasItsUsualTolerance) {
  const auto r =
      rig("camera: {width_px: 320, height_px: 240, focal_px: 250}\n"
          "mirror: {vertex_radius_mm: 50, conic_constant: -2, rim_radius_mm: 30, "
          "distance_mm: 60}\n");
  ASSERT_THAT(r.problems, IsEmpty());
  EXPECT_DOUBLE_EQ(r.spec.camera.focal_px->sd, 5.0);  // 2 %
  const auto& conic = std::get<ConicSpec>(r.spec.mirror->shape);
  EXPECT_DOUBLE_EQ(conic.vertex_radius_m.sd, 0.001);  // 2 %
  EXPECT_DOUBLE_EQ(conic.conic_constant.sd, 0.08);
  EXPECT_DOUBLE_EQ(r.spec.mirror->distance_m.sd, 0.001);
}

TEST(ReadRig, AllWaysToGiveAConicAgree) {
  // A hyperbola with semi-axes a = 32, b = 24 mm: linear eccentricity c = 40, e = c/a = 1.25,
  // vertex radius b^2/a = 18, vertex to focus c - a = 8, vertex to directrix a - a/e = 6.4, focus
  // to directrix b^2/c = 14.4 mm (the textbook relations of a hyperbola).
  const std::vector<std::string> forms = {"vertex_radius_mm: 18, conic_constant: -1.5625",
                                          "semi_axis_a_mm: 32, semi_axis_b_mm: 24",
                                          "eccentricity: 1.25, vertex_radius_mm: 18",
                                          "eccentricity: 1.25, focus_mm: 8",
                                          "eccentricity: 1.25, directrix_mm: 6.4",
                                          "eccentricity: 1.25, focus_to_directrix_mm: 14.4",
                                          "focus_mm: 8, directrix_mm: 6.4"};
  for (const std::string& form : forms) {
    const auto r = rig(kCamera + "mirror: {rim_radius_mm: 30, distance_mm: 60, " + form + "}\n");
    ASSERT_THAT(r.problems, IsEmpty()) << form;
    const auto& conic = std::get<ConicSpec>(r.spec.mirror->shape);
    EXPECT_NEAR(conic.vertex_radius_m.value, 0.018, 1e-12) << form;
    EXPECT_NEAR(conic.conic_constant.value, -1.5625, 1e-12) << form;
  }
}

TEST(ReadRig, ReadsAProfileFromAFileBesideIt) {
  std::string points = "distance_mm,sag_mm\n";
  for (int i = 0; i <= 10; ++i)
    points += std::to_string(3 * i) + "," + std::to_string(0.1 * i * i) + "\n";
  write_file(std::filesystem::path(testing::TempDir()) / "profile.csv", points);
  const std::string head =
      kCamera + "mirror:\n  shape: profile\n  rim_radius_mm: 28\n  distance_mm: 60\n";
  const auto r = rig(head + "  points_file: profile.csv\n");
  ASSERT_THAT(r.problems, IsEmpty());
  EXPECT_EQ(std::get<ProfileSpec>(r.spec.mirror->shape).points_m.size(), 11U);
  EXPECT_THAT(rig(head + "  points_file: ../profile.csv\n").problems,
              ElementsAre("rig.yaml:6: mirror.points_file = ../profile.csv: must be a file beside "
                          "rig.yaml, named without its folder"));
  EXPECT_THAT(
      rig(head + "  points_file: other.csv\n").problems,
      ElementsAre("rig.yaml:6: mirror.points_file = other.csv: there is no such file beside "
                  "rig.yaml"));
}

TEST(ReadRig, ReportsAllOfAFilesErrorsTogether) {
  const auto r =
      rig("camera:\n"
          "  widht_px: 320\n"
          "  height_px: 240.5\n"
          "  focal_px: {value: 260, tolerances: 5}\n"
          "mirrors: {}\n"
          "mounting:\n"
          "  eye_height_mm: -160\n"
          "  mirrored: yes\n"
          "  heading_deg: 90 deg\n");
  EXPECT_THAT(
      r.problems,
      ElementsAre(
          "rig.yaml:5: mirrors: unknown key; did you mean 'mirror'?",
          "rig.yaml:2: camera.widht_px: unknown key; did you mean 'width_px'?",
          "rig.yaml:2: camera.width_px: is missing; write the frames' width in pixels",
          "rig.yaml:3: camera.height_px = 240.5: must be a whole number from 16 to 20000",
          "rig.yaml:4: camera.focal_px.tolerances: unknown key; did you mean 'tolerance'?",
          "rig.yaml:7: mounting.eye_height_mm = -160: must be above 0 and at most 5000",
          "rig.yaml:8: mounting.mirrored = yes: must be true or false",
          "rig.yaml:9: mounting.heading_deg = 90 deg: is not a number; write the number alone, its "
          "unit is in the name; it must be from -360 to 360"));
}

TEST(ReadRig, NamesEachMistakeAlone) {
  struct Case {
    std::string text;
    std::string problem;
  };
  const std::string mirror = kCamera + "mirror: {rim_radius_mm: 30, distance_mm: 60, ";
  const std::vector<Case> cases = {
      {"", "rig.yaml: is empty; 'rondel new' shows what it may hold"},
      {"# nothing but a comment\n", "rig.yaml: is empty; 'rondel new' shows what it may hold"},
      {"- 1\n", "rig.yaml:1: the file holds a list; it must hold 'key: value' lines"},
      {"camera\n", "rig.yaml:1: the file holds a single value; it must hold 'key: value' lines"},
      {kCamera + "---\ncamera: 1\n",
       "rig.yaml:2: what begins here belongs to nothing above; check brackets and indentation, and "
       "leave no line '---'"},
      {kCamera + "}\n",
       "rig.yaml:2: cannot be read as YAML (illegal flow end); check colons, brackets and "
       "indentation (spaces, no tabs)"},
      {kCamera + "camera: {width_px: 1}\n", "rig.yaml:2: camera: the key is given twice; keep one"},
      {kCamera + "mirror:\n",
       "rig.yaml:2: mirror: has no value; write its keys below it, or remove "
       "the line"},
      {kCamera + "mirror: 3\n", "rig.yaml:2: mirror = 3: must hold keys, {key: value, ...}"},
      {"mounting: {heading_deg: 0}\n",
       "rig.yaml:1: camera: is missing; it needs width_px and height_px"},
      {"camera: {width_px: 20000, height_px: 20000}\n",
       "rig.yaml:1: camera.width_px = 20000: with this height_px it is more than 64 megapixels"},
      {"camera: {width_px: \"320\", height_px: 240}\n",
       "rig.yaml:1: camera.width_px = 320: is text in quotes; write the number without them"},
      {"camera: {width_px: [320], height_px: 240}\n",
       "rig.yaml:1: camera.width_px: is a list; it must be from 16 to 20000"},
      {"camera: {width_px: 320, height_px: 240, rgb565_order: high}\n",
       "rig.yaml:1: camera.rgb565_order = high: must be one of: high_first, low_first"},
      {mirror + "vertex_radius_mm: 40}\n",
       "rig.yaml:2: mirror: a conic needs just one of these pairs: vertex_radius_mm and "
       "conic_constant; semi_axis_a_mm and semi_axis_b_mm; eccentricity and vertex_radius_mm; "
       "eccentricity and focus_mm; eccentricity and directrix_mm; eccentricity and "
       "focus_to_directrix_mm; focus_mm and directrix_mm"},
      {mirror + "vertex_radius_mm: 20, conic_constant: 0}\n",
       "rig.yaml:2: mirror.rim_radius_mm = 30: this conic is only 20 mm wide from its axis; check "
       "its numbers"},
      {mirror + "shape: cone}\n",
       "rig.yaml:2: mirror.slope_deg: is missing; write the angle between the cone's flank and its "
       "base"},
      {mirror + "shape: cone, slope_deg: 40, eccentricity: 1}\n",
       "rig.yaml:2: mirror.eccentricity: unknown key; allowed: shape, rim_radius_mm, distance_mm, "
       "slope_deg"},
      {mirror + "shape: conix, slope_deg: 40}\n",
       "rig.yaml:2: mirror.shape = conix: must be one of: conic, cone, profile; did you mean "
       "'conic'?"},
  };
  for (const Case& c : cases) {
    EXPECT_THAT(rig(c.text).problems, ElementsAre(c.problem)) << c.text;
  }
}

TEST(ReadRig, BrokenYamlIsNamedWithItsLine) {
  const auto r = rig("camera:\n  width_px: 320\n height_px: [240\n");
  ASSERT_EQ(r.problems.size(), 1U);
  EXPECT_THAT(r.problems[0], testing::MatchesRegex("rig.yaml:[34]: cannot be read as YAML .*"));
  EXPECT_THAT(rig(std::string("camera: \0", 9)).problems,
              ElementsAre("rig.yaml: holds zero bytes; save it as plain text (UTF-8)"));
}

TEST(ReadVenue, TakesTheExampleOfTheDesign) {
  const auto r = venue(
      "name: Quay\n"
      "objects:\n"
      "  buoy:      {shape: ball, diameter_mm: 74}\n"
      "  dock_teal: {shape: box, height_mm: 0}\n"
      "link: {baud: 115200, reports_per_second: 30, bearing_codes: 120, range_bits: 7, near_m: "
      "0.15, "
      "far_m: 3.0, check_byte: true}\n"
      "budget: {table_bytes: 1024}\n"
      "tolerance: {range_relative: 0.05, range_floor_mm: 20, bearing_deg: 3, recall: 0.95}\n"
      "centre: {u_px: 161.2, v_px: 118.9, sd_px: 0.2}\n"
      "noise: {mark_px: 0.5, tape_m: 0.003}\n");
  ASSERT_THAT(r.problems, IsEmpty());
  EXPECT_EQ(r.spec.name, "Quay");
  ASSERT_EQ(r.spec.objects.size(), 2U);
  EXPECT_EQ(r.spec.objects[0].name, "buoy");
  EXPECT_DOUBLE_EQ(r.spec.objects[0].seen_height_m(), 0.037);
  EXPECT_EQ(r.spec.objects[1].shape, Shape::box);
  EXPECT_EQ(r.spec.objects[1].seen_height_m(), 0.0);
  EXPECT_EQ(r.spec.link.check, CheckByte::sum7);
  EXPECT_DOUBLE_EQ(r.spec.tolerance.bearing_rad, 3.0 * kRadPerDeg);
  ASSERT_TRUE(r.spec.centre);
  EXPECT_EQ(r.spec.centre->centre, (ImagePoint{161.2, 118.9}));
}

TEST(ReadVenue, EveryKeyIsOptional) {
  const auto r = venue("name: Hall\n");
  ASSERT_THAT(r.problems, IsEmpty());
  EXPECT_EQ(r.spec.link.baud, 115200);
  EXPECT_EQ(r.spec.budget.table_bytes, 1024);
  EXPECT_EQ(r.spec.tolerance.recall, 0.95);
  EXPECT_FALSE(r.spec.centre);
}

TEST(ReadVenue, ReportsAllOfAFilesErrorsTogether) {
  const auto r = venue(
      "objects:\n"
      "  buoy: {shape: bal, diameter_mm: 74}\n"
      "  2dock: {shape: box}\n"
      "  post: {shape: post, diameter: 30}\n"
      "  surroundings: {shape: box}\n"
      "  cup: {shape: ball}\n"
      "link:\n"
      "  baud: 115.2k\n"
      "  near_m: 4\n"
      "tolerance: {range_relative: 5 %}\n"
      "lighting: {stops: [1, -1], kelvin: 5000}\n");
  EXPECT_THAT(
      r.problems,
      ElementsAre(
          "venue.yaml:2: objects.buoy.shape = bal: must be one of: ball, box, post; did you mean "
          "'ball'?",
          "venue.yaml:3: objects.2dock: a name is a letter, then letters, digits and '_', at most "
          "32; it stands in the boards' code",
          "venue.yaml:4: objects.post.diameter: unknown key; did you mean 'diameter_mm'?",
          "venue.yaml:5: objects.surroundings: this name stands for all that is no object; choose "
          "another",
          "venue.yaml:6: objects.cup.diameter_mm: is missing; a ball is seen at the height of its "
          "radius",
          "venue.yaml:8: link.baud = 115.2k: is not a number; write the number alone, its unit is "
          "in the name; it must be from 300 to 10000000",
          "venue.yaml:9: link.near_m = 4: near_m must be below far_m (4 and 3 now)",
          "venue.yaml:10: tolerance.range_relative = 5 %: is not a number; write the number alone, "
          "its unit is in the name; it must be above 0 and at most 1",
          "venue.yaml:11: lighting.stops: [1, -1] goes downwards; write [low, high]",
          "venue.yaml:11: lighting.kelvin = 5000: must be a list of two numbers, [low, high]"));
}

TEST(Canonical, DependsOnValuesAndNotOnTheirSpelling) {
  const auto a =
      venue("link: {near_m: 0.15, far_m: 3}\nobjects: {b: {shape: ball, diameter_mm: 74}}\n");
  const auto b = venue(
      "# the same\nobjects:\n  b:\n    diameter_mm: 74.0\n    shape: ball\n"
      "link:\n  far_m: 3.00\n  near_m: 1.5e-1\n");
  EXPECT_EQ(canonical_link(a.spec), canonical_link(b.spec));
  EXPECT_EQ(canonical_objects(a.spec), canonical_objects(b.spec));
  const auto c = venue("link: {near_m: 0.15, far_m: 3.0000000000000004}\n");
  EXPECT_NE(canonical_link(a.spec), canonical_link(c.spec));
}

}  // namespace
}  // namespace rondel
