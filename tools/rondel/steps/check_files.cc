#include "tools/rondel/steps/check_files.h"

#include <fmt/core.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <map>

#include "calib/base/problem.h"
#include "calib/venue/csv.h"

namespace rondel::app {
namespace {

using nlohmann::ordered_json;
using verdict::RowState;

/// Names of files and lights may be any bytes; what is no UTF-8 is replaced.
std::string json_text(const ordered_json& json, int indent = -1) {
  return json.dump(indent, ' ', false, ordered_json::error_handler_t::replace);
}

/// Rounded so that files show no more than is known; the same double gives the same text.
double rounded(double value, double step) {
  const double r = std::round(value / step) * step;
  return r == 0.0 ? 0.0 : std::stod(fmt::format("{:.10g}", r));
}
constexpr double kLengthStep = 1e-6;
constexpr double kDegreeStep = 1e-4;
constexpr double kShareStep = 1e-6;

ordered_json maybe(const std::optional<double>& value, double factor, double step) {
  return value ? ordered_json(rounded(*value * factor, step)) : ordered_json(nullptr);
}

ordered_json interval(const verdict::Estimate& estimate, double factor, double step) {
  if (!estimate.interval) return nullptr;
  return ordered_json::array({rounded(estimate.interval->low * factor, step),
                              rounded(estimate.interval->high * factor, step)});
}

ordered_json group_json(const verdict::Group& group) {
  ordered_json json;
  json["kind"] = group.kind;
  json["name"] = group.name;
  json["rows"] = group.rows;
  json["found"] = group.found;
  json["recall"] = maybe(group.recall.value, 1.0, kShareStep);
  json["recall_95"] = interval(group.recall, 1.0, kShareStep);
  json["range_bias_m"] = maybe(group.range_bias_m.value, 1.0, kLengthStep);
  json["range_bias_95_m"] = interval(group.range_bias_m, 1.0, kLengthStep);
  json["range_rms_m"] = maybe(group.range_rms_m.value, 1.0, kLengthStep);
  json["range_rms_relative"] = maybe(group.range_rms_relative.value, 1.0, kShareStep);
  json["range_rms_relative_95"] = interval(group.range_rms_relative, 1.0, kShareStep);
  json["range_p95_relative"] = maybe(group.range_p95_relative.value, 1.0, kShareStep);
  json["range_p95_relative_95"] = interval(group.range_p95_relative, 1.0, kShareStep);
  json["bearing_bias_deg"] = maybe(group.bearing_bias_rad.value, kDegPerRad, kDegreeStep);
  json["bearing_rms_deg"] = maybe(group.bearing_rms_rad.value, kDegPerRad, kDegreeStep);
  json["bearing_rms_95_deg"] = interval(group.bearing_rms_rad, kDegPerRad, kDegreeStep);
  json["within_tolerance"] = maybe(group.within.value, 1.0, kShareStep);
  json["within_tolerance_95"] = interval(group.within, 1.0, kShareStep);
  return json;
}

/// How far a row is from passing, for the list of the worst: errors over their tolerances; a miss
/// and a false find stand above every error.
double badness(const CheckReport& report, std::size_t i) {
  const verdict::RowResult& row = report.verdict.rows[i];
  const ToleranceSpec& tolerance = report.venue->tolerance;
  switch (row.state) {
    case RowState::missed:
      return 2e6;
    case RowState::false_find:
      return 1.5e6;
    case RowState::elsewhere:
      return 1e6;
    case RowState::hidden:
    case RowState::beyond:
    case RowState::absent:
      return 0.0;
    case RowState::found:
      break;
  }
  double worst = std::abs(*row.range_error_m) / tolerance.range_m_at(report.batch->tape[i].range_m);
  if (row.bearing_error_rad) {
    worst = std::max(worst, std::abs(*row.bearing_error_rad) / tolerance.bearing_rad);
  }
  return worst;
}

const verdict::Find* find_of(const CheckReport& report, std::size_t i) {
  const verdict::RowResult& row = report.verdict.rows[i];
  if (row.find < 0) return nullptr;
  return &report.finds[static_cast<std::size_t>(report.batch->tape[i].image)]
                      [static_cast<std::size_t>(row.find)];
}

ordered_json row_json(const CheckReport& report, std::size_t i) {
  const verdict::TapeEntry& entry = report.batch->tape[i];
  const verdict::RowResult& row = report.verdict.rows[i];
  const verdict::ImageEntry& image = report.batch->images[static_cast<std::size_t>(entry.image)];
  ordered_json json;
  json["line"] = entry.line;
  json["image"] = image.image;
  json["light"] = image.light;
  json["object"] = report.venue->objects[static_cast<std::size_t>(entry.object)].name;
  json["state"] = to_text(row.state);
  if (!entry.absent) {
    json["tape_range_m"] = rounded(entry.range_m, kLengthStep);
    json["tape_bearing_deg"] = maybe(entry.bearing_rad, kDegPerRad, kDegreeStep);
    if (report.curve != nullptr && entry.bearing_rad) {
      const auto at = report.curve->pixel_of(
          {entry.range_m, *entry.bearing_rad},
          report.venue->objects[static_cast<std::size_t>(entry.object)].seen_height_m());
      if (at) {
        json["tape_u_px"] = rounded(at->u_px, 1e-3);
        json["tape_v_px"] = rounded(at->v_px, 1e-3);
      }
    }
  }
  const verdict::Find* find = find_of(report, i);
  if (find == nullptr) return json;
  json["u_px"] = rounded(find->measured.u_px, 1e-3);
  json["v_px"] = rounded(find->measured.v_px, 1e-3);
  json["area_px"] = find->area_px;
  json["largest"] = row.largest;
  json["range_code"] = find->range_code;
  json["bearing_code"] = find->bearing_code;
  json["range_m"] = rounded(find->reported->range_m, kLengthStep);
  json["bearing_deg"] = rounded(find->reported->bearing_rad * kDegPerRad, kDegreeStep);
  if (row.range_error_m) {
    json["range_error_m"] = rounded(*row.range_error_m, kLengthStep);
    json["bearing_error_deg"] = maybe(row.bearing_error_rad, kDegPerRad, kDegreeStep);
    json["rounding_range_m"] = maybe(row.rounding_range_m, 1.0, kLengthStep);
    json["rounding_bearing_deg"] = maybe(row.rounding_bearing_rad, kDegPerRad, kDegreeStep);
    json["pixel_noise_range_m"] = rounded(row.noise_range_m, kLengthStep);
    json["pixel_noise_bearing_deg"] = rounded(row.noise_bearing_rad * kDegPerRad, kDegreeStep);
    json["within"] = row.range_within && row.bearing_within;
  }
  return json;
}

std::vector<std::size_t> worst_rows(const CheckReport& report, std::size_t images) {
  std::vector<std::size_t> order(report.verdict.rows.size());
  for (std::size_t i = 0; i < order.size(); ++i) order[i] = i;
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) {
    return badness(report, a) > badness(report, b);
  });
  std::vector<std::size_t> out;
  std::vector<int> seen;
  for (const std::size_t i : order) {
    const int image = report.batch->tape[i].image;
    if (out.size() == images || badness(report, i) <= 0.0) break;
    if (std::find(seen.begin(), seen.end(), image) != seen.end()) continue;
    seen.push_back(image);
    out.push_back(i);
  }
  return out;
}

