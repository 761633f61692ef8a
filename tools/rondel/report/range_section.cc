#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <system_error>

#include "calib/base/file.h"
#include "calib/range/curve_file.h"
#include "tools/rondel/report/section.h"

namespace rondel::app::report {
namespace {

using nlohmann::ordered_json;

/// The curve and its band along one bearing, at the floor.
struct CurvePoint {
  double radius_px, range_m, low_m, high_m;
};

/// Averages over bearings, so that a tilted mirror's curve is one line.
std::vector<CurvePoint> curve_points(const range::RangeCurve& curve, double near_m, double far_m) {
  std::vector<CurvePoint> points;
  constexpr int kSteps = 60;
  for (int i = 0; i <= kSteps; ++i) {
    const double range = near_m * std::pow(far_m / near_m, static_cast<double>(i) / kSteps);
    CurvePoint p{0.0, range, 0.0, 0.0};
    int n = 0;
    for (int k = 0; k < 16; ++k) {
      const auto pixel = curve.pixel_of({range, wrap_angle(2.0 * std::numbers::pi * k / 16)}, 0.0);
      if (!pixel) continue;
      const auto e = curve.floor_with_band(*pixel, 0.0);
      if (!e) continue;
      p.radius_px +=
          std::hypot(pixel->u_px - curve.centre().u_px, pixel->v_px - curve.centre().v_px);
      p.low_m += std::log(e->band95_low_m);
      p.high_m += std::log(e->band95_high_m);
      ++n;
    }
    if (n < 8) continue;
    points.push_back({p.radius_px / n, range, std::exp(p.low_m / n), std::exp(p.high_m / n)});
  }
  return points;
}

ordered_json xy(double x, double y) { return {{"x", x}, {"y", y}}; }

double rounded(double value, double step) { return std::round(value / step) * step; }

ordered_json axis(const char* title, bool logarithmic = false) {
  ordered_json a = {{"type", logarithmic ? "logarithmic" : "linear"},
                    {"title", {{"display", true}, {"text", title}}}};
  return a;
}

std::string curve_chart(const Workspace& workspace,
                        const range::RangeCurve& curve,
                        const YAML::Node& root) {
  ordered_json line = ordered_json::array();
  ordered_json low = ordered_json::array();
  ordered_json high = ordered_json::array();
  for (const CurvePoint& p :
       curve_points(curve, workspace.venue.link.near_m, workspace.venue.link.far_m)) {
    const double radius = rounded(p.radius_px, 0.01);
    line.push_back(xy(radius, rounded(p.range_m, 1e-4)));
    low.push_back(xy(radius, rounded(p.low_m, 1e-4)));
    high.push_back(xy(radius, rounded(p.high_m, 1e-4)));
  }
  ordered_json used = ordered_json::array();
  ordered_json flagged = ordered_json::array();
  for (const auto& r : root["residuals"]) {
    const auto index = r["mark"].as<std::size_t>();
    if (index >= workspace.marks.size()) continue;
    const Mark& mark = workspace.marks[index];
    // What is seen at a height is brought down to the floor along its line of sight.
    const ObjectSpec* object = workspace.venue.find_object(mark.object);
    double to_floor = 1.0;
    if (object != nullptr && object->seen_height_m() > 0.0) {
      const auto floor = curve.floor_at(mark.pixel, 0.0);
      const auto raised = curve.floor_at(mark.pixel, object->seen_height_m());
      if (!floor || !raised) continue;
      to_floor = floor->range_m / raised->range_m;
    }
    const auto point = xy(rounded(std::hypot(mark.pixel.u_px - curve.centre().u_px,
                                             mark.pixel.v_px - curve.centre().v_px),
                                  0.01),
                          rounded(mark.range_m * to_floor, 1e-4));
    (r["flagged"].as<bool>() ? flagged : used).push_back(point);
  }
  ordered_json sets = ordered_json::array();
  sets.push_back({{"label", "95 % band"},
                  {"data", high},
                  {"showLine", true},
                  {"pointRadius", 0},
                  {"borderWidth", 0},
                  {"backgroundColor", "band"},
                  {"fill", "+1"}});
  sets.push_back({{"label", "band, lower edge"},
                  {"data", low},
                  {"showLine", true},
                  {"pointRadius", 0},
                  {"borderWidth", 0}});
  sets.push_back({{"label", "curve (floor, all bearings)"},
                  {"data", line},
                  {"showLine", true},
                  {"pointRadius", 0},
                  {"borderWidth", 2},
                  {"borderColor", "series-1"}});
  if (!used.empty()) {
    sets.push_back({{"label", "marks"},
                    {"data", used},
                    {"pointRadius", 4},
                    {"borderColor", "ink"},
                    {"backgroundColor", "series-2"}});
  }
  if (!flagged.empty()) {
    sets.push_back({{"label", "marks left out"},
                    {"data", flagged},
                    {"pointRadius", 5},
                    {"pointStyle", "crossRot"},
                    {"borderColor", "bad"},
                    {"backgroundColor", "bad"}});
  }
  return chart({{"type", "scatter"},
                {"data", {{"datasets", sets}}},
                {"options",
                 {{"scales",
                   {{"x", axis("radius from the centre, px")},
                    {"y", axis("range on the floor, m", true)}}}}}},
               "Range against image radius with the marks and the 95 % band",
               "Range against image radius on the floor; marks of objects seen at a height are "
               "brought down to it along their line of sight.");
}

std::string residual_chart(const Workspace& workspace, const YAML::Node& root) {
  ordered_json used = ordered_json::array();
  ordered_json flagged = ordered_json::array();
  for (const auto& r : root["residuals"]) {
    const auto index = r["mark"].as<std::size_t>();
    if (index >= workspace.marks.size()) continue;
    const auto point = xy(workspace.marks[index].range_m,
                          rounded(100.0 * r["leave_one_out_relative"].as<double>(), 0.01));
    (r["flagged"].as<bool>() ? flagged : used).push_back(point);
  }
  ordered_json sets = ordered_json::array();
  sets.push_back({{"label", "marks"},
                  {"data", used},
                  {"pointRadius", 4},
                  {"borderColor", "ink"},
                  {"backgroundColor", "series-2"}});
  if (!flagged.empty()) {
    sets.push_back({{"label", "left out of the fit"},
                    {"data", flagged},
                    {"pointRadius", 5},
                    {"pointStyle", "crossRot"},
                    {"borderColor", "bad"},
                    {"backgroundColor", "bad"}});
  }
  return chart(
      {{"type", "scatter"},
       {"data", {{"datasets", sets}}},
       {"options",
        {{"scales",
          {{"x", axis("taped range, m")},
           {"y", axis("predicted without the mark, % of range")}}}}}},
      "Leave-one-out error of each mark",
      "What the curve says about each mark when it is fitted without it, against the tape.");
}

std::string parameters_table(const YAML::Node& root) {
  std::vector<std::vector<std::string>> rows = {
      {"parameter", "fitted", "+- 1 sd", "known before", "+- 1 sd", "unit"}};
  for (const auto& p : root["parameters"]) {
    const double factor = p["factor"].as<double>();
    const double sd = p["sd"].as<double>() * factor;
    const int digits =
        std::clamp(static_cast<int>(std::ceil(1.0 - std::log10(std::max(sd, 1e-6)))), 0, 6);
    const bool known = p["prior"].as<std::string>() == "known";
    const auto shown = [&](const char* key) {
      return fmt::format("{:.{}f}", p[key].as<double>() * factor, digits);
    };
    rows.push_back({p["shown"].as<std::string>(),
                    shown("value"),
                    fmt::format("{:.{}f}", sd, digits),
                    known ? shown("prior_value") : "",
                    known ? shown("prior_sd") : "",
                    p["unit"].as<std::string>()});
  }
  return table(
      rows,
      "What was fitted, beside what was known before (drawing and usual mounting tolerances).");
}

std::string candidates_table(const YAML::Node& root, const std::string& chosen) {
  std::vector<std::vector<std::string>> rows = {
      {"model", "parameters", "RMS, px", "left out, % of range", ""}};
  std::string refusals;
  for (const auto& c : root["candidates"]) {
    const auto model = c["model"].as<std::string>();
    const auto refused = c["refused"].as<std::string>();
    if (!refused.empty()) {
      refusals += fmt::format("{}{}: {}", refusals.empty() ? "Not used: " : "; ", model, refused);
      continue;
    }
    rows.push_back({model,
                    std::to_string(c["parameters"].as<int>()),
                    fmt::format("{:.2f}", c["rms_px"].as<double>()),
                    fmt::format("{:.2f}", 100.0 * c["leave_one_out_relative"].as<double>()),
                    model == chosen ? "chosen" : ""});
  }
  std::string html = table(rows,
                           "The models that were tried. A drawing is kept unless another predicts "
                           "left-out marks clearly better; without one the best is taken, near "
                           "ties by fewer parameters.");
  if (!refusals.empty()) html += paragraph(refusals + ".");
  return html;
}

}  // namespace

std::optional<Section> range_section(const Workspace& workspace) {
  const std::filesystem::path file = workspace.results() / "range.yaml";
  std::error_code error;
  if (!std::filesystem::is_regular_file(file, error)) return std::nullopt;
  const auto curve = range::read_range_curve(file);
  const YAML::Node root = YAML::Load(read_file(file));
  Section section;
  section.id = "range";
  section.title = "Range";
  const int marks = root["marks"].as<int>();
  const auto model = root["model"].as<std::string>();
  const double reach = root["reach_m"].as<double>();
  section.lead =
      marks > 0
          ? fmt::format(
                "{} on {} marks; {:.1f} % of range when each mark is left out; reach {:.2f} m.",
                model,
                marks,
                100.0 * root["leave_one_out_relative"].as<double>(),
                reach)
          : fmt::format("{} from the drawing alone, no marks; reach {:.2f} m.", model, reach);
  for (const auto& f : root["flagged"]) {
    const auto index = f["mark"].as<std::size_t>();
    if (index >= workspace.marks.size()) continue;
    const auto guess = f["guess"].as<std::string>();
    section.html +=
        paragraph(fmt::format("marks.csv:{} does not fit the others (tape {:+.3f} m off, {:.1f} "
                              "standard deviations) and was left out{}{}.",
                              workspace.marks[index].line,
                              f["range_error_m"].as<double>(),
                              f["studentised"].as<double>(),
                              guess.empty() ? "" : ": ",
                              guess));
  }
  section.html += curve_chart(workspace, *curve, root);
  if (marks > 0) section.html += residual_chart(workspace, root);
  section.html += parameters_table(root);
  if (marks > 0) section.html += candidates_table(root, model);
  for (const auto& note : root["notes"]) section.html += paragraph(note.as<std::string>());
  return section;
}

}  // namespace rondel::app::report
