#include "calib/link/build_tables.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <random>

#include "calib/base/problem.h"
#include "tests/calib/link/rig_map.h"
#include "tests/calib/optics/rigs.h"

namespace rondel::link {
namespace {

using ::testing::HasSubstr;

constexpr int kWidth = 160;
constexpr int kHeight = 120;

/// The example rig at half the resolution, tilted and decentred (for speed).
optics::RigGeometry<double> rig_with(double tilt_deg, double decentre_px, double heading_deg) {
  optics::RigGeometry<double> rig = optics::testing::example_rig();
  rig.focal_px = 130.0;
  rig.cu_px = 79.5 + decentre_px;
  rig.cv_px = 59.5;
  rig.tilt_x = tilt_deg * kRadPerDeg;
  rig.tilt_y = -0.4 * tilt_deg * kRadPerDeg;
  rig.heading_rad = heading_deg * kRadPerDeg;
  return rig;
}

VenueSpec venue_with(std::initializer_list<double> heights_m) {
  VenueSpec venue;
  venue.name = "Trial";
  for (const double h : heights_m) {
    venue.objects.push_back({"object" + std::to_string(venue.objects.size()), Shape::box, 0.0, h});
  }
  return venue;
}

BuiltTables build(const FloorMap& map, const VenueSpec& venue) {
  CameraSpec camera;
  camera.width_px = kWidth;
  camera.height_px = kHeight;
  Progress progress;
  return build_tables(map, venue, camera, {}, {}, {}, {}, "venue.yaml", progress);
}

// The target, worked out here from the map alone: 1.1 x the bound plus what half a pixel is worth.
TEST(BuildTables, EveryPixelKeepsTheTarget) {
  for (const auto& [tilt, decentre, heading] :
       {std::tuple{0.0, 0.0, 0.0}, std::tuple{1.0, 2.0, 0.0}, std::tuple{-1.5, -1.0, 37.0}}) {
    const testing::RigMap map(rig_with(tilt, decentre, heading));
    const VenueSpec venue = venue_with({0.0, 0.037});
    const BoardTables tables = build(map, venue).tables;
    const double bound = relative_bound(venue.link.near_m, venue.link.far_m, tables.range_codes());
    int checked = 0;
    for (int object = 0; object < 2; ++object) {
      const double height = venue.objects[static_cast<std::size_t>(object)].seen_height_m();
      for (int v = 1; v + 1 < kHeight; ++v) {
        for (int u = 1; u + 1 < kWidth; ++u) {
          const auto at = [&](int du, int dv) {
            return map.floor_at({static_cast<double>(u + du), static_cast<double>(v + dv)}, height);
          };
          const auto here = at(0, 0);
          const auto left = at(-1, 0);
          const auto right = at(1, 0);
          const auto above = at(0, -1);
          const auto below = at(0, 1);
          if (!here || !left || !right || !above || !below) continue;
          if (here->range_m < venue.link.near_m || here->range_m > venue.link.far_m) continue;
          const double pixel_m =
              0.5 * std::hypot(right->range_m - left->range_m, below->range_m - above->range_m);
          const auto read = decode(tables, encode(tables, object, 8 * u, 8 * v));
          const double range_m = read ? read->range_m : venue.link.far_m;
          EXPECT_LE(std::abs(range_m - here->range_m),
                    1.1 * bound * here->range_m + 0.5 * pixel_m + 1e-4)
              << u << " " << v;
          ++checked;
        }
      }
    }
    EXPECT_GT(checked, 8000);
  }
}

TEST(BuildTables, PacksAndUnpacksToTheSame) {
  const testing::RigMap map(rig_with(1.0, 2.0, 20.0));
  const BoardTables tables = build(map, venue_with({0.0, 0.037})).tables;
  const std::vector<std::uint8_t> bytes = pack(tables);
  const BoardTables back = unpack(bytes, "t.bin");
  EXPECT_EQ(pack(back), bytes);
  EXPECT_EQ(back.identity, tables.identity);
  for (int v = 0; v < kHeight; v += 3) {
    for (int u = 0; u < kWidth; u += 3) {
      EXPECT_EQ(encode(back, 1, 8 * u, 8 * v), encode(tables, 1, 8 * u, 8 * v));
    }
  }
}

TEST(BuildTables, TheSameInputsGiveTheSameBytes) {
  const testing::RigMap map(rig_with(1.0, 2.0, 0.0));
  EXPECT_EQ(pack(build(map, venue_with({0.037})).tables),
            pack(build(map, venue_with({0.037})).tables));
}

TEST(Unpack, RefusesEveryDamagedByte) {
  const testing::RigMap map(rig_with(0.0, 0.0, 0.0));
  const std::vector<std::uint8_t> good = pack(build(map, venue_with({0.0})).tables);
  for (std::size_t i = 0; i < good.size(); ++i) {
    std::vector<std::uint8_t> bad = good;
    bad[i] = static_cast<std::uint8_t>(bad[i] ^ 0x41U);
    EXPECT_THROW((void)unpack(bad, "t.bin"), InputError) << i;
  }
  for (const std::size_t size : {std::size_t{0}, std::size_t{15}, good.size() - 1}) {
    EXPECT_THROW((void)unpack(std::span(good).first(size), "t.bin"), InputError);
  }
}

TEST(BuildTables, AnImpossibleBudgetNamesThePossibleOne) {
  const testing::RigMap map(rig_with(1.0, 2.0, 0.0));
  VenueSpec venue = venue_with({0.037});
  const int needed = table_bytes(build(map, venue).tables);
  venue.budget.table_bytes = needed - 1;
  try {
    (void)build(map, venue);
    FAIL();
  } catch (const InputError& error) {
    EXPECT_THAT(error.what(), HasSubstr(std::to_string(needed) + " bytes"));
  }
  venue.budget.table_bytes = needed;
  EXPECT_EQ(table_bytes(build(map, venue).tables), needed);
}

// The encoder's bearing against atan2, for numbers of codes that 8, 4, 2 and nothing divide.
TEST(BuildTables, BearingsAreWithinHalfAStep) {
  const testing::RigMap map(rig_with(0.0, 0.0, 73.0));
  for (const int codes : {120, 60, 90, 121, 360}) {
    VenueSpec venue = venue_with({0.0});
    venue.link.bearing_codes = codes;
    const BoardTables tables = build(map, venue).tables;
    for (int v = 0; v < kHeight; v += 2) {
      for (int u = 0; u < kWidth; u += 2) {
        const auto spot = map.floor_at({static_cast<double>(u), static_cast<double>(v)}, 0.0);
        if (!spot || spot->range_m < 0.15 || spot->range_m > 3.0) continue;
        const Codes at = encode(tables, 0, 8 * u, 8 * v);
        const double off = wrap_angle(0.01 * kRadPerDeg * bearing_cdeg(tables, at.bearing_code) -
                                      spot->bearing_rad);
        const double radius_px = std::hypot(u - 79.5, v - 59.5);
        // Half a step, the tangents' rounding and an eighth of a pixel across.
        EXPECT_LE(std::abs(off), M_PI / codes + 0.25 * kRadPerDeg + 0.125 / radius_px)
            << codes << ": " << u << " " << v;
      }
    }
  }
}

TEST(Report, IsReadBackAndRefusesDamage) {
  const testing::RigMap map(rig_with(0.0, 0.0, 0.0));
  for (const CheckByte check : {CheckByte::none, CheckByte::sum7, CheckByte::crc8}) {
    VenueSpec venue = venue_with({0.0, 0.037});
    venue.link.check = check;
    const BoardTables tables = build(map, venue).tables;
    const std::vector<Codes> codes = {{17, 119}, not_seen(tables)};
    const std::vector<std::uint8_t> bytes = report_bytes(tables, codes);
    const auto back = read_report(tables, bytes);
    ASSERT_TRUE(back.has_value());
    EXPECT_EQ(*back, codes);
    EXPECT_FALSE(decode(tables, (*back)[1]).has_value());
    if (check == CheckByte::none) continue;
    for (std::size_t i = 0; i < bytes.size(); ++i) {
      for (unsigned bit = 0; bit < 8; ++bit) {
        std::vector<std::uint8_t> bad = bytes;
        bad[i] = static_cast<std::uint8_t>(bad[i] ^ (1U << bit));
        EXPECT_FALSE(read_report(tables, bad).has_value()) << i << " " << bit;
      }
    }
  }
}

TEST(MaskRuns, SayWhichPixelsAreVisible) {
  const std::vector<std::uint8_t> mask = {
      0, 255, 255, 0, 255, 0, 0, 0, 0, 0, 255, 255, 255, 255, 255};
  const std::vector<MaskRun> want = {{0, 1, 3}, {0, 4, 5}, {2, 0, 5}};
  EXPECT_EQ(mask_runs(mask, 5, 3), want);
}

TEST(ClassTable, IsCutDownByMajority) {
  colour::ClassTable table;
  table.classes.assign(65536, 0);
  for (std::size_t i = 0; i < table.classes.size(); ++i) {
    if (i >> 11 >= 16) table.classes[i] = 1;  // red half
  }
  const colour::ClassTable small = fit_class_table(table, 1, 64, "venue.yaml");
  EXPECT_LE(static_cast<int>(small.classes.size()) / 8, 64);
  EXPECT_EQ(small.at(255, 0, 0), 1);
  EXPECT_EQ(small.at(120, 255, 255), 0);
  EXPECT_EQ(fit_class_table(table, 1, 8192, "venue.yaml").classes, table.classes);
}

}  // namespace
}  // namespace rondel::link
