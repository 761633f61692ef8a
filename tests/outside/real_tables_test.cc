// Real pixel-against-metre tables, where ../shared/real is present beside the checkout: what the
// fit makes of them. They are not part of the project.
#include <fmt/format.h>
#include <gtest/gtest.h>

#include <cmath>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "calib/range/fit.h"

namespace rondel::range {
namespace {

std::filesystem::path real_folder() {
  return std::filesystem::path(RONDEL_SOURCE_DIR).parent_path() / "shared" / "real";
}

/// One row a mark: range and radius, put at several azimuths about the centre of a square image.
FitInput table_marks(const std::filesystem::path& file,
                     double size_px,
                     double sd_px,
                     int azimuths) {
  FitInput input;
  input.rig.camera.width_px = static_cast<int>(size_px);
  input.rig.camera.height_px = static_cast<int>(size_px);
  const double middle = 0.5 * (size_px - 1.0);
  input.rim_centre = ObservedPoint{{middle, middle}, {0.01, 0.0, 0.01}};
  std::ifstream in(file);
  std::string line;
  std::getline(in, line);
  for (int number = 2; std::getline(in, line); ++number) {
    for (char& c : line) c = c == ',' ? ' ' : c;
    std::istringstream row(line);
    double range = 0.0;
    double radius = 0.0;
    if (!(row >> range >> radius)) continue;
    for (int k = 0; k < azimuths; ++k) {
      const double a = 2.0 * std::numbers::pi * (k + 0.3) / azimuths;
      MarkInput m;
      m.line = number;
      m.pixel = {middle + radius * std::cos(a), middle + radius * std::sin(a)};
      m.pixel_sd_px = sd_px;
      m.range_m = range;
      input.marks.push_back(m);
    }
  }
  input.near_m = input.marks.front().range_m;
  input.far_m = input.marks.back().range_m;
  return input;
}

void print(const char* name, const FitResult& fit, const FitInput& input) {
  int inside = 0;
  for (const MarkResidual& r : fit.residuals) {
    const MarkInput& m = input.marks[static_cast<std::size_t>(r.mark)];
    const auto e = fit.curve->floor_with_band(m.pixel, 0.0);
    // A table's own rows scatter by pixel noise beside the curve's band.
    const auto beside = fit.curve->floor_at({m.pixel.u_px + m.pixel_sd_px, m.pixel.v_px}, 0.0);
    if (!e || !beside) continue;
    const double allowed = std::hypot(e->band95_high_m - e->spot.range_m,
                                      2.0 * std::abs(beside->range_m - e->spot.range_m));
    inside += std::abs(m.range_m - e->spot.range_m) <= allowed ? 1 : 0;
  }
  fmt::print(
      "{}: {} on {} marks, {:.2f} px RMS, {:.2f} % left out, noise x{:.2f}, {:.0f} % of rows "
      "inside band and pixel noise\n",
      name,
      fit.model,
      fit.marks,
      fit.rms_px,
      100.0 * fit.leave_one_out_relative,
      fit.noise_scale,
      100.0 * inside / static_cast<double>(input.marks.size()));
  for (const Candidate& c : fit.candidates) {
    fmt::print("  {:18} {:6.2f} px {:7.2f} %  {}\n",
               c.model,
               c.rms_px,
               100.0 * c.leave_one_out_relative,
               c.refused);
  }
}

double left_out(const FitResult& fit, const std::string& model) {
  for (const Candidate& c : fit.candidates) {
    if (c.model == model && c.refused.empty()) return c.leave_one_out_relative;
  }
  return std::numeric_limits<double>::infinity();
}

TEST(RealTables, RingsOnACarpet) {
  const auto file = real_folder() / "rings.csv";
  if (!std::filesystem::exists(file)) GTEST_SKIP() << file << " is not here";
  const FitInput input = table_marks(file, 460.0, 0.3, 1);
  const FitResult fit = fit_range(input);
  print("rings", fit, input);
  // A plain least-squares fit of the sphere model leaves 0.3 px and 1.2 %; a cubic 14 % (computed
  // beside the measurement of the radii).
  // Here the curve's centre may lie beside the rings' by 2 px, which one azimuth cannot show.
  EXPECT_LT(fit.leave_one_out_relative, 0.025);
  EXPECT_LT(fit.rms_px, 0.6);
  EXPECT_GT(left_out(fit, "polynomial3"), 3.0 * fit.leave_one_out_relative);
}

TEST(RealTables, TableTakenByHand) {
  const auto file = real_folder() / "hand-table.csv";
  if (!std::filesystem::exists(file)) GTEST_SKIP() << file << " is not here";
  // Integer pixels read by eye: a few pixels off, which is what the noise's scale has to find.
  const FitInput input = table_marks(file, 480.0, 0.5, 1);
  const FitResult fit = fit_range(input);
  print("hand table", fit, input);
  EXPECT_GT(fit.noise_scale, 1.5);
  EXPECT_LT(fit.leave_one_out_relative, 0.12);
  EXPECT_TRUE(fit.curve->floor_at(input.marks.back().pixel, 0.0));
}

}  // namespace
}  // namespace rondel::range
