#include "calib/verdict/verdict.h"

#include <fmt/core.h>

#include <algorithm>
#include <cassert>
#include <cmath>
#include <functional>
#include <map>
#include <utility>

#include "calib/verdict/assignment.h"

namespace rondel::verdict {
namespace {

/// A report farther off than this is taken for something else than the row's object.
constexpr double kElsewhereFactor = 2.0;
constexpr double kElsewhereLeastM = 0.25;
constexpr double kElsewhereBearingRad = 45.0 * kRadPerDeg;

/// Share of the found rows that has to be inside the tolerance.
constexpr double kWithin = 0.95;

double off_m(const TapeEntry& row, FloorSpot reported) {
  if (row.bearing_rad) return distance_m({row.range_m, *row.bearing_rad}, reported);
  return std::abs(reported.range_m - row.range_m);
}

bool is_elsewhere(const TapeEntry& row, FloorSpot reported) {
  if (row.bearing_rad &&
      std::abs(wrap_angle(reported.bearing_rad - *row.bearing_rad)) > kElsewhereBearingRad) {
    return true;
  }
  const double error_m = std::abs(reported.range_m - row.range_m);
  return error_m > kElsewhereLeastM && (reported.range_m > kElsewhereFactor * row.range_m ||
                                        row.range_m > kElsewhereFactor * reported.range_m);
}

void fill_errors(RowResult& result,
                 const TapeEntry& row,
                 const Find& find,
                 const ToleranceSpec& tolerance) {
  const FloorSpot reported = *find.reported;
  result.range_error_m = reported.range_m - row.range_m;
  result.range_within = std::abs(*result.range_error_m) <= tolerance.range_m_at(row.range_m);
  result.bearing_within = true;
  if (row.bearing_rad) {
    result.bearing_error_rad = wrap_angle(reported.bearing_rad - *row.bearing_rad);
    result.bearing_within = std::abs(*result.bearing_error_rad) <= tolerance.bearing_rad;
  }
  result.distance_m = off_m(row, reported);
  if (find.unrounded) {
    result.rounding_range_m = reported.range_m - find.unrounded->range_m;
    result.rounding_bearing_rad = wrap_angle(reported.bearing_rad - find.unrounded->bearing_rad);
  }
  result.noise_range_m = find.noise_range_m;
  result.noise_bearing_rad = find.noise_bearing_rad;
}

/// What a row is when nothing was paired with it.
RowState unpaired_state(const TapeEntry& row, const LinkSpec& link) {
  if (row.absent) return RowState::absent;
  if (row.hidden) return RowState::hidden;
  if (row.range_m < link.near_m || row.range_m > link.far_m) return RowState::beyond;
  return RowState::missed;
}

/// The rows of one object in one image against its finds.
void pair_up(const VenueSpec& venue,
             std::span<const TapeEntry> tape,
             std::span<const int> rows,
             const std::vector<Find>& finds,
             std::span<const int> candidates,
             std::vector<RowResult>& results,
             int& extra) {
  std::vector<int> present;
  bool absent_row = false;
  for (const int row : rows) {
    const TapeEntry& entry = tape[static_cast<std::size_t>(row)];
    RowResult& result = results[static_cast<std::size_t>(row)];
    result = {};
    result.state = unpaired_state(entry, venue.link);
    if (entry.absent) {
      absent_row = true;
      if (!candidates.empty()) {
        result.state = RowState::false_find;
        result.find = candidates.front();
        result.largest = true;
      }
    } else {
      present.push_back(row);
    }
  }
  const int paired =
      static_cast<int>(std::min(present.size(), candidates.size())) + (absent_row ? 1 : 0);
  extra += std::max(0, static_cast<int>(candidates.size()) - paired);
  if (present.empty() || candidates.empty()) return;
  std::vector<double> cost;
  cost.reserve(present.size() * candidates.size());
  for (const int row : present) {
    for (const int find : candidates) {
      cost.push_back(off_m(tape[static_cast<std::size_t>(row)],
                           *finds[static_cast<std::size_t>(find)].reported));
    }
  }
  const std::vector<int> pairs =
      assign(cost, static_cast<int>(present.size()), static_cast<int>(candidates.size()));
  for (std::size_t i = 0; i < present.size(); ++i) {
    if (pairs[i] == kUnassigned) continue;
    const TapeEntry& entry = tape[static_cast<std::size_t>(present[i])];
    RowResult& result = results[static_cast<std::size_t>(present[i])];
    result.find = candidates[static_cast<std::size_t>(pairs[i])];
    result.largest = pairs[i] == 0;
    const Find& find = finds[static_cast<std::size_t>(result.find)];
    fill_errors(result, entry, find, venue.tolerance);
    if (!is_elsewhere(entry, *find.reported)) {
      result.state = RowState::found;
    } else if (result.state == RowState::missed) {
      result.state = RowState::elsewhere;
    }
  }
}

bool is_counted(RowState state) {
  return state == RowState::found || state == RowState::missed || state == RowState::elsewhere;
}

using Filter = std::function<bool(std::size_t)>;

Group summarise(std::string kind,
                std::string name,
                std::span<const TapeEntry> tape,
                std::span<const RowResult> rows,
                const Filter& included) {
  Group group;
  group.kind = std::move(kind);
  group.name = std::move(name);
  std::vector<double> range;
  std::vector<double> relative;
  std::vector<double> absolute_relative;
  std::vector<double> bearing;
  int within = 0;
  for (std::size_t i = 0; i < rows.size(); ++i) {
    if (!is_counted(rows[i].state) || !included(i)) continue;
    ++group.rows;
    if (rows[i].state != RowState::found) continue;
    ++group.found;
    range.push_back(*rows[i].range_error_m);
    relative.push_back(*rows[i].range_error_m / tape[i].range_m);
    absolute_relative.push_back(std::abs(relative.back()));
    if (rows[i].bearing_error_rad) bearing.push_back(*rows[i].bearing_error_rad);
    within += rows[i].range_within && rows[i].bearing_within ? 1 : 0;
  }
  group.with_bearing = static_cast<int>(bearing.size());
  if (group.rows > 0) {
    group.recall = {static_cast<double>(group.found) / group.rows, wilson(group.found, group.rows)};
  }
  if (group.found > 0) {
    group.within = {static_cast<double>(within) / group.found, wilson(within, group.found)};
  }
  group.range_bias_m = {mean(range), mean_interval(range)};
  group.range_rms_m = {root_mean_square(range), rms_interval(range)};
  group.range_rms_relative = {root_mean_square(relative), rms_interval(relative)};
  group.range_p95_relative = {percentile(absolute_relative, 0.95),
                              percentile_interval(absolute_relative, 0.95)};
  group.bearing_bias_rad = {mean(bearing), mean_interval(bearing)};
  group.bearing_rms_rad = {root_mean_square(bearing), rms_interval(bearing)};
  return group;
}

constexpr double kRangeEdgesM[] = {0.0, 0.5, 1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 10.0, 1e9};
constexpr int kSectors = 8;

void add_groups(Verdict& verdict,
                const VenueSpec& venue,
                std::span<const ImageEntry> images,
                std::span<const TapeEntry> tape) {
  const auto add = [&](std::string kind, std::string name, const Filter& included) {
    Group group = summarise(std::move(kind), std::move(name), tape, verdict.rows, included);
    if (group.rows > 0) verdict.groups.push_back(std::move(group));
  };
  for (std::size_t o = 0; o < venue.objects.size(); ++o) {
    add("object", venue.objects[o].name, [&](std::size_t i) {
      return tape[i].object == static_cast<int>(o);
    });
  }
  std::map<std::string, int> lights;
  for (const TapeEntry& row : tape) ++lights[images[static_cast<std::size_t>(row.image)].light];
  for (const auto& [light, count] : lights) {
    add("light", light, [&, name = light](std::size_t i) {
      return images[static_cast<std::size_t>(tape[i].image)].light == name;
    });
  }
  for (std::size_t e = 0; e + 1 < std::size(kRangeEdgesM); ++e) {
    const double low = kRangeEdgesM[e];
    const double high = kRangeEdgesM[e + 1];
    add("range",
        high < 1e8 ? fmt::format("{:.1f}-{:.1f} m", low, high) : fmt::format("over {:.0f} m", low),
        [&](std::size_t i) { return tape[i].range_m >= low && tape[i].range_m < high; });
  }
  const double width_rad = 2.0 * std::numbers::pi / kSectors;
  for (int s = 0; s < kSectors; ++s) {
    const double middle_rad = wrap_angle(s * width_rad);
    add("bearing", fmt::format("around {:.0f} deg", middle_rad * kDegPerRad), [&](std::size_t i) {
      if (!tape[i].bearing_rad) return false;
      const double turned = wrap_angle(*tape[i].bearing_rad - middle_rad);
      return turned > -0.5 * width_rad && turned <= 0.5 * width_rad;
    });
  }
}

std::string percent(double share) { return fmt::format("{:.1f} %", 100.0 * share); }

std::string with_interval(const Estimate& estimate) {
  if (!estimate.interval) return "";
  return fmt::format("; 95 % interval {:.0f}-{:.0f} %",
                     100.0 * estimate.interval->low,
                     100.0 * estimate.interval->high);
}

/// The group of a kind other than 'all' that stands out most, for a reason's last words.
std::string worst_group(const Verdict& verdict,
                        const std::function<double(const Group&)>& badness) {
  const double overall = badness(verdict.all);
  const Group* worst = nullptr;
  double most = 0.0;
  for (const Group& group : verdict.groups) {
    if (group.rows < 2 || group.rows == verdict.all.rows) continue;
    const double value = badness(group);
    if (value > 1.3 * overall && value > most) {
      most = value;
      worst = &group;
    }
  }
  if (worst == nullptr) return "";
  const std::string name = worst->name.empty() ? "the unnamed light" : worst->name;
  return fmt::format("; worst for {} {}", worst->kind, name);
}

void add_criteria(Verdict& verdict, const VenueSpec& venue, std::span<const TapeEntry> tape) {
  const ToleranceSpec& tolerance = venue.tolerance;
  if (verdict.counted > 0) {
    Criterion recall;
    recall.name = "Recall";
    recall.value = *verdict.all.recall.value;
    recall.limit = tolerance.recall;
    recall.at_least = true;
    recall.passed = recall.value >= recall.limit;
    recall.value_text = percent(recall.value);
    recall.limit_text = percent(recall.limit);
    recall.reason = fmt::format("Recall {}: {} of {} rows found, {} asked for{}{}.",
                                recall.value_text,
                                verdict.found,
                                verdict.counted,
                                recall.limit_text,
                                with_interval(verdict.all.recall),
                                recall.passed ? "" : worst_group(verdict, [](const Group& g) {
                                  return 1.0 - g.recall.value.value_or(1.0);
                                }));
    verdict.criteria.push_back(recall);
  }
  std::vector<double> range;
  std::vector<double> bearing;
  for (std::size_t i = 0; i < verdict.rows.size(); ++i) {
    if (verdict.rows[i].state != RowState::found) continue;
    range.push_back(std::abs(*verdict.rows[i].range_error_m) /
                    tolerance.range_m_at(tape[i].range_m));
    if (verdict.rows[i].bearing_error_rad) {
      bearing.push_back(std::abs(*verdict.rows[i].bearing_error_rad));
    }
  }
  if (!range.empty()) {
    Criterion c;
    c.name = "Range error, 95 % of rows within";
    c.value = *percentile(range, kWithin);
    c.limit = 1.0;
    c.passed = c.value <= c.limit;
    c.value_text = fmt::format("{:.2f} x tolerance", c.value);
    c.limit_text = "1.00 x";
    c.reason = fmt::format(
        "Range: 95 % of {} found rows are within {:.2f} times the tolerance ({:.3g} %, at least "
        "{:.0f} "
        "mm); RMS {}, bias {:+.0f} mm{}.",
        range.size(),
        c.value,
        100.0 * tolerance.range_relative,
        1e3 * tolerance.range_floor_m,
        percent(*verdict.all.range_rms_relative.value),
        1e3 * *verdict.all.range_bias_m.value,
        c.passed ? "" : worst_group(verdict, [](const Group& g) {
          return g.range_rms_relative.value.value_or(0.0);
        }));
    verdict.criteria.push_back(c);
  }
  if (!bearing.empty()) {
    Criterion c;
    c.name = "Bearing error, 95 % of rows within";
    c.value = *percentile(bearing, kWithin) * kDegPerRad;
    c.limit = tolerance.bearing_rad * kDegPerRad;
    c.passed = c.value <= c.limit;
    c.value_text = fmt::format("{:.1f} deg", c.value);
    c.limit_text = fmt::format("{:.3g} deg", c.limit);
    c.reason = fmt::format(
        "Bearing: 95 % of {} found rows are within {:.1f} deg ({:.3g} allowed); RMS {:.1f} deg, "
        "bias "
        "{:+.1f} deg{}.",
        bearing.size(),
        c.value,
        c.limit,
        *verdict.all.bearing_rms_rad.value * kDegPerRad,
        *verdict.all.bearing_bias_rad.value * kDegPerRad,
        c.passed ? "" : worst_group(verdict, [](const Group& g) {
          return g.bearing_rms_rad.value.value_or(0.0);
        }));
    verdict.criteria.push_back(c);
  }
  const int without = verdict.absent + verdict.false_finds;
  if (without > 0) {
    Criterion c;
    c.name = "False finds";
    c.value = static_cast<double>(verdict.false_finds) / without;
    c.limit = 1.0 - tolerance.recall;
    c.passed = c.value <= c.limit + 1e-12;
    c.value_text = percent(c.value);
    c.limit_text = percent(c.limit);
    c.reason = fmt::format("False finds: {} of {} absent objects were reported, {} allowed.",
                           verdict.false_finds,
                           without,
                           c.limit_text);
    verdict.criteria.push_back(c);
  }
}

void add_remarks(Verdict& verdict, const VenueSpec& venue) {
  const Group& all = verdict.all;
  if (all.recall.interval && verdict.accepted &&
      all.recall.interval->low < venue.tolerance.recall) {
    verdict.remarks.push_back(
        fmt::format("{} rows cannot show a recall of {}: the true one may be as low as {}. Tape "
                    "more rows to be "
                    "sure.",
                    verdict.counted,
                    percent(venue.tolerance.recall),
                    percent(all.recall.interval->low)));
  }
  if (verdict.hidden > 0) {
    verdict.remarks.push_back(fmt::format(
        "{} rows lie behind the robot's own body or outside the picture; they are not counted.",
        verdict.hidden));
  }
  if (verdict.beyond > 0) {
    verdict.remarks.push_back(fmt::format(
        "{} rows lie outside the link's ranges ({:.2f}-{:.2f} m); they are not counted.",
        verdict.beyond,
        venue.link.near_m,
        venue.link.far_m));
  }
  if (verdict.extra_finds > 0) {
    verdict.remarks.push_back(fmt::format(
        "{} patches were reported beside the rows of their object; a board that reports only the "
        "largest finds {} of {} rows.",
        verdict.extra_finds,
        verdict.largest_only.found,
        verdict.largest_only.rows));
  }
}

std::optional<Shares> shares_of(std::span<const RowResult> rows) {
  double total = 0.0;
  double rounding = 0.0;
  double noise = 0.0;
  int n = 0;
  for (const RowResult& row : rows) {
    if (row.state != RowState::found || !row.rounding_range_m) continue;
    ++n;
    total += *row.range_error_m * *row.range_error_m;
    rounding += *row.rounding_range_m * *row.rounding_range_m;
    noise += row.noise_range_m * row.noise_range_m;
  }
  if (n == 0 || total <= 0.0) return std::nullopt;
  Shares shares;
  shares.total_m2 = total / n;
  // Rounding and noise are measured or predicted apart from the errors, so that together they may
  // pass the total by chance; then they share it in proportion.
  const double most = std::max(total, rounding + noise);
  shares.rounding = rounding / most;
  shares.pixel_noise = noise / most;
  shares.rest = 1.0 - shares.rounding - shares.pixel_noise;
  return shares;
}

}  // namespace

std::string_view to_text(RowState state) {
  switch (state) {
    case RowState::found:
      return "found";
    case RowState::missed:
      return "missed";
    case RowState::elsewhere:
      return "elsewhere";
    case RowState::hidden:
      return "hidden";
    case RowState::beyond:
      return "beyond";
    case RowState::absent:
      return "absent";
    case RowState::false_find:
      return "false find";
  }
  return "";
}

Verdict judge(const VenueSpec& venue,
              std::span<const ImageEntry> images,
              std::span<const TapeEntry> tape,
              std::span<const std::vector<Find>> finds) {
  assert(images.size() == finds.size());
  Verdict verdict;
  verdict.rows.resize(tape.size());
  std::vector<RowResult> largest_rows(tape.size());
  std::map<std::pair<int, int>, std::vector<int>> rows_of;  // (image, object) -> tape rows
  for (std::size_t i = 0; i < tape.size(); ++i) {
    rows_of[{tape[i].image, tape[i].object}].push_back(static_cast<int>(i));
  }
  for (const auto& [key, rows] : rows_of) {
    const std::vector<Find>& in_image = finds[static_cast<std::size_t>(key.first)];
    std::vector<int> candidates;
    for (std::size_t f = 0; f < in_image.size(); ++f) {
      if (in_image[f].object == key.second && in_image[f].reported) {
        candidates.push_back(static_cast<int>(f));
      }
    }
    pair_up(venue, tape, rows, in_image, candidates, verdict.rows, verdict.extra_finds);
    int ignored = 0;
    const std::span<const int> largest =
        std::span<const int>(candidates).first(std::min<std::size_t>(candidates.size(), 1));
    pair_up(venue, tape, rows, in_image, largest, largest_rows, ignored);
  }
  for (const RowResult& row : verdict.rows) {
    verdict.counted += is_counted(row.state) ? 1 : 0;
    verdict.found += row.state == RowState::found ? 1 : 0;
    verdict.hidden += row.state == RowState::hidden ? 1 : 0;
    verdict.beyond += row.state == RowState::beyond ? 1 : 0;
    verdict.absent += row.state == RowState::absent ? 1 : 0;
    verdict.false_finds += row.state == RowState::false_find ? 1 : 0;
  }
  const Filter every = [](std::size_t) { return true; };
  verdict.all = summarise("all", "all rows", tape, verdict.rows, every);
  verdict.largest_only = summarise("largest", "largest patch only", tape, largest_rows, every);
  add_groups(verdict, venue, images, tape);
  verdict.range_shares = shares_of(verdict.rows);
  add_criteria(verdict, venue, tape);

  verdict.accepted = verdict.counted > 0;
  for (const Criterion& c : verdict.criteria) verdict.accepted = verdict.accepted && c.passed;
  for (const Criterion& c : verdict.criteria) {
    if (c.passed == verdict.accepted) verdict.reasons.push_back(c.reason);
  }
  if (verdict.counted == 0) {
    verdict.reasons.emplace_back(
        "No row of the tape sheet could be judged: each is absent, hidden or outside the link's "
        "ranges.");
  }
  add_remarks(verdict, venue);
  return verdict;
}

}  // namespace rondel::verdict
