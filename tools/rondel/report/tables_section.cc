#include <fmt/format.h>

#include <cmath>
#include <filesystem>
#include <nlohmann/json.hpp>
#include <system_error>

#include "calib/base/file.h"
#include "tools/rondel/report/section.h"

namespace rondel::app::report {
namespace {

using nlohmann::ordered_json;

std::string percent(const ordered_json& value) {
  return fmt::format("{:.2f} %", 100.0 * value.get<double>());
}

ordered_json line(const char* label, const char* colour, ordered_json points, bool dashed = false) {
  ordered_json set = {{"label", label},
                      {"data", std::move(points)},
                      {"borderColor", colour},
                      {"backgroundColor", colour},
                      {"pointRadius", 0},
                      {"borderWidth", 2}};
  if (dashed) set["borderDash"] = {6, 4};
  return set;
}

ordered_json axis(const char* title, bool logarithmic) {
  return {{"type", logarithmic ? "logarithmic" : "linear"},
          {"title", {{"display", true}, {"text", title}}}};
}

/// Range by range: what the pixels resolve, what the code resolves.
std::string resolution_chart(const ordered_json& document) {
  ordered_json pixels = ordered_json::array();
  ordered_json codes = ordered_json::array();
  double meeting_m = 0.0;
  for (const ordered_json& r : document.at("resolutions")) {
    const double range_m = r.at("range_m").get<double>();
    const double half_pixel = 0.5 * r.at("pixel_m").get<double>();
    const double code = r.at("code_m").get<double>();
    pixels.push_back({{"x", range_m}, {"y", 100.0 * half_pixel / range_m}});
    codes.push_back({{"x", range_m}, {"y", 100.0 * code / range_m}});
    if (meeting_m == 0.0 && half_pixel > code) meeting_m = range_m;
  }
  const ordered_json config = {
      {"type", "line"},
      {"data",
       {{"datasets",
         {line("half a pixel is worth", "series-1", pixels),
          line("a code is off at most", "series-2", codes)}}}},
      {"options",
       {{"scales", {{"x", axis("Range, m", true)}, {"y", axis("Part of the range, %", true)}}}}}};
  const std::string which =
      meeting_m > 0.0
          ? fmt::format(
                "Below {:.2f} m the code limits what the drive board knows, above it the "
                "pixels do.",
                meeting_m)
          : std::string("The code limits what the drive board knows at every range.");
  return chart(config, "What pixels and codes resolve, range by range", which);
}

/// Bytes against the worst error, every layout that was tried.
std::string trade_off_chart(const ordered_json& layout, int number) {
  ordered_json tried = ordered_json::array();
  ordered_json chosen = ordered_json::array();
  for (const ordered_json& c : layout.at("tried")) {
    const ordered_json point = {{"x", c.at("bytes")},
                                {"y", 100.0 * c.at("worst_relative_error").get<double>()}};
    (c.at("chosen").get<bool>() ? chosen : tried).push_back(point);
  }
  ordered_json others = line("tried", "faint", tried);
  ordered_json best = line("chosen", "series-1", chosen);
  others["pointRadius"] = 4;
  best["pointRadius"] = 6;
  const ordered_json config = {
      {"type", "scatter"},
      {"data", {{"datasets", {best, others}}}},
      {"options",
       {{"scales", {{"x", axis("Table, bytes", true)}, {"y", axis("Worst error, %", true)}}}}}};
  const double height_mm = 1e3 * layout.at("height_m").get<double>();
  return chart(config,
               fmt::format("Bytes against worst error of the layouts, height {}", number),
               fmt::format("Layouts at {:.0f} mm above the floor: bytes against the worst error of "
                           "any pixel.",
                           height_mm));
}

std::string trade_off_table(const ordered_json& layout) {
  std::vector<std::vector<std::string>> rows = {
      {"Layout", "Table, bytes", "Worst error", "Of what is allowed", ""}};
  for (const ordered_json& c : layout.at("tried")) {
    rows.push_back({c.at("name").get<std::string>(),
                    fmt::format("{}", c.at("bytes").get<int>()),
                    percent(c.at("worst_relative_error")),
                    fmt::format("{:.0f} %", 100.0 * c.at("share_of_target").get<double>()),
                    c.at("chosen").get<bool>() ? "chosen" : ""});
  }
  std::string objects;
  for (const ordered_json& object : layout.at("objects")) {
    objects += (objects.empty() ? "" : ", ") + object.get<std::string>();
  }
  return table(rows,
               fmt::format("Layouts tried for {} ({:.0f} mm above the floor); the smallest whose "
                           "every pixel keeps to what is allowed is taken.",
                           objects,
                           1e3 * layout.at("height_m").get<double>()));
}

std::string link_part(const ordered_json& plan) {
  const int bytes = plan.at("bytes_per_report").get<int>();
  const int baud = plan.at("baud").get<int>();
  const double rate = plan.at("reports_per_second").get<double>();
  std::string html = paragraph(fmt::format(
      "{} bytes a report x 10 bits a byte x {:g} reports a second = {:.0f} of the line's "
      "{} bits a second ({:.0f} %). A report is {:.2f} ms on the wire; just before the "
      "next one arrives a reading is {:.0f} ms old.",
      bytes,
      rate,
      10.0 * bytes * rate,
      baud,
      100.0 * plan.at("utilisation").get<double>(),
      plan.at("latency_ms").get<double>(),
      plan.at("worst_age_ms").get<double>()));
  std::vector<std::vector<std::string>> rows = {{"Clock", "Sampling", "Rate off by", "Limit", ""}};
  for (const ordered_json& clock : plan.at("clocks")) {
    const double off = clock.at("relative_error").get<double>();
    const double limit = clock.at("tolerable").get<double>();
    rows.push_back({fmt::format("{:g} MHz", 1e-6 * clock.at("clock_hz").get<double>()),
                    fmt::format("{}x", clock.at("oversampling").get<int>()),
                    fmt::format("{:+.2f} %", 100.0 * off),
                    fmt::format("{:.1f} %", 100.0 * limit),
                    std::abs(off) <= limit ? "good" : "too far off"});
  }
  return html + table(rows, fmt::format("How near common board clocks come to {} baud.", baud));
}

}  // namespace

std::optional<Section> tables_section(const Workspace& workspace) {
  const std::filesystem::path path = workspace.results() / "tables" / "tables.json";
  std::error_code error;
  if (!std::filesystem::is_regular_file(path, error)) return std::nullopt;
  const ordered_json document = ordered_json::parse(read_file(path), nullptr, false);
  if (document.is_discarded()) return std::nullopt;  // torn by hand: as if it had not been made
  const ordered_json& book = document.at("codebook");
  Section section;
  section.id = "tables";
  section.title = "Tables";
  section.lead = fmt::format(
      "{} range codes from {:g} to {:g} m, each off by at most {}; {} bytes on the camera board.",
      book.at("codes").get<int>(),
      book.at("near_m").get<double>(),
      book.at("far_m").get<double>(),
      percent(book.at("worst_relative_error")),
      document.at("bytes").at("camera_tables").get<int>());
  section.html += paragraph(fmt::format(
      "Identity {}: the camera board's and the drive board's tables carry it, so that the two ends "
      "can tell whether they were made together.",
      document.at("identity").get<std::string>()));
  section.html += resolution_chart(document);
  int number = 1;
  for (const ordered_json& layout : document.at("layouts")) {
    section.html += trade_off_chart(layout, number++);
    section.html += trade_off_table(layout);
  }
  section.html += link_part(document.at("link"));
  return section;
}

}  // namespace rondel::app::report