std::string xml(std::string_view plain) {
  std::string out;
  const auto readable =
      ordered_json::parse(json_text(ordered_json(std::string(plain)))).get<std::string>();
  for (const char c : readable) {
    switch (c) {
      case '&':
        out += "&amp;";
        break;
      case '<':
        out += "&lt;";
        break;
      case '>':
        out += "&gt;";
        break;
      case '"':
        out += "&quot;";
        break;
      default:
        // Other control characters have no place in XML 1.0.
        out += static_cast<unsigned char>(c) < 0x20 ? ' ' : c;
    }
  }
  return out;
}

struct Case {
  std::string name;
  std::string failure;  ///< empty: passed
  bool skipped = false;
};

std::string suite(const std::string& name, const std::vector<Case>& cases) {
  int failures = 0;
  int skipped = 0;
  std::string body;
  for (const Case& c : cases) {
    body += fmt::format("    <testcase classname=\"{}\" name=\"{}\"", xml(name), xml(c.name));
    if (c.skipped) {
      ++skipped;
      body += fmt::format("><skipped message=\"{}\"/></testcase>\n", xml(c.failure));
    } else if (!c.failure.empty()) {
      ++failures;
      body += fmt::format("><failure message=\"{}\"/></testcase>\n", xml(c.failure));
    } else {
      body += "/>\n";
    }
  }
  return fmt::format(
      "  <testsuite name=\"{}\" tests=\"{}\" failures=\"{}\" errors=\"0\" skipped=\"{}\">\n{}"
      "  </testsuite>\n",
      xml(name),
      cases.size(),
      failures,
      skipped,
      body);
}

