#include "calib/venue/read_sheets.h"

#include <gmock/gmock.h>

#include <random>

namespace rondel {
namespace {

using testing::ElementsAre;
using testing::IsEmpty;

class Sheets : public testing::Test {
 protected:
  Sheets() {
    venue_.objects.resize(2);
    venue_.objects[0].name = "buoy";
    venue_.objects[1].name = "dock";
    camera_.width_px = 320;
    camera_.height_px = 240;
  }
  template <class Reader>
  auto read(Reader reader, const std::string& text) {
    const SheetContext context{venue_, camera_, [](const std::string& image) {
                                 return image == "frames/a.png"
                                            ? std::optional<std::string>{}
                                            : std::optional<std::string>("there is no such image");
                               }};
    std::vector<Problem> problems;
    auto rows = reader(text, "s.csv", context, problems);
    said_.clear();
    for (const Problem& problem : problems) said_.push_back(to_text(problem));
    return rows;
  }
  VenueSpec venue_;
  CameraSpec camera_;
  std::vector<std::string> said_;
};

TEST_F(Sheets, MarksWithAndWithoutWhatIsOptional) {
  const auto marks = read(read_marks,
                          "image,u_px,v_px,object,range_m,bearing_deg\n"
                          "frames/a.png,10.5,20,buoy,1.25,-90\n"
                          ",319.5,239.5,,0.4,\n");
  ASSERT_THAT(said_, IsEmpty());
  ASSERT_EQ(marks.size(), 2U);
  EXPECT_EQ(marks[0].line, 2);
  EXPECT_EQ(marks[0].object, "buoy");
  EXPECT_DOUBLE_EQ(*marks[0].bearing_rad, -std::numbers::pi / 2);
  EXPECT_EQ(marks[1].image, "");
  EXPECT_FALSE(marks[1].bearing_rad);
}

TEST_F(Sheets, BearingsAreWrappedIntoTheHalfOpenTurn) {
  const auto marks = read(read_marks,
                          "image,u_px,v_px,object,range_m,bearing_deg\n"
                          ",1,1,,1,-180\n,1,1,,1,270\n,1,1,,1,360\n");
  ASSERT_THAT(said_, IsEmpty());
  EXPECT_DOUBLE_EQ(*marks[0].bearing_rad, std::numbers::pi);
  EXPECT_DOUBLE_EQ(*marks[1].bearing_rad, -std::numbers::pi / 2);
  EXPECT_NEAR(*marks[2].bearing_rad, 0.0, 1e-15);
}

TEST_F(Sheets, MarksNameEveryTrouble) {
  const auto marks = read(read_marks,
                          "image,u_px,v_px,object,range_m,bearing_deg\n"
                          "frames/b.png,10,20,,1,\n"
                          ",320,20,,1,\n"
                          ",10,NaN,,1,\n"
                          ",10,20,bouy,1,\n"
                          ",10,20,,-0.4,\n"
                          ",10,20,,0,\n"
                          ",10,20,,,\n"
                          ",10,20,,1,400\n"
                          ",10,20,,\"1,5\",\n"
                          ",10,20,,1,5\n");
  EXPECT_EQ(marks.size(), 1U) << "the good row is read all the same";
  EXPECT_THAT(
      said_,
      ElementsAre(
          "s.csv:2: image = frames/b.png: there is no such image",
          "s.csv:3: u_px = 320: must be from -0.5 to 319.5",
          "s.csv:4: v_px = NaN: is not a number; it must be from -0.5 to 239.5",
          "s.csv:5: object = bouy: is no object of venue.yaml; did you mean 'buoy'?",
          "s.csv:6: range_m = -0.4: must be above 0 and at most 100",
          "s.csv:7: range_m = 0: must be above 0 and at most 100",
          "s.csv:8: range_m is empty; it must be above 0 and at most 100",
          "s.csv:9: bearing_deg = 400: must be from -360 to 360",
          "s.csv:10: range_m = 1,5: is not a number; write the decimals after a point; it must be "
          "above 0 and at most 100"));
}

TEST_F(Sheets, SwatchesOfEveryShape) {
  const auto swatches = read(read_swatches,
                             "image,label,shape,points\n"
                             "frames/a.png,buoy,disc,10 20 3.5\n"
                             "frames/a.png,dock,box,30 40 10 20\n"
                             "frames/a.png,surroundings,polygon,0 0 10 0 10 10\n"
                             "frames/a.png,buoy,grow, 7   8 \n");
  ASSERT_THAT(said_, IsEmpty());
  ASSERT_EQ(swatches.size(), 4U);
  EXPECT_EQ(std::get<Disc>(swatches[0].region).radius_px, 3.5);
  EXPECT_EQ(std::get<Box>(swatches[1].region).low, (ImagePoint{10.0, 20.0}));
  EXPECT_EQ(std::get<Box>(swatches[1].region).high, (ImagePoint{30.0, 40.0}));
  EXPECT_EQ(std::get<Polygon>(swatches[2].region).corners.size(), 3U);
  EXPECT_EQ(std::get<Grow>(swatches[3].region).seed, (ImagePoint{7.0, 8.0}));
}

TEST_F(Sheets, SwatchesNameEveryTrouble) {
  const auto swatches = read(read_swatches,
                             "image,label,shape,points\n"
                             ",buoy,disc,1 2 3\n"
                             "frames/a.png,,disc,1 2 3\n"
                             "frames/a.png,boy,disc,1 2 3\n"
                             "frames/a.png,buoy,disk,1 2 3\n"
                             "frames/a.png,buoy,disc,1 2\n"
                             "frames/a.png,buoy,disc,1 2 0\n"
                             "frames/a.png,buoy,box,1 2 3\n"
                             "frames/a.png,buoy,polygon,1 2 3 4 5\n"
                             "frames/a.png,buoy,grow,1 x\n"
                             "frames/a.png,buoy,grow,400 300\n"
                             "frames/a.png,buoy,,1 2\n"
                             "frames/a.png,buoy,grow,1e9 3\n");
  EXPECT_THAT(swatches, IsEmpty());
  EXPECT_THAT(
      said_,
      ElementsAre("s.csv:2: image is empty; name the image the row is about",
                  "s.csv:3: label is empty; name an object of venue.yaml",
                  "s.csv:4: label = boy: is no object of venue.yaml; did you mean 'buoy'?",
                  "s.csv:5: shape = disk: is no shape; did you mean 'disc'?",
                  "s.csv:6: points = 1 2: a disc is 'u v radius', three numbers",
                  "s.csv:7: points = 1 2 0: a disc's radius must be above 0",
                  "s.csv:8: points = 1 2 3: a box is 'u0 v0 u1 v1', four numbers",
                  "s.csv:9: points = 1 2 3 4 5: a polygon is 'u0 v0 u1 v1 u2 v2 ...', three "
                  "corners or more",
                  "s.csv:10: points = 1 x: 'x' is not a number",
                  "s.csv:11: points = 400 300: no corner is inside the 320 x 240 image",
                  "s.csv:12: shape is empty; allowed: disc, box, polygon, grow",
                  "s.csv:13: points = 1e9 3: '1e9' is beyond any image"));
}

TEST_F(Sheets, StrokesNameEveryTrouble) {
  const auto strokes = read(read_strokes,
                            "kind,width_px,points\n"
                            "hide,5,1 2 3 4\n"
                            "hid,5,1 2\n"
                            ",5,1 2\n"
                            "show,0,1 2\n"
                            "show,5,1 2 3\n"
                            "show,5,\n");
  ASSERT_EQ(strokes.size(), 1U);
  EXPECT_TRUE(strokes[0].hide);
  EXPECT_EQ(strokes[0].points.size(), 2U);
  EXPECT_THAT(
      said_,
      ElementsAre("s.csv:3: kind = hid: is no kind of stroke; did you mean 'hide'?",
                  "s.csv:4: kind is empty; allowed: hide, show",
                  "s.csv:5: width_px = 0: must be above 0 and at most 2000",
                  "s.csv:6: points = 1 2 3: a stroke is 'u0 v0 u1 v1 ...', one point or more",
                  "s.csv:7: points is empty; write its numbers with blanks between them"));
}

TEST_F(Sheets, TapeNamesRowsThatRepeatOrContradict) {
  const auto tape = read(read_tape,
                         "image,object,range_m,bearing_deg\n"
                         "frames/a.png,buoy,1,10\n"
                         "frames/a.png,buoy,1.5,20\n"
                         "frames/a.png,buoy,1,10\n"
                         "frames/a.png,dock,,\n"
                         "frames/a.png,dock,2,\n"
                         "frames/a.png,buoy,,30\n");
  ASSERT_EQ(tape.size(), 3U);
  EXPECT_TRUE(tape[2].absent);
  EXPECT_THAT(
      said_,
      ElementsAre(
          "s.csv:4: object = buoy: line 2 says just the same; remove one",
          "s.csv:6: object = dock: line 5 says the contrary; is the object in the image or "
          "not?",
          "s.csv:7: range_m is empty, but bearing_deg is not; fill in both, or neither where "
          "the object is not in the image"));
}

TEST_F(Sheets, WhatIsWrittenReadsBackToTheSameRows) {
  std::mt19937_64 rng{7};
  std::uniform_real_distribution<double> u{0.0, 300.0};
  std::uniform_real_distribution<double> angle{-std::numbers::pi, std::numbers::pi};
  std::vector<Mark> marks;
  std::vector<TapeRow> tape;
  for (int i = 0; i < 200; ++i) {
    marks.push_back(
        {i + 2, "frames/a.png", {u(rng), 0.7 * u(rng)}, "buoy", 0.01 * u(rng) + 0.001, angle(rng)});
    tape.push_back({i + 2, "frames/a.png", "dock", 0.01 * u(rng) + 0.001, angle(rng), false});
  }
  const auto marks_again = read(read_marks, marks_csv(marks));
  ASSERT_THAT(said_, IsEmpty());
  ASSERT_EQ(marks_again.size(), marks.size());
  for (std::size_t i = 0; i < marks.size(); ++i) {
    EXPECT_EQ(marks_again[i].pixel, marks[i].pixel);
    EXPECT_EQ(marks_again[i].range_m, marks[i].range_m);
    // Degrees and radians convert with one rounding each way: two units in the last place of pi.
    EXPECT_NEAR(*marks_again[i].bearing_rad, *marks[i].bearing_rad, 2 * 4.5e-16);
  }
  const auto tape_again = read(read_tape, tape_csv(tape));
  ASSERT_THAT(said_, IsEmpty());
  ASSERT_EQ(tape_again.size(), tape.size());
  EXPECT_EQ(tape_again[7].range_m, tape[7].range_m);

  const std::vector<Swatch> swatches = {
      {2, "frames/a.png", "buoy", Disc{{1.25, 2.5}, 3.0}},
      {3, "frames/a.png", "dock", Box{{1.0, 2.0}, {3.0, 4.0}}},
      {4, "frames/a.png", kSurroundings, Polygon{{{0.0, 0.0}, {9.0, 0.0}, {9.0, 9.0}}}},
      {5, "frames/a.png", "buoy", Grow{{7.0, 8.0}}}};
  EXPECT_EQ(swatches_csv(read(read_swatches, swatches_csv(swatches))), swatches_csv(swatches));
  const std::vector<Stroke> strokes = {{2, true, 4.5, {{1.0, 2.0}, {3.0, 4.0}}},
                                       {3, false, 1.0, {{5.0, 6.0}}}};
  const auto strokes_again = read(read_strokes, strokes_csv(strokes));
  ASSERT_EQ(strokes_again.size(), 2U);
  EXPECT_EQ(strokes_again[0].points, strokes[0].points);
  EXPECT_FALSE(strokes_again[1].hide);
}

}  // namespace
}  // namespace rondel
