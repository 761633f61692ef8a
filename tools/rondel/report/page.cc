#include "tools/rondel/report/page.h"

#include <fmt/core.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <ctime>
#include <string_view>

#include "calib/base/file.h"
#include "tools/rondel/report/assets/assets.h"
#include "tools/rondel/report/section.h"
#include "tools/rondel/results.h"

namespace rondel::app::report {
namespace {

using nlohmann::ordered_json;

/// A step as the page lists it. To add one: a line here, and its section function.
struct PageStep {
  std::string_view id;
  std::string_view title;
  std::string_view makes;  ///< what the step would show, for the empty state
  std::optional<Section> (*section)(const Workspace&);
};
constexpr std::array kSteps = {
    PageStep{"centre", "Centre", "the mirror's rim and centre", centre_section},
    PageStep{"mask", "Mask", "which pixels show the floor, and the blind zone", mask_section},
    PageStep{"range", "Range", "the curve from pixels to metres, with its band", range_section},
    PageStep{
        "colours", "Colours", "the thresholds of each object under each light", colours_section},
    PageStep{"tables", "Tables", "what the boards carry, and the link's plan", tables_section},
    PageStep{"check", "Check", "the errors against the tape sheet, and the verdict", check_section},
};

std::optional<ordered_json> read_check(const Workspace& workspace) {
  const std::filesystem::path path = workspace.results() / "check.json";
  std::error_code error;
  if (!std::filesystem::exists(path, error)) return std::nullopt;
  ordered_json document = ordered_json::parse(
      read_file(path),
      [](int, ordered_json::parse_event_t event, const ordered_json& parsed) {
        return event != ordered_json::parse_event_t::key || parsed != "measurements";
      },
      false);
  if (!document.is_object() || !document.contains("accepted")) return std::nullopt;
  return document;
}

/// A horizontal scale from 0 with the value as a bar and the limit as a stroke through it.
std::string gauge(const ordered_json& criterion) {
  const double value = criterion.at("value").get<double>();
  const double limit = criterion.at("limit").get<double>();
  const bool passed = criterion.at("passed").get<bool>();
  const bool at_least = criterion.at("sense").get<std::string>() == "at least";
  const double full = at_least ? 1.0 : std::max(1.25 * limit, 1.05 * value);
  const double scale = full > 0.0 ? 200.0 / full : 0.0;
  std::string strokes;
  for (int i = 0; i <= 20; ++i) {
    strokes += fmt::format("M{} 19v{}", 10 * i, i % 5 == 0 ? 5 : 3);
  }
  const std::string svg = fmt::format(
      "<svg viewBox=\"0 0 200 26\" preserveAspectRatio=\"none\" aria-hidden=\"true\">"
      "<path class=\"faint\" fill=\"none\" stroke-width=\"0.6\" d=\"M0 19H200{}\"/>"
      "<rect class=\"fill-{}\" x=\"0\" y=\"9\" width=\"{:.2f}\" height=\"7\"/>"
      "<path class=\"ink\" stroke-width=\"1.6\" d=\"M{:.2f} 4V22\"/></svg>",
      strokes,
      passed ? "good" : "bad",
      std::clamp(value * scale, 0.0, 200.0),
      std::clamp(limit * scale, 0.8, 199.2));
  return fmt::format(
      "<div class=\"gauge\"><div class=\"name\">{}</div><div class=\"value\">{} <small>{} {}, {}"
      "</small></div>{}</div>\n",
      text(criterion.at("name").get<std::string>()),
      text(criterion.at("value_text").get<std::string>()),
      at_least ? "at least" : "at most",
      text(criterion.at("limit_text").get<std::string>()),
      passed ? "held" : "not held",
      svg);
}

/// `of_batch`: the verdict is on another folder's frames, whose record is not the venue's.
std::string verdict_html(const Workspace& workspace, bool of_batch) {
  static constexpr std::string_view kGoodMark =
      "<svg viewBox=\"0 0 20 20\" aria-hidden=\"true\"><circle class=\"good\" cx=\"10\" cy=\"10\" "
      "r=\"9\" fill=\"none\" stroke-width=\"1.6\"/><path class=\"good\" fill=\"none\" "
      "stroke-width=\"2.2\" d=\"M5.5 10.4l3.2 3.2 5.9-6.8\"/></svg>";
  static constexpr std::string_view kBadMark =
      "<svg viewBox=\"0 0 20 20\" aria-hidden=\"true\"><circle class=\"bad\" cx=\"10\" cy=\"10\" "
      "r=\"9\" fill=\"none\" stroke-width=\"1.6\"/><path class=\"bad\" stroke-width=\"2.2\" "
      "d=\"M6.3 6.3l7.4 7.4M13.7 6.3l-7.4 7.4\"/></svg>";
  const std::optional<ordered_json> check = read_check(workspace);
  if (!check) {
    return "<section class=\"verdict wait\" aria-labelledby=\"verdict\"><h2 id=\"verdict\">No "
           "verdict "
           "yet</h2><ul><li>No images have been checked against a tape sheet.</li><li>Write "
           "<code>tape.csv</code>, then run <code>rondel check</code> on this venue.</li></ul>"
           "</section>\n";
  }
  const bool accepted = check->at("accepted").get<bool>();
  std::string out = fmt::format(
      "<section class=\"verdict {0}\" aria-labelledby=\"verdict\"><h2 id=\"verdict\">{1}{2}</h2>\n",
      accepted ? "good" : "bad",
      accepted ? kGoodMark : kBadMark,
      accepted ? "Accepted" : "Not accepted");
  out += "<ul>";
  if (check->value("partial", false)) out += "<li>Partial: the check was stopped early.</li>";
  if (!of_batch && state_of(workspace, "check").freshness == Freshness::stale) {
    out +=
        "<li>Something has changed since: run <code>rondel run</code> for a verdict on what is "
        "there now.</li>";
  }
  for (const ordered_json& reason : check->value("reasons", ordered_json::array())) {
    out += fmt::format("<li>{}</li>", text(reason.get<std::string>()));
  }
  out += "</ul>\n";
  if (check->contains("criteria") && !check->at("criteria").empty()) {
    out += "<div class=\"gauges\">\n";
    for (const ordered_json& criterion : check->at("criteria")) out += gauge(criterion);
    out += "</div>\n";
  }
  const ordered_json causes = check->value("causes", ordered_json::array());
  if (!causes.empty()) {
    out += "<h3>Likely cause</h3><ul>";
    for (const ordered_json& cause : causes) {
      out += fmt::format("<li><strong>{}.</strong> {} {}</li>",
                         text(cause.value("cause", "")),
                         text(cause.value("sentence", "")),
                         text(cause.value("advice", "")));
    }
    out += "</ul>\n";
  }
  return out + "</section>\n";
}

std::string utc_now() {
  const std::time_t now = std::time(nullptr);
  std::tm utc{};
  gmtime_r(&now, &utc);
  return fmt::format("{:04}-{:02}-{:02} {:02}:{:02} UTC",
                     utc.tm_year + 1900,
                     utc.tm_mon + 1,
                     utc.tm_mday,
                     utc.tm_hour,
                     utc.tm_min);
}

std::string cell(std::string_view name, std::string_view value) {
  return fmt::format("<div><dt>{}</dt><dd>{}</dd></div>", text(name), text(value));
}

std::string head_html(const Workspace& workspace) {
  const VenueSpec& venue = workspace.venue;
  std::string objects;
  for (const ObjectSpec& object : venue.objects) {
    if (!objects.empty()) objects += ", ";
    objects += object.name;
  }
  std::string block = cell("Made", utc_now());
  block += cell(
      "Camera",
      fmt::format("{} x {} px", workspace.rig.camera.width_px, workspace.rig.camera.height_px));
  if (workspace.rig.mounting.eye_height_m) {
    block += cell("Eye height",
                  fmt::format("{:.0f} mm", 1e3 * workspace.rig.mounting.eye_height_m->value));
  }
  block += cell("Objects", objects.empty() ? "none" : objects);
  block +=
      cell("Frames, marks", fmt::format("{}, {}", workspace.frames.size(), workspace.marks.size()));
  block += cell("Range tolerance",
                fmt::format("{:.3g} %, {:.0f} mm at least",
                            100.0 * venue.tolerance.range_relative,
                            1e3 * venue.tolerance.range_floor_m));
  block += cell("Bearing tolerance",
                fmt::format("{:.3g} deg", venue.tolerance.bearing_rad * kDegPerRad));
  block += cell("Recall", fmt::format("{:.3g} % at least", 100.0 * venue.tolerance.recall));
  return fmt::format(
      "<header class=\"head\"><div><p class=\"kind\">Calibration report</p><h1>{}</h1></div>"
      "<dl class=\"block\">{}</dl></header>\n<div class=\"scale\" aria-hidden=\"true\"></div>\n",
      text(venue.name.empty() ? workspace.folder.filename().string() : venue.name),
      block);
}

std::filesystem::path write_page(const Workspace& workspace, bool of_batch) {
  std::string nav;
  std::string sections;
  int number = 0;
  for (const PageStep& step : kSteps) {
    if (of_batch && step.id != "check") continue;
    ++number;
    const std::optional<Section> section = step.section(workspace);
    const StepState state = of_batch ? StepState{} : state_of(workspace, step.id);
    const std::string_view mark =
        !section
            ? " <span class=\"state\">not run</span>"
            : (state.freshness == Freshness::stale ? " <span class=\"state\">stale</span>" : "");
    nav += fmt::format("<a href=\"#{0}\"><span class=\"no\">{1}</span>{2}{3}</a>\n",
                       step.id,
                       number,
                       step.title,
                       mark);
    sections += fmt::format(
        "<section class=\"step\" id=\"{0}\" aria-labelledby=\"{0}-title\">\n<header><span "
        "class=\"no\">{1}</span><h2 id=\"{0}-title\">{2}</h2></header>\n<div class=\"scale\" "
        "aria-hidden=\"true\"></div>\n",
        step.id,
        number,
        step.title);
    if (section) {
      sections += fmt::format("<p class=\"lead\">{}</p>\n", text(section->lead));
      if (state.freshness == Freshness::stale) {
        std::string changed;
        for (const std::string& name : state.changed) {
          if (!changed.empty()) changed += ", ";
          changed += name;
        }
        sections += fmt::format(
            "<p class=\"stale\">Stale: {} changed since. Run <code>rondel run</code>.</p>\n",
            text(changed.empty() ? "something it was made from" : changed));
      }
      sections += fmt::format("<div class=\"body\">\n{}</div>\n", section->html);
    } else {
      sections += fmt::format(
          "<p class=\"empty\">Not run yet: <code>rondel {}</code> on this venue finds {}.</p>\n",
          step.id,
          step.makes);
    }
    sections += "</section>\n";
  }

  std::string page = fmt::format(
      "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n"
      "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n"
      "<meta name=\"color-scheme\" content=\"light dark\">\n"
      "<link rel=\"icon\" href=\"data:,\">\n<title>{}: calibration report</title>\n<style>\n",
      text(workspace.venue.name));
  page += asset_page_css();
  page += "</style>\n</head>\n<body>\n<a class=\"skip\" href=\"#";
  page += of_batch ? "check" : "centre";
  page += "\">To the steps</a>\n<main class=\"page\">\n";
  page += head_html(workspace);
  page += verdict_html(workspace, of_batch);
  if (!of_batch) page += "<nav aria-label=\"Steps\">\n" + nav + "</nav>\n";
  page += sections;
  page +=
      "<footer class=\"foot\"><p><strong>Safety.</strong> These numbers hold for the rig, floor "
      "and lights of the frames they were made from. Before the robot moves under them: check "
      "again after any change of camera, mirror, lamps or program; load tables with the drive "
      "disabled; keep people clear of the floor and a stop within reach; and never rely on the "
      "camera alone to keep the robot away from a person.</p><p>Lengths in metres or "
      "millimetres as written; bearings in degrees, counter-clockwise from the robot's "
      "forward; pixels from the top-left pixel's centre.</p></footer>\n</main>\n<script>\n";
  page += asset_chart_min_js();
  page += "\n</script>\n<script>\n";
  page += asset_page_js();
  page += "</script>\n</body>\n</html>\n";
  const std::filesystem::path path = workspace.results() / "report.html";
  write_file(path, page);
  return path;
}

}  // namespace

std::filesystem::path write_report(const Workspace& workspace) {
  return write_page(workspace, false);
}

std::filesystem::path write_check_report(const Workspace& workspace, const Batch& batch) {
  Workspace of_batch = workspace;
  of_batch.folder = batch.folder;
  of_batch.frames = batch.frames;
  of_batch.tape = batch.tape;
  return write_page(of_batch, true);
}

}  // namespace rondel::app::report
