#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <optional>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/sets_file.h"
#include "calib/link/board_tables.h"
#include "calib/range/curve_file.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

/// What one side of the comparison has; whatever is missing is empty.
struct Side {
  fs::path results;
  std::shared_ptr<const range::RangeCurve> curve;
  std::optional<link::BoardTables> tables;
  std::vector<colour::ThresholdSet> sets;
};

Side open_side(const std::string& word) {
  Side side;
  std::error_code error;
  side.results = fs::path(word);
  if (fs::is_directory(side.results / "results", error) ||
      fs::is_regular_file(side.results / "venue.yaml", error)) {
    side.results /= "results";
  }
  if (!fs::is_directory(fs::path(word), error)) {
    throw InputError(word, "is no venue and no results folder");
  }
  side.curve = range::read_range_curve(side.results / "range.yaml");
  if (fs::is_regular_file(side.results / "colours.yaml", error)) {
    side.sets = colour::read_threshold_sets(side.results / "colours.yaml");
  }
  std::vector<fs::path> packed;
  for (const auto& entry : fs::directory_iterator(side.results / "tables", error)) {
    if (entry.path().extension() == ".bin") packed.push_back(entry.path());
  }
  if (packed.size() == 1) {
    const std::string bytes = read_file(packed.front());
    side.tables = link::unpack({reinterpret_cast<const std::uint8_t*>(bytes.data()), bytes.size()},
                               packed.front().string());
  }
  return side;
}

struct Ring {
  double range_m = 0.0;
  double mean_m = 0.0;  ///< of what the other side says about the same pixels, minus range_m
  double worst_m = 0.0;
  double bearing_rad = 0.0;  ///< mean difference
  double band_m = 0.0;       ///< two standard deviations of the difference, from both bands
  int seen = 0;
};

/// What the second curve says about the pixels that the first has at each range.
std::vector<Ring> curve_changes(const range::RangeCurve& first, const range::RangeCurve& second) {
  std::vector<Ring> rings;
  for (const double range : {0.2, 0.3, 0.5, 0.75, 1.0, 1.5, 2.0, 2.5, 3.0}) {
    Ring ring;
    ring.range_m = range;
    for (int k = 0; k < 24; ++k) {
      const FloorSpot spot{range, wrap_angle(2.0 * std::numbers::pi * k / 24.0)};
      const auto pixel = first.pixel_of(spot, 0.0);
      if (!pixel) continue;
      const auto there = second.floor_with_band(*pixel, 0.0);
      const auto here = first.floor_with_band(*pixel, 0.0);
      if (!there || !here) continue;
      const double off = there->spot.range_m - range;
      ring.mean_m += off;
      ring.bearing_rad += wrap_angle(there->spot.bearing_rad - spot.bearing_rad);
      ring.band_m += 2.0 * std::hypot(there->range_sd_m, here->range_sd_m);
      if (std::abs(off) > std::abs(ring.worst_m)) ring.worst_m = off;
      ++ring.seen;
    }
    if (ring.seen == 0) continue;
    ring.mean_m /= ring.seen;
    ring.bearing_rad /= ring.seen;
    ring.band_m /= ring.seen;
    rings.push_back(ring);
  }
  return rings;
}

struct CodeChanges {
  std::string object;
  int pixels = 0;   ///< that both tables give a range
  int changed = 0;  ///< whose codes differ
  int most = 0;     ///< range codes
};

std::vector<CodeChanges> code_changes(const link::BoardTables& first,
                                      const link::BoardTables& second) {
  std::vector<CodeChanges> list;
  const std::size_t objects = std::min(first.objects.size(), second.objects.size());
  for (std::size_t o = 0; o < objects; ++o) {
    CodeChanges c;
    c.object = first.objects[o].name;
    for (int v = 0; v < first.height_px; v += 2) {
      for (int u = 0; u < first.width_px; u += 2) {
        const link::Codes a =
            link::encode(first, static_cast<int>(o), u * link::kSubpixel, v * link::kSubpixel);
        const link::Codes b =
            link::encode(second, static_cast<int>(o), u * link::kSubpixel, v * link::kSubpixel);
        if (!link::decode(first, a) || !link::decode(second, b)) continue;
        ++c.pixels;
        if (!(a == b)) ++c.changed;
        c.most = std::max(c.most, std::abs(a.range_code - b.range_code));
      }
    }
    list.push_back(c);
  }
  return list;
}