Case row_case(const CheckReport& report, std::size_t i) {
  const verdict::TapeEntry& entry = report.batch->tape[i];
  const verdict::RowResult& row = report.verdict.rows[i];
  Case c;
  c.name = fmt::format("{} {} (tape.csv:{})",
                       report.batch->images[static_cast<std::size_t>(entry.image)].image,
                       report.venue->objects[static_cast<std::size_t>(entry.object)].name,
                       entry.line);
  switch (row.state) {
    case RowState::missed:
      c.failure = "not found";
      break;
    case RowState::elsewhere:
      c.failure = "reported, but somewhere else";
      break;
    case RowState::false_find:
      c.failure = "reported although absent";
      break;
    case RowState::hidden:
      c.skipped = true;
      c.failure = "behind the mask";
      break;
    case RowState::beyond:
      c.skipped = true;
      c.failure = "outside the link's ranges";
      break;
    case RowState::absent:
      break;
    case RowState::found:
      if (!row.range_within) {
        c.failure =
            fmt::format("range {:+.0f} mm at {:.3f} m", 1e3 * *row.range_error_m, entry.range_m);
      }
      if (!row.bearing_within) {
        if (!c.failure.empty()) c.failure += ", ";
        c.failure += fmt::format("bearing {:+.1f} deg", *row.bearing_error_rad * kDegPerRad);
      }
  }
  return c;
}

}  // namespace

nlohmann::ordered_json check_document(const CheckReport& report) {
  const verdict::Verdict& v = report.verdict;
  ordered_json json;
  json["accepted"] = v.accepted;
  json["partial"] = report.partial;
  json["images"] = report.batch->images.size();
  json["images_in_sheet"] = report.images_in_sheet;
  json["rows"] = v.rows.size();
  json["recall"] = maybe(v.all.recall.value, 1.0, kShareStep);
  json["range_bias_m"] = maybe(v.all.range_bias_m.value, 1.0, kLengthStep);
  json["range_rms_relative"] = maybe(v.all.range_rms_relative.value, 1.0, kShareStep);
  json["range_p95_relative"] = maybe(v.all.range_p95_relative.value, 1.0, kShareStep);
  json["bearing_rms_deg"] = maybe(v.all.bearing_rms_rad.value, kDegPerRad, kDegreeStep);
  json["reasons"] = v.reasons;
  json["causes"] = report.causes;
  json["remarks"] = v.remarks;
  json["counts"] = {{"judged", v.counted},
                    {"found", v.found},
                    {"hidden", v.hidden},
                    {"beyond", v.beyond},
                    {"absent", v.absent},
                    {"false_finds", v.false_finds},
                    {"extra_finds", v.extra_finds}};
  json["criteria"] = ordered_json::array();
  for (const verdict::Criterion& c : v.criteria) {
    json["criteria"].push_back({{"name", c.name},
                                {"value", rounded(c.value, kShareStep)},
                                {"limit", rounded(c.limit, kShareStep)},
                                {"sense", c.at_least ? "at least" : "at most"},
                                {"passed", c.passed},
                                {"value_text", c.value_text},
                                {"limit_text", c.limit_text}});
  }
  if (v.range_shares) {
    json["range_error_from"] = {{"total_rms_m", rounded(std::sqrt(v.range_shares->total_m2), 1e-6)},
                                {"rounding", rounded(v.range_shares->rounding, 1e-4)},
                                {"pixel_noise", rounded(v.range_shares->pixel_noise, 1e-4)},
                                {"rest", rounded(v.range_shares->rest, 1e-4)}};
  }
  json["all"] = group_json(v.all);
  json["largest_only"] = group_json(v.largest_only);
  json["groups"] = ordered_json::array();
  for (const verdict::Group& group : v.groups) json["groups"].push_back(group_json(group));
  json["hypotheses"] = report.hypotheses;
  json["tables_identity"] = report.tables_identity;
  json["worst"] = ordered_json::array();
  for (const std::size_t i : worst_rows(report, 10)) json["worst"].push_back(i);
  return json;
}

