#include <fmt/core.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <map>
#include <opencv2/imgproc.hpp>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "tools/rondel/report/section.h"
#include "vision/frames/load.h"

namespace rondel::app::report {
namespace {

using nlohmann::ordered_json;

/// More points and arrows than this say no more, and make the page slow; they are thinned evenly.
constexpr std::size_t kMostPoints = 1500;
constexpr std::size_t kMostArrows = 500;

/// A row of check.json's measurements.
struct Row {
  int line = 0;
  std::string image, object, state;
  std::optional<double> tape_range_m, tape_bearing_deg, range_m, bearing_deg;
  std::optional<double> range_error_m, bearing_error_deg;
  std::optional<ImagePoint> tape_px, found_px;
  bool within = false;
};

std::optional<double> number(const ordered_json& json, const char* key) {
  const auto at = json.find(key);
  if (at == json.end() || !at->is_number()) return std::nullopt;
  return at->get<double>();
}

std::optional<ImagePoint> place(const ordered_json& json, const char* u, const char* v) {
  const auto u_px = number(json, u);
  const auto v_px = number(json, v);
  if (!u_px || !v_px) return std::nullopt;
  return ImagePoint{*u_px, *v_px};
}

Row row_of(const ordered_json& json) {
  Row row;
  row.line = json.value("line", 0);
  row.image = json.value("image", "");
  row.object = json.value("object", "");
  row.state = json.value("state", "");
  row.tape_range_m = number(json, "tape_range_m");
  row.tape_bearing_deg = number(json, "tape_bearing_deg");
  row.range_m = number(json, "range_m");
  row.bearing_deg = number(json, "bearing_deg");
  row.range_error_m = number(json, "range_error_m");
  row.bearing_error_deg = number(json, "bearing_error_deg");
  row.tape_px = place(json, "tape_u_px", "tape_v_px");
  row.found_px = place(json, "u_px", "v_px");
  row.within = json.value("within", false);
  return row;
}

template <class T>
std::vector<T> thinned(const std::vector<T>& all, std::size_t most) {
  if (all.size() <= most) return all;
  std::vector<T> kept;
  kept.reserve(most);
  for (std::size_t i = 0; i < most; ++i) kept.push_back(all[i * all.size() / most]);
  return kept;
}

ordered_json axis(const char* title) {
  return {{"type", "linear"}, {"title", {{"display", true}, {"text", title}}}};
}

ordered_json limit_line(ordered_json points, const char* label) {
  return {{"type", "line"},
          {"label", label},
          {"data", std::move(points)},
          {"borderColor", "limit"},
          {"backgroundColor", "limit"},
          {"borderDash", {6, 4}},
          {"borderWidth", 1.5},
          {"pointRadius", 0}};
}

/// Errors of one kind against range, an own colour for each object, between the tolerance's lines.
std::string error_chart(const std::vector<Row>& rows,
                        const std::vector<ObjectSpec>& objects,
                        const ToleranceSpec& tolerance,
                        bool of_bearing) {
  ordered_json sets = ordered_json::array();
  double far_m = 0.5;
  for (std::size_t o = 0; o < objects.size(); ++o) {
    std::vector<ordered_json> points;
    for (const Row& row : rows) {
      const auto& error = of_bearing ? row.bearing_error_deg : row.range_error_m;
      if (row.object != objects[o].name || row.state != "found" || !error) continue;
      far_m = std::max(far_m, *row.tape_range_m);
      points.push_back({{"x", *row.tape_range_m}, {"y", of_bearing ? *error : 1e3 * *error}});
    }
    if (points.empty()) continue;
    sets.push_back({{"label", objects[o].name},
                    {"data", thinned(points, kMostPoints)},
                    {"backgroundColor", fmt::format("series-{}", o % 6 + 1)},
                    {"borderColor", fmt::format("series-{}", o % 6 + 1)},
                    {"pointRadius", 3}});
  }
  for (const double sign : {1.0, -1.0}) {
    ordered_json line = ordered_json::array();
    for (int i = 0; i <= 40; ++i) {
      const double range_m = far_m * i / 40.0;
      line.push_back({{"x", range_m},
                      {"y",
                       sign * (of_bearing ? tolerance.bearing_rad * kDegPerRad
                                          : 1e3 * tolerance.range_m_at(range_m))}});
    }
    sets.push_back(limit_line(std::move(line), sign > 0.0 ? "tolerance" : ""));
  }
  const char* what = of_bearing ? "Bearing error, deg" : "Range error, mm";
  const ordered_json config = {
      {"type", "scatter"},
      {"data", {{"datasets", std::move(sets)}}},
      {"options", {{"scales", {{"x", axis("Taped range, m")}, {"y", axis(what)}}}}}};
  return chart(config,
               fmt::format("{} against range, with the tolerance", what),
               of_bearing ? "Bearing errors, reported minus taped, against range."
                          : "Range errors, reported minus taped, against range; dashed what the "
                            "tolerance allows.");
}

/// The floor from above, forward up: an arrow from each taped place to the reported one.
std::string plan(const std::vector<Row>& rows) {
  std::vector<const Row*> drawn;
  double far_m = 0.5;
  for (const Row& row : rows) {
    if (!row.tape_bearing_deg || !row.tape_range_m) continue;
    const bool lost = row.state == "missed" || row.state == "elsewhere";
    if (!lost && row.state != "found") continue;
    far_m = std::max({far_m, *row.tape_range_m, row.state == "found" ? *row.range_m : 0.0});
    drawn.push_back(&row);
  }
  if (drawn.empty()) return "";
  const std::size_t all = drawn.size();
  drawn = thinned(drawn, kMostArrows);
  const double scale = 230.0 / far_m;
  const auto at = [&](double range_m, double bearing_deg) {
    const FloorPoint p = to_point({range_m, bearing_deg * kRadPerDeg});
    return std::pair{250.0 - scale * p.y_m, 250.0 - scale * p.x_m};
  };
  std::string svg = "<svg viewBox=\"0 0 500 500\" xmlns=\"http://www.w3.org/2000/svg\">";
  const double ring_m = far_m > 4.0 ? 2.0 : far_m > 2.0 ? 1.0 : 0.5;
  for (double r = ring_m; r <= far_m * 1.05; r += ring_m) {
    svg += fmt::format(
        "<circle class=\"rule\" fill=\"none\" cx=\"250\" cy=\"250\" r=\"{:.1f}\"/><text "
        "x=\"{:.1f}\" y=\"247\" font-size=\"11\">{:g} m</text>",
        scale * r,
        252.0 + scale * r - 30.0,
        r);
  }
  svg +=
      "<path class=\"faint\" d=\"M250 250V8\" stroke-width=\"0.8\"/><text x=\"254\" y=\"16\" "
      "font-size=\"11\">forward</text><path class=\"ink\" fill=\"none\" stroke-width=\"1.5\" "
      "d=\"M245 256L250 242L255 256Z\"/>";
  for (const Row* row : drawn) {
    const auto [x0, y0] = at(*row->tape_range_m, *row->tape_bearing_deg);
    if (row->state != "found") {
      svg += fmt::format(
          "<path class=\"bad\" stroke-width=\"1.6\" d=\"M{0:.1f} {1:.1f}l8 8m0 -8l-8 8\"/>",
          x0 - 4.0,
          y0 - 4.0);
      continue;
    }
    const auto [x1, y1] = at(*row->range_m, *row->bearing_deg);
    const char* colour = row->within ? "good" : "bad";
    svg += fmt::format(
        "<circle class=\"fill-{0}\" cx=\"{1:.1f}\" cy=\"{2:.1f}\" r=\"2\"/><path class=\"{0}\" "
        "fill=\"none\" stroke-width=\"1.3\" d=\"M{1:.1f} {2:.1f}L{3:.1f} {4:.1f}",
        colour,
        x0,
        y0,
        x1,
        y1);
    const double length = std::hypot(x1 - x0, y1 - y0);
    if (length > 3.0) {
      const double ux = (x1 - x0) / length;
      const double uy = (y1 - y0) / length;
      const double head = std::min(5.0, 0.6 * length);
      svg += fmt::format("M{:.1f} {:.1f}L{:.1f} {:.1f}L{:.1f} {:.1f}",
                         x1 - head * (ux + 0.5 * uy),
                         y1 - head * (uy - 0.5 * ux),
                         x1,
                         y1,
                         x1 - head * (ux - 0.5 * uy),
                         y1 - head * (uy + 0.5 * ux));
    }
    svg += "\"/>";
  }
  svg += "</svg>";
  std::string caption =
      "The floor from above: arrows lead from the taped place to the reported one; crosses were "
      "not found.";
  if (all > drawn.size()) caption += fmt::format(" {} of {} rows are drawn.", drawn.size(), all);
  return drawing(svg, "Plan view of where the errors are", caption);
}

std::string name_of_light(const std::string& light) { return light.empty() ? "(unnamed)" : light; }

/// Bars of found and within tolerance for each light.
std::string light_bars(const ordered_json& document, const ToleranceSpec& tolerance) {
  ordered_json labels = ordered_json::array();
  ordered_json found = ordered_json::array();
  ordered_json within = ordered_json::array();
  ordered_json asked = ordered_json::array();
  for (const ordered_json& group : document.at("groups")) {
    if (group.at("kind") != "light") continue;
    labels.push_back(fmt::format("{} ({} rows)",
                                 name_of_light(group.at("name").get<std::string>()),
                                 group.at("rows").get<int>()));
    found.push_back(100.0 * number(group, "recall").value_or(0.0));
    within.push_back(100.0 * number(group, "within_tolerance").value_or(0.0));
    asked.push_back(100.0 * tolerance.recall);
  }
  if (labels.empty()) return "";
  ordered_json line = limit_line(std::move(asked), "recall asked for");
  const ordered_json config = {
      {"type", "bar"},
      {"data",
       {{"labels", std::move(labels)},
        {"datasets",
         {{{"label", "found"}, {"data", std::move(found)}, {"backgroundColor", "series-1"}},
          {{"label", "of these within tolerance"},
           {"data", std::move(within)},
           {"backgroundColor", "series-2"}},
          std::move(line)}}}},
      {"options",
       {{"scales",
         {{"y",
           {{"min", 0}, {"max", 100}, {"title", {{"display", true}, {"text", "Rows, %"}}}}}}}}}};
  return chart(config, "Rows found and within tolerance, by light", "Light by light.");
}

std::string percent(const ordered_json& group, const char* key) {
  const auto value = number(group, key);
  return value ? fmt::format("{:.1f} %", 100.0 * *value) : "-";
}

std::string with_interval(const ordered_json& group, const char* key, const char* interval) {
  std::string out = percent(group, key);
  const auto at = group.find(interval);
  if (at != group.end() && at->is_array()) {
    out += fmt::format(
        " ({:.0f} .. {:.0f})", 100.0 * (*at)[0].get<double>(), 100.0 * (*at)[1].get<double>());
  }
  return out;
}

std::string group_table(const ordered_json& document) {
  std::vector<std::vector<std::string>> rows = {{"",
                                                 "Rows",
                                                 "Found (95 %)",
                                                 "Bias",
                                                 "RMS",
                                                 "95 % within",
                                                 "Bearing RMS",
                                                 "In tolerance (95 %)"}};
  const auto add = [&](const ordered_json& group, const std::string& name) {
    const auto bias = number(group, "range_bias_m");
    const auto bearing = number(group, "bearing_rms_deg");
    rows.push_back({name,
                    std::to_string(group.at("rows").get<int>()),
                    with_interval(group, "recall", "recall_95"),
                    bias ? fmt::format("{:+.0f} mm", 1e3 * *bias) : "-",
                    percent(group, "range_rms_relative"),
                    percent(group, "range_p95_relative"),
                    bearing ? fmt::format("{:.1f} deg", *bearing) : "-",
                    with_interval(group, "within_tolerance", "within_tolerance_95")});
  };
  add(document.at("all"), "all");
  for (const ordered_json& group : document.at("groups")) {
    const auto kind = group.at("kind").get<std::string>();
    const auto name = group.at("name").get<std::string>();
    add(group, kind == "light" ? "light " + name_of_light(name) : name);
  }
  add(document.at("largest_only"), "largest patch only");
  return table(rows,
               "Errors by object, light, range and bearing, range errors as parts of the range; in "
               "brackets 95 % intervals.");
}

std::string hypothesis_table(const ordered_json& document) {
  const ordered_json all = document.value("hypotheses", ordered_json::array());
  if (all.empty()) return "";
  std::vector<std::vector<std::string>> rows = {
      {"Explanation", "Evidence", "Explains", "Left", "By chance", ""}};
  for (const ordered_json& h : all) {
    const double p = h.at("p").get<double>();
    rows.push_back({h.at("cause").get<std::string>(),
                    fmt::format("{:.1f}", h.at("evidence").get<double>()),
                    fmt::format("{:.0f} %", 100.0 * h.at("explained").get<double>()),
                    fmt::format("{:.2f} px", h.at("rms_px").get<double>()),
                    p < 1e-4 ? "< 0.01 %" : fmt::format("{:.2g} %", 100.0 * p),
                    h.at("named").get<bool>() ? "likely" : ""});
  }
  return table(rows,
               "What may have gone wrong, each fitted to the same residuals. Evidence: how much "
               "smaller the corrected information criterion is than for 'nothing wrong'.");
}

std::string what_happened(const Row& row) {
  const std::string where =
      row.tape_range_m
          ? fmt::format(
                " at {:.2f} m{}",
                *row.tape_range_m,
                row.tape_bearing_deg ? fmt::format(", {:.0f} deg", *row.tape_bearing_deg) : "")
          : "";
  if (row.state == "missed") return row.object + where + " not found";
  if (row.state == "false find") return row.object + " reported although absent";
  if (row.state == "elsewhere") {
    return fmt::format("{}{} reported at {:.2f} m, {:.0f} deg",
                       row.object,
                       where,
                       row.range_m.value_or(0.0),
                       row.bearing_deg.value_or(0.0));
  }
  std::string errors;
  if (row.range_error_m) errors = fmt::format(" off by {:+.0f} mm", 1e3 * *row.range_error_m);
  if (row.bearing_error_deg) errors += fmt::format(", {:+.1f} deg", *row.bearing_error_deg);
  return row.object + where + errors;
}

/// A worst image, twice its size at most, with a ring where the tape says and a cross where the
/// board saw it, for all of its rows.
std::string worst_picture(const Workspace& workspace,
                          const std::vector<Row>& rows,
                          const Row& worst) {
  cv::Mat image;
  try {
    image = vision::load_image(workspace.folder / worst.image, workspace.rig.camera);
  } catch (const InputError& gone) {
    return paragraph(fmt::format(
        "{}: {} (the image {})", worst.image, what_happened(worst), gone.problems().front().what));
  }
  const int factor = image.cols <= 400 ? 2 : 1;
  cv::Mat big;
  cv::resize(image, big, {}, factor, factor, cv::INTER_NEAREST);
  const auto scaled = [&](ImagePoint p) {
    return cv::Point(static_cast<int>(std::lround((p.u_px + 0.5) * factor - 0.5)),
                     static_cast<int>(std::lround((p.v_px + 0.5) * factor - 0.5)));
  };
  // Dark beneath light: seen on any floor.
  const auto draw = [&](const Row& row, const cv::Scalar& colour) {
    for (const auto& [paint, width] : {std::pair{cv::Scalar(0, 0, 0), 4}, std::pair{colour, 2}}) {
      if (row.tape_px) cv::circle(big, scaled(*row.tape_px), 11, paint, width, cv::LINE_AA);
      if (row.found_px) {
        cv::drawMarker(
            big, scaled(*row.found_px), paint, cv::MARKER_TILTED_CROSS, 14, width, cv::LINE_AA);
      }
    }
  };
  for (const Row& row : rows) {
    if (row.image == worst.image && row.line != worst.line) draw(row, cv::Scalar(255, 255, 255));
  }
  draw(worst, cv::Scalar(90, 220, 255));
  return picture(
      big,
      fmt::format("{} with the taped and the found places", worst.image),
      fmt::format("{}: {} (tape line {})", worst.image, what_happened(worst), worst.line));
}

std::string counts_text(const ordered_json& document) {
  const ordered_json& counts = document.at("counts");
  std::string out = fmt::format("{} rows in {} images: {} judged, {} found",
                                document.at("rows").get<int>(),
                                document.at("images").get<int>(),
                                counts.at("judged").get<int>(),
                                counts.at("found").get<int>());
  const auto add = [&](const char* key, const char* what) {
    const int n = counts.at(key).get<int>();
    if (n > 0) out += fmt::format(", {} {}", n, what);
  };
  add("hidden", "behind the mask");
  add("beyond", "outside the link's ranges");
  add("absent", "absent and not reported");
  add("false_finds", "absent but reported");
  return out + ".";
}

}  // namespace

std::optional<Section> check_section(const Workspace& workspace) {
  const std::filesystem::path path = workspace.results() / "check.json";
  std::error_code error;
  if (!std::filesystem::is_regular_file(path, error)) return std::nullopt;
  // Measurements are taken one by one as they are read: an archive's would fill the memory as a
  // tree.
  std::vector<Row> rows;
  std::string part;
  const ordered_json document = ordered_json::parse(
      read_file(path),
      [&](int depth, ordered_json::parse_event_t event, ordered_json& parsed) {
        if (depth == 1 && event == ordered_json::parse_event_t::key) part = parsed;
        if (part != "measurements" || event != ordered_json::parse_event_t::object_end) return true;
        rows.push_back(row_of(parsed));
        return false;
      },
      false);
  if (!document.is_object() || !document.contains("measurements")) return std::nullopt;

  Section section;
  section.id = "check";
  section.title = "Check";
  section.lead = fmt::format("{}: {} found",
                             document.at("accepted").get<bool>() ? "Accepted" : "Not accepted",
                             percent(document, "recall"));
  if (const auto rms = number(document, "range_rms_relative")) {
    section.lead += fmt::format(", range within {:.1f} % RMS", 100.0 * *rms);
  }
  if (const auto rms = number(document, "bearing_rms_deg")) {
    section.lead += fmt::format(", bearing within {:.1f} deg RMS", *rms);
  }
  section.lead += ".";

  std::string& html = section.html;
  html += paragraph(counts_text(document));
  for (const ordered_json& remark : document.value("remarks", ordered_json::array())) {
    html += paragraph(remark.get<std::string>());
  }
  const std::vector<ObjectSpec>& objects = workspace.venue.objects;
  html += error_chart(rows, objects, workspace.venue.tolerance, false);
  html += error_chart(rows, objects, workspace.venue.tolerance, true);
  html += plan(rows);
  html += light_bars(document, workspace.venue.tolerance);
  if (document.contains("range_error_from")) {
    const ordered_json& from = document.at("range_error_from");
    html +=
        paragraph(fmt::format("Of the squared range errors (RMS {:.0f} mm) {:.0f} % come from "
                              "tables and codes, {:.0f} % from pixel noise, {:.0f} % from the "
                              "rest: curve, tape, light.",
                              1e3 * from.at("total_rms_m").get<double>(),
                              100.0 * from.at("rounding").get<double>(),
                              100.0 * from.at("pixel_noise").get<double>(),
                              100.0 * from.at("rest").get<double>()));
  }
  html += group_table(document);
  html += hypothesis_table(document);
  for (const ordered_json& worst : document.value("worst", ordered_json::array())) {
    const auto at = worst.get<std::size_t>();
    if (at < rows.size()) html += worst_picture(workspace, rows, rows[at]);
  }
  return section;
}

}  // namespace rondel::app::report