/// Rounded to `step`, and never a minus before nothing.
double shown(double value, double step) { return std::round(value / step) * step + 0.0; }

std::string box_text(const colour::ThresholdSet& set) {
  std::string out;
  for (const colour::HsvBox& b : set.boxes) {
    out += fmt::format("{}H {}-{} S {}-{} V {}-{}",
                       out.empty() ? "" : "; ",
                       b.h.from,
                       b.h.to,
                       b.s[0],
                       b.s[1],
                       b.v[0],
                       b.v[1]);
  }
  return out.empty() ? "none" : out;
}

}  // namespace

Outcome compare_command(const Arguments& arguments, Progress& /*progress*/) {
  const Side first = open_side(arguments.words.at(0));
  const Side second = open_side(arguments.words.at(1));
  Outcome outcome;
  const ImagePoint a = first.curve->centre();
  const ImagePoint b = second.curve->centre();
  outcome.document = {{"centre_moved_px", {b.u_px - a.u_px, b.v_px - a.v_px}}};
  outcome.summary = fmt::format("Centre moved by ({:+.1f}, {:+.1f}) px\n",
                                shown(b.u_px - a.u_px, 0.1),
                                shown(b.v_px - a.v_px, 0.1));

  nlohmann::ordered_json ranges = nlohmann::ordered_json::array();
  outcome.summary += "The same pixels, in the second:\n";
  for (const Ring& r : curve_changes(*first.curve, *second.curve)) {
    ranges.push_back({{"range_m", r.range_m},
                      {"mean_change_m", r.mean_m},
                      {"worst_change_m", r.worst_m},
                      {"bearing_change_deg", r.bearing_rad * kDegPerRad},
                      {"two_sd_m", r.band_m}});
    outcome.summary += fmt::format(
        "  {:.2f} m: {:+.3f} m on average, {:+.3f} m at worst (2 sd of both bands: {:.3f} m), "
        "bearing {:+.1f} deg\n",
        r.range_m,
        shown(r.mean_m, 0.001),
        shown(r.worst_m, 0.001),
        r.band_m,
        shown(r.bearing_rad * kDegPerRad, 0.1));
  }
  if (ranges.empty()) outcome.summary += "  the two curves share no floor\n";
  outcome.document["ranges"] = std::move(ranges);

  outcome.document["codes"] = nullptr;
  if (first.tables && second.tables) {
    if (first.tables->width_px != second.tables->width_px ||
        first.tables->height_px != second.tables->height_px) {
      outcome.summary += "Codes: the tables are of images of different size\n";
    } else {
      nlohmann::ordered_json codes = nlohmann::ordered_json::array();
      for (const CodeChanges& c : code_changes(*first.tables, *second.tables)) {
        codes.push_back({{"object", c.object},
                         {"pixels", c.pixels},
                         {"changed", c.changed},
                         {"most_range_codes", c.most}});
        outcome.summary +=
            fmt::format("Codes of {}: {:.1f} % of pixels differ, by {} range codes at most\n",
                        c.object,
                        c.pixels > 0 ? 100.0 * c.changed / c.pixels : 0.0,
                        c.most);
      }
      outcome.document["codes"] = std::move(codes);
    }
  } else {
    outcome.summary += "Codes: not compared, not both have tables\n";
  }

  nlohmann::ordered_json colours = nlohmann::ordered_json::array();
  for (const colour::ThresholdSet& set : first.sets) {
    const auto twin = std::find_if(second.sets.begin(), second.sets.end(), [&](const auto& s) {
      return s.object == set.object;
    });
    if (twin == second.sets.end()) continue;
    const std::string before = box_text(set);
    const std::string after = box_text(*twin);
    colours.push_back({{"object", set.object}, {"first", before}, {"second", after}});
    outcome.summary +=
        before == after
            ? fmt::format("Thresholds of {}: the same\n", set.object)
            : fmt::format("Thresholds of {}: {} became {}\n", set.object, before, after);
  }
  outcome.document["colours"] = std::move(colours);
  return outcome;
}

}  // namespace rondel::app