std::string check_json(const CheckReport& report, const MadeFrom& made_from) {
  // Measurements are written one by one: an archive's rows need not stand in memory twice.
  std::string out = json_text(check_document(report), 2);
  out.erase(out.rfind("\n}"));
  out += ",\n  \"measurements\": [";
  for (std::size_t i = 0; i < report.verdict.rows.size(); ++i) {
    out += i == 0 ? "\n    " : ",\n    ";
    out += json_text(row_json(report, i));
  }
  ordered_json record = ordered_json::object();
  for (const auto& [name, hash] : made_from) record[name] = hash;
  return out + "\n  ],\n  \"made_from\": " + record.dump() + "\n}\n";
}

std::string check_csv(const CheckReport& report) {
  static constexpr std::array kColumns = {"line",
                                          "image",
                                          "light",
                                          "object",
                                          "state",
                                          "tape_range_m",
                                          "tape_bearing_deg",
                                          "tape_u_px",
                                          "tape_v_px",
                                          "u_px",
                                          "v_px",
                                          "area_px",
                                          "largest",
                                          "range_code",
                                          "bearing_code",
                                          "range_m",
                                          "bearing_deg",
                                          "range_error_m",
                                          "bearing_error_deg",
                                          "rounding_range_m",
                                          "rounding_bearing_deg",
                                          "pixel_noise_range_m",
                                          "pixel_noise_bearing_deg",
                                          "within"};
  std::string out;
  for (std::size_t c = 0; c < kColumns.size(); ++c) {
    out += kColumns[c];
    out += c + 1 < kColumns.size() ? "," : "\n";
  }
  for (std::size_t i = 0; i < report.verdict.rows.size(); ++i) {
    const ordered_json row = row_json(report, i);
    for (std::size_t c = 0; c < kColumns.size(); ++c) {
      const auto value = row.find(kColumns[c]);
      if (value != row.end() && !value->is_null()) {
        out += value->is_string() ? csv_cell(value->get<std::string>()) : json_text(*value);
      }
      out += c + 1 < kColumns.size() ? "," : "\n";
    }
  }
  return out;
}

std::string check_junit(const CheckReport& report) {
  std::vector<Case> tolerances;
  for (const verdict::Criterion& c : report.verdict.criteria) {
    tolerances.push_back({c.name, c.passed ? "" : c.reason, false});
  }
  if (report.partial) {
    tolerances.push_back({"Every image checked", "stopped before the end", false});
  }
  std::string suites = suite("tolerances", tolerances);
  std::map<std::string, std::vector<Case>> lights;
  for (std::size_t i = 0; i < report.verdict.rows.size(); ++i) {
    const auto image = static_cast<std::size_t>(report.batch->tape[i].image);
    lights[report.batch->images[image].light].push_back(row_case(report, i));
  }
  for (const auto& [light, cases] : lights) {
    suites += suite(light.empty() ? "rows" : "rows, light " + light, cases);
  }
  return fmt::format(
      "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n<testsuites name=\"rondel check: {}\">\n{}"
      "</testsuites>\n",
      xml(report.venue->name),
      suites);
}

