#include "calib/link/build_tables.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <limits>
#include <map>

#include "calib/base/problem.h"
#include "calib/link/harmonics.h"
#include "calib/link/layouts.h"
#include "calib/link/link_plan.h"
#include "calib/link/picture.h"

namespace rondel::link {
namespace {

void set_codes(const Codebook& book, BoardTables& tables) {
  // The finest unit of 1, 2 or 5 times a power of ten that brings far_m into 16 bits.
  std::uint32_t unit = 10;
  for (int i = 0; book.edges_m.back() * 1e6 / unit > 65535.0; ++i) {
    unit = i % 3 == 1 ? unit * 5 / 2 : unit * 2;
  }
  tables.range_unit_um = unit;
  for (const double code_m : book.codes_m) {
    tables.range_units.push_back(static_cast<std::uint16_t>(std::lround(code_m * 1e6 / unit)));
  }
}

void set_bearings(BoardTables& tables) {
  int cells = tables.link.bearing_codes;
  while (cells % 8 != 0) {
    cells *= 2;
    ++tables.fine_log2;
  }
  const bool centred = tables.fine_log2 == 0;
  const int count = centred ? cells / 8 : cells / 8 - 1;
  // Eight bits are off by a ninth of a degree at most.
  tables.tangent_bits = tables.link.bearing_codes <= 180 ? 8 : 16;
  const double unit = std::ldexp(1.0, tables.tangent_bits);
  for (int i = 0; i < count; ++i) {
    const double angle = 2.0 * kPi * (centred ? i + 0.5 : i + 1.0) / cells;
    const double tangent = std::min(std::round(unit * std::tan(angle)), unit - 1.0);
    tables.tangents.push_back(static_cast<std::uint16_t>(tangent));
  }
}

/// Integers along the heading: for quarter turns a length that only scales positions as the bend
/// needs them, else as long as 16 bits allow.
void set_turn(const Turn& turn, int longest_sub, BoardTables& tables) {
  const bool quarter = std::abs(std::sin(2.0 * turn.heading_rad)) < 1e-9;
  int log2 = 14;
  while ((static_cast<std::int64_t>(longest_sub) << (log2 + 1) >> 8) > 32000) --log2;
  if (quarter) log2 = 16 - tables.near_shift;
  const double length = std::ldexp(1.0, log2);
  const double heading = turn.mirrored ? -turn.heading_rad : turn.heading_rad;
  tables.mirrored = turn.mirrored;
  tables.turn_c = static_cast<std::int16_t>(std::lround(length * std::cos(heading)));
  tables.turn_s = static_cast<std::int16_t>(std::lround(length * std::sin(heading)));
}

void refuse_budget(const std::vector<std::vector<Tried>>& tried,
                   const std::vector<HeightTradeOff>& heights,
                   const VenueSpec& venue,
                   int bearing_bytes,
                   int needed,
                   const std::string& where) {
  int least = bearing_bytes;
  double best_share = 0.0;
  for (const auto& layouts : tried) {
    least += layouts.front().candidate.bytes;
    // What the same part of the budget would buy for each height.
    const int part = (venue.budget.table_bytes - bearing_bytes) / static_cast<int>(tried.size());
    double share = std::numeric_limits<double>::infinity();
    for (const Tried& t : layouts) {
      if (t.candidate.bytes <= part) share = std::min(share, t.candidate.worst_share);
    }
    best_share = std::max(best_share, share);
  }
  std::string what = fmt::format("budget.table_bytes = {}: {} {} of object height need",
                                 venue.budget.table_bytes,
                                 heights.size(),
                                 heights.size() == 1 ? "value" : "values");
  if (needed > 0) {
    what += fmt::format(" {} bytes to keep the error target; set at least that", needed);
  } else {
    what += " a finer layout than any that was tried";
  }
  if (std::isfinite(best_share)) {
    what += fmt::format(", or accept {:.2f} times the target's error, the best within the budget",
                        best_share);
  } else {
    what += fmt::format(", or fewer range codes: range_bits: {} would take about {} bytes",
                        std::max(3, venue.link.range_bits - 1),
                        bearing_bytes + (least - bearing_bytes) / 2);
  }
  throw InputError(where, what);
}

}  // namespace

Codebook codebook_of(const BoardTables& tables) {
  const LinkSpec& link = tables.link;
  if (link.measure == CodebookMeasure::relative || link.measure == CodebookMeasure::absolute) {
    return make_codebook(link, nullptr);
  }
  Codebook book;
  book.edges_m.push_back(link.near_m);
  for (const std::uint16_t units : tables.range_units) {
    const double code_m = units * tables.range_unit_um * 1e-6;
    if (!book.codes_m.empty()) {
      const double last = book.codes_m.back();
      book.edges_m.push_back(link.measure == CodebookMeasure::rms
                                 ? 0.5 * (last + code_m)
                                 : 2.0 * last * code_m / (last + code_m));
    }
    book.codes_m.push_back(code_m);
  }
  book.edges_m.push_back(link.far_m);
  return book;
}

BuiltTables build_tables(const FloorMap& map,
                         const VenueSpec& venue,
                         const CameraSpec& camera,
                         std::span<const std::uint8_t> mask,
                         const colour::ClassTable& classes,
                         std::span<const colour::ThresholdSet> sets,
                         const ErrorTarget& target,
                         const std::string& where,
                         Progress& progress) {
  if (venue.objects.empty()) {
    throw InputError(where, "objects: none; tables are made for the objects the robot looks for");
  }
  if (std::max(camera.width_px, camera.height_px) > kMostPixels) {
    throw InputError("rig.yaml",
                     fmt::format("camera: {} x {} px; boards compute with sides of at most {} px",
                                 camera.width_px,
                                 camera.height_px,
                                 kMostPixels));
  }
  BuiltTables built;
  BoardTables& tables = built.tables;
  tables.venue = venue.name;
  tables.prefix = venue.prefix;
  tables.width_px = camera.width_px;
  tables.height_px = camera.height_px;
  tables.link = venue.link;
  tables.hsv_scale = venue.hsv_scale;
  tables.sets.assign(sets.begin(), sets.end());
  tables.mask = mask_runs(mask, camera.width_px, camera.height_px);

  std::map<double, std::vector<std::string>> heights;
  for (const ObjectSpec& object : venue.objects)
    heights[object.seen_height_m()].push_back(object.name);
  for (const ObjectSpec& object : venue.objects) {
    const auto at = heights.find(object.seen_height_m());
    tables.objects.push_back(
        {object.name, at->first, static_cast<int>(std::distance(heights.begin(), at))});
  }
  const double lowest_m = heights.begin()->first;
  built.book = make_codebook(venue.link, [&](double range_m) {
    return std::max(1e-6, venue.noise.mark_px * pixel_worth(map, range_m, lowest_m));
  });
  set_codes(built.book, tables);
  set_bearings(tables);

  const Scene scene{&map, camera.width_px, camera.height_px, mask};
  std::vector<Picture> pictures;
  const int work = 2 * static_cast<int>(heights.size());
  for (const auto& [height_m, names] : heights) {
    progress.at("tables: tracing", static_cast<int>(pictures.size()), work);
    pictures.push_back(survey(scene, height_m));
    trace_curves(scene, built.book, pictures.back());
    const bool any = std::any_of(pictures.back().curves.begin(),
                                 pictures.back().curves.end(),
                                 [](const auto& c) { return c.size() >= 8; });
    if (!any) {
      throw InputError(
          where,
          fmt::format("link: the image shows nothing of {:g} to {:g} m at {:.0f} mm above the "
                      "floor; set near_m and far_m to ranges that are visible",
                      venue.link.near_m,
                      venue.link.far_m,
                      1e3 * height_m));
    }
  }
  std::vector<const Picture*> all;
  for (const Picture& picture : pictures) all.push_back(&picture);

  // The centre that suits all heights best: moved by what the harmonics of degree 0 say.
  double cu = 0.5 * kSubpixel * (camera.width_px - 1);
  double cv = 0.5 * kSubpixel * (camera.height_px - 1);
  const double longest = kSubpixel * std::hypot(camera.width_px + 2, camera.height_px + 2);
  const double scale = 0.25 * longest * longest;
  for (int round = 0; round < 6; ++round) {
    const auto harmonics = fit_range_harmonics(all, cu, cv, scale, 0);
    cu = std::clamp(cu - 0.5 * harmonics[0][0], 0.0, 1.0 * kSubpixel * camera.width_px);
    cv = std::clamp(cv - 0.5 * harmonics[1][0], 0.0, 1.0 * kSubpixel * camera.height_px);
  }
  tables.centre_u_sub = static_cast<int>(std::lround(cu));
  tables.centre_v_sub = static_cast<int>(std::lround(cv));
  cu = tables.centre_u_sub;
  cv = tables.centre_v_sub;

  Turn turn = find_turn(all, cu, cv);
  for (int round = 0; round < 3; ++round) {
    const double off = fit_bearing_harmonics(all, turn, cu, cv, scale, true).azimuth_off_rad;
    turn.heading_rad -= turn.mirrored ? off : -off;
  }
  // Nearly a quarter turn is one: it saves the board four products.
  const double quarter = std::round(turn.heading_rad / (0.5 * kPi)) * 0.5 * kPi;
  if (std::abs(turn.heading_rad - quarter) < 0.1 * kRadPerDeg) turn.heading_rad = quarter;

  Bench bench{&scene, &built.book, &tables, turn, scale, 0};
  int longest_sub = 0;
  for (const int u : {-kSubpixel, kSubpixel * camera.width_px}) {
    for (const int v : {-kSubpixel, kSubpixel * camera.height_px}) {
      const std::int64_t du = u - tables.centre_u_sub;
      const std::int64_t dv = v - tables.centre_v_sub;
      bench.d2_most =
          std::max(bench.d2_most,
                   static_cast<std::uint32_t>((std::abs(du) + 128) * (std::abs(du) + 128) +
                                              (std::abs(dv) + 128) * (std::abs(dv) + 128)));
      longest_sub =
          std::max({longest_sub, static_cast<int>(std::abs(du)), static_cast<int>(std::abs(dv))});
    }
  }
  tables.near_shift = 1;
  while (((longest_sub + 128) >> tables.near_shift) > 127) ++tables.near_shift;
  set_turn(turn, longest_sub + 128, tables);
  // Beyond the last curve of equal range the harmonics stay as they are there.
  double last_d2 = 0.0;
  for (const Picture& picture : pictures) {
    for (const auto& curve : picture.curves) {
      for (const Sample& sample : curve) {
        if (!sample.visible) continue;
        last_d2 =
            std::max(last_d2, std::pow(sample.u_sub - cu, 2) + std::pow(sample.v_sub - cv, 2));
      }
    }
  }
  const auto last = static_cast<std::uint32_t>(std::min(1.0 * bench.d2_most, last_d2));
  tables.slow_shift = 8;
  while ((last >> tables.slow_shift) > 255U || (bench.d2_most >> tables.slow_shift) > 28000U) {
    ++tables.slow_shift;
  }
  tables.slow_most = static_cast<int>(last >> tables.slow_shift);

  std::vector<std::vector<Tried>> tried;
  const int bearing_bytes = table_bytes(tables);
  int needed = bearing_bytes;
  bool possible = true;
  auto height = heights.begin();
  for (const Picture& picture : pictures) {
    progress.at("tables: trying layouts", static_cast<int>(pictures.size() + tried.size()), work);
    tried.push_back(try_layouts(bench, picture, target));
    HeightTradeOff trade{picture.height_m, (height++)->second, {}};
    const auto chosen = std::find_if(tried.back().begin(), tried.back().end(), [](const Tried& t) {
      return t.candidate.meets();
    });
    possible = possible && chosen != tried.back().end();
    if (chosen != tried.back().end()) {
      needed += chosen->candidate.bytes;
      chosen->candidate.chosen = true;
      tables.layouts.push_back(chosen->layout);
    }
    for (const Tried& t : tried.back()) trade.candidates.push_back(t.candidate);
    built.heights.push_back(std::move(trade));
  }
  if (!possible || needed > venue.budget.table_bytes) {
    refuse_budget(tried, built.heights, venue, bearing_bytes, possible ? needed : 0, where);
  }
  if (!classes.classes.empty()) {
    tables.classes = fit_class_table(
        classes, static_cast<int>(venue.objects.size()), venue.budget.colour_bytes, where);
    std::size_t same = 0;
    for (int r = 0; r < 256; r += 8) {
      for (int g = 0; g < 256; g += 4) {
        for (int b = 0; b < 256; b += 8) {
          const auto at = [&](const colour::ClassTable& t) {
            return t.at(static_cast<std::uint8_t>(r),
                        static_cast<std::uint8_t>(g),
                        static_cast<std::uint8_t>(b));
          };
          same += at(tables.classes) == at(classes) ? 1U : 0U;
        }
      }
    }
    built.class_agreement = static_cast<double>(same) / 65536.0;
  }
  for (int i = 0; i <= 60; ++i) {
    const double range_m =
        venue.link.near_m * std::pow(venue.link.far_m / venue.link.near_m, i / 60.0);
    const double pixel_m = pixel_worth(map, range_m, lowest_m);
    if (pixel_m <= 0.0) continue;
    built.resolutions.push_back(
        {range_m, pixel_m, built.book.relative_error(built.book.code_of(range_m)) * range_m});
  }
  const std::vector<std::uint8_t> packed = pack(tables);
  tables.identity = unpack(packed, tables.prefix + ".bin").identity;
  progress.at("tables: trying layouts", work, work);
  return built;
}

RoundTrip verify(const BoardTables& tables,
                 const FloorMap& map,
                 int object,
                 std::span<const std::uint8_t> mask,
                 const ErrorTarget& target) {
  const Scene scene{&map, tables.width_px, tables.height_px, mask};
  const Codebook book = codebook_of(tables);
  const Picture picture = survey(scene, tables.objects[zu(object)].height_m);
  RoundTrip trip;
  double squares = 0.0;
  for (int v = 0; v < scene.height; ++v) {
    for (int u = 0; u < scene.width; ++u) {
      const std::size_t i = zu(v) * zu(scene.width) + zu(u);
      const double range_m = static_cast<double>(picture.range_m[i]);
      if (range_m < book.edges_m.front() || range_m > book.edges_m.back()) continue;
      const Codes codes = encode(tables, object, kSubpixel * u, kSubpixel * v);
      const PixelError error = error_at(tables, book, picture, i, codes, target);
      ++trip.pixels;
      const double share = std::max(error.range_share, error.bearing_share);
      trip.outside += share > 1.0 ? 1 : 0;
      if (share > trip.worst_share) {
        trip.worst_share = share;
        trip.worst_at = {static_cast<double>(u), static_cast<double>(v)};
      }
      trip.worst_relative_error = std::max(trip.worst_relative_error, error.range_m / range_m);
      trip.worst_bearing_rad = std::max(trip.worst_bearing_rad, error.bearing_rad);
      squares += std::pow(error.range_m / range_m, 2);
    }
  }
  trip.rms_relative_error = trip.pixels > 0 ? std::sqrt(squares / trip.pixels) : 0.0;
  return trip;
}

}  // namespace rondel::link
