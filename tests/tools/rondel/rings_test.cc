// The main job on a real frame, where ../shared/real is present beside the checkout: a floor with
// white rings at known distances, no drawing, eye height unknown, marks without bearings.
#include <fmt/format.h>
#include <gtest/gtest.h>

#include <cmath>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "calib/base/file.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/report/page.h"
#include "tools/rondel/steps/range_step.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

TEST(Rings, CentreRangeAndTablesFromOneRealFrame) {
  const fs::path real = fs::path(RONDEL_SOURCE_DIR).parent_path() / "shared" / "real";
  if (!fs::exists(real / "rings.png")) GTEST_SKIP() << real << " is not here";
  const fs::path venue = fs::temp_directory_path() / "rondel_rings_test";
  fs::remove_all(venue);
  fs::create_directories(venue / "frames");
  fs::copy_file(real / "rings.png", venue / "frames" / "rings.png");
  write_file(venue / "rig.yaml", "camera: {width_px: 460, height_px: 460}\n");
  write_file(venue / "venue.yaml",
             "name: Rings\nobjects:\n  thing: {shape: box, height_mm: 0}\n"
             "link: {near_m: 0.9, far_m: 7.0}\n");
  std::string marks = "image,u_px,v_px,object,range_m,bearing_deg\n";
  std::ifstream in(real / "rings.csv");
  std::string line;
  std::getline(in, line);
  while (std::getline(in, line)) {
    for (char& c : line) c = c == ',' ? ' ' : c;
    std::istringstream row(line);
    double range = 0.0;
    double radius = 0.0;
    if (!(row >> range >> radius)) continue;
    // Clear of the three struts.
    for (const double azimuth : {0.35, 1.4, 2.45, 3.5, 4.55, 5.6}) {
      marks += fmt::format("frames/rings.png,{:.3f},{:.3f},,{},\n",
                           230.2 + radius * std::cos(azimuth),
                           231.3 + radius * std::sin(azimuth),
                           range);
    }
  }
  write_file(venue / "marks.csv", marks);

  Progress quiet;
  const Workspace workspace = open_workspace(venue);
  const Outcome centre = centre_step(workspace, quiet);
  fmt::print("{}", centre.summary);
  EXPECT_NEAR(centre.document["centre"]["u_px"].get<double>(), 230.2, 2.0);
  EXPECT_NEAR(centre.document["centre"]["v_px"].get<double>(), 231.3, 2.0);
  EXPECT_NEAR(centre.document["rim"]["a_px"].get<double>(), 197.0, 6.0);
  const Outcome range = range_step(workspace, quiet);
  fmt::print("{}", range.summary);
  // The measured radii are good to 0.2 px, those of the two outer rings to 1 px.
  EXPECT_LT(range.document["rms_px"].get<double>(), 0.6);
  EXPECT_LT(range.document["leave_one_out_relative"].get<double>(), 0.025);
  const Outcome tables = tables_step(workspace, quiet);
  EXPECT_LE(tables.document["codebook"]["worst_relative_error"].get<double>(),
            tables.document["codebook"]["bound"].get<double>() * 1.000001);
  report::write_report(workspace);
  EXPECT_GT(fs::file_size(workspace.results() / "report.html"), 10000U);
}

}  // namespace
}  // namespace rondel::app