std::string check_summary(const CheckReport& report) {
  const verdict::Verdict& v = report.verdict;
  std::string out = fmt::format(
      "check: {} of {} rows found in {} images", v.found, v.counted, report.batch->images.size());
  if (report.partial) {
    out += fmt::format(" (partial: stopped, the sheet names {})", report.images_in_sheet);
  }
  out += "\n";
  if (v.all.range_rms_relative.value) {
    out += fmt::format("  range    RMS {:.1f} %, 95 % within {:.1f} %, bias {:+.0f} mm\n",
                       100.0 * *v.all.range_rms_relative.value,
                       100.0 * *v.all.range_p95_relative.value,
                       1e3 * *v.all.range_bias_m.value);
  }
  if (v.all.bearing_rms_rad.value) {
    out += fmt::format("  bearing  RMS {:.1f} deg, bias {:+.1f} deg\n",
                       *v.all.bearing_rms_rad.value * kDegPerRad,
                       *v.all.bearing_bias_rad.value * kDegPerRad);
  }
  out += v.accepted ? "  verdict  accepted\n" : "  verdict  not accepted\n";
  for (const std::string& reason : v.reasons) out += "    " + reason + "\n";
  for (const ordered_json& cause : report.causes) {
    out += fmt::format("  cause    {}: {} {}\n",
                       cause.value("cause", ""),
                       cause.value("sentence", ""),
                       cause.value("advice", ""));
  }
  for (const std::string& remark : v.remarks) out += "  note     " + remark + "\n";
  return out;
}

std::string shard_text(const ShardFile& file) {
  ordered_json json;
  json["shard"] = {file.shard.index + 1, file.shard.count};
  json["stopped"] = file.stopped;
  json["made_from"] = ordered_json::object();
  for (const auto& [name, hash] : file.made_from) json["made_from"][name] = hash;
  json["images"] = ordered_json::object();
  for (const auto& [image, finds] : file.images) {
    ordered_json list = ordered_json::array();
    for (const verdict::Find& f : finds) {
      ordered_json item = {f.object,
                           f.measured.u_px,
                           f.measured.v_px,
                           f.area_px,
                           f.cut_by_mask,
                           f.range_code,
                           f.bearing_code,
                           f.noise_range_m,
                           f.noise_bearing_rad};
      for (const auto& spot : {f.reported, f.unrounded}) {
        item.push_back(spot ? ordered_json::array({spot->range_m, spot->bearing_rad})
                            : ordered_json(nullptr));
      }
      list.push_back(std::move(item));
    }
    json["images"][image] = std::move(list);
  }
  return json_text(json) + "\n";
}

ShardFile parse_shard(const std::string& text, const std::string& name) {
  const auto spot = [](const ordered_json& json) -> std::optional<FloorSpot> {
    if (json.is_null()) return std::nullopt;
    return FloorSpot{json.at(0).get<double>(), json.at(1).get<double>()};
  };
  try {
    const ordered_json json = ordered_json::parse(text);
    ShardFile file;
    file.shard.index = json.at("shard").at(0).get<int>() - 1;
    file.shard.count = json.at("shard").at(1).get<int>();
    file.stopped = json.at("stopped").get<bool>();
    for (const auto& [key, value] : json.at("made_from").items()) {
      file.made_from.emplace_back(key, value.get<std::string>());
    }
    for (const auto& [image, list] : json.at("images").items()) {
      std::vector<verdict::Find> finds;
      for (const ordered_json& item : list) {
        verdict::Find f;
        f.object = item.at(0).get<int>();
        f.measured = {item.at(1).get<double>(), item.at(2).get<double>()};
        f.area_px = item.at(3).get<int>();
        f.cut_by_mask = item.at(4).get<bool>();
        f.range_code = item.at(5).get<int>();
        f.bearing_code = item.at(6).get<int>();
        f.noise_range_m = item.at(7).get<double>();
        f.noise_bearing_rad = item.at(8).get<double>();
        f.reported = spot(item.at(9));
        f.unrounded = spot(item.at(10));
        finds.push_back(f);
      }
      file.images.emplace_back(image, std::move(finds));
    }
    return file;
  } catch (const ordered_json::exception&) {
    throw InputError(name, "is not a shard's result; run that shard again");
  }
}

}  // namespace rondel::app
