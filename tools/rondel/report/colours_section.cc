#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <map>
#include <nlohmann/json.hpp>
#include <opencv2/imgproc.hpp>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/class_table.h"
#include "calib/colour/sets_file.h"
#include "tools/rondel/report/section.h"
#include "tools/rondel/results.h"
#include "vision/frames/load.h"
#include "vision/mask/mask_file.h"

namespace rondel::app::report {
namespace {

using nlohmann::ordered_json;

constexpr double kCell = 8.0;  // of a plane's cell on the drawing

/// Densities as squares: surroundings below, the object above.
std::string densities(const ordered_json& plane, double height) {
  std::string svg;
  for (const auto& [layer, style] :
       {std::pair{"surroundings", "fill-ink"}, {"object", "fill-series-2"}}) {
    const ordered_json& rows = plane.at(layer);
    for (std::size_t y = 0; y < rows.size(); ++y) {
      for (std::size_t x = 0; x < rows[y].size(); ++x) {
        const double value = rows[y][x].get<double>();
        if (value <= 0.0) continue;
        svg += fmt::format(
            "<rect class=\"{}\" x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\" opacity=\"{:.2f}\"/>",
            style,
            static_cast<double>(x) * kCell,
            height - static_cast<double>(y + 1) * kCell,
            kCell,
            kCell,
            layer == std::string_view("object") ? 0.25 + 0.75 * value : 0.1 + 0.5 * value);
      }
    }
  }
  return svg;
}

std::string outline(double x0, double x1, double y0, double y1, double height) {
  return fmt::format(
      "<rect class=\"limit\" fill=\"none\" stroke-width=\"2\" x=\"{:.1f}\" y=\"{:.1f}\" "
      "width=\"{:.1f}\" height=\"{:.1f}\"/>",
      x0,
      height - y1,
      x1 - x0,
      y1 - y0);
}

std::string plane_drawing(const ordered_json& plane,
                          const colour::ThresholdSet& set,
                          bool hue,
                          const std::string& object) {
  const ordered_json& rows = plane.at("object");
  const double width = kCell * static_cast<double>(rows[0].size());
  const double height = kCell * static_cast<double>(rows.size());
  const double per_x = kCell / (hue ? 4.0 : 8.0);
  const double per_y = kCell / 8.0;
  std::string svg = fmt::format("<svg viewBox=\"-2 -2 {} {}\">", width + 4.0, height + 22.0);
  svg += fmt::format(
      "<rect class=\"faint\" fill=\"none\" x=\"0\" y=\"0\" width=\"{}\" height=\"{}\"/>",
      width,
      height);
  svg += densities(plane, height);
  for (const colour::HsvBox& box : set.boxes) {
    const auto& y = hue ? box.s : box.v;
    const double y0 = per_y * y[0];
    const double y1 = per_y * (y[1] + 1);
    if (!hue) {
      svg += outline(per_x * box.s[0], per_x * (box.s[1] + 1), y0, y1, height);
    } else if (box.h.from <= box.h.to) {
      svg += outline(per_x * box.h.from, per_x * (box.h.to + 1), y0, y1, height);
    } else {
      svg += outline(per_x * box.h.from, width, y0, y1, height);
      svg += outline(0.0, per_x * (box.h.to + 1), y0, y1, height);
    }
  }
  svg +=
      fmt::format("<text class=\"label\" font-size=\"{:.0f}\" x=\"0\" y=\"{}\">{}</text></svg>",
                  hue ? 11.0 : 8.0,  // the planes are drawn equally wide on the page
                  height + 13.0,
                  hue ? "hue 0 to 179, saturation upwards" : "saturation 0 to 255, value upwards");
  return drawing(svg,
                 fmt::format("{} plane of {} with its boxes",
                             hue ? "Hue and saturation" : "Saturation and value",
                             object),
                 hue ? "Where its pixels lie (colour), where those of the surroundings do (grey), "
                       "and the boxes."
                     : "The same, saturation and value.");
}

std::string envelope_drawing(const ordered_json& map, double wanted, const std::string& object) {
  const ordered_json& stops = map.at("stops");
  const ordered_json& kelvin = map.at("kelvin");
  constexpr double kWide = 26.0;
  constexpr double kHigh = 16.0;
  constexpr double kLeft = 60.0;
  const double height = kHigh * static_cast<double>(kelvin.size());
  std::string svg = fmt::format("<svg viewBox=\"0 0 {} {}\">",
                                kLeft + kWide * static_cast<double>(stops.size()) + 4.0,
                                height + 20.0);
  for (std::size_t row = 0; row < kelvin.size(); ++row) {
    const double y = height - kHigh * static_cast<double>(row + 1);
    svg += fmt::format("<text class=\"label\" font-size=\"11\" x=\"0\" y=\"{}\">{:.0f} K</text>",
                       y + kHigh - 4.0,
                       kelvin[row].get<double>());
    for (std::size_t column = 0; column < stops.size(); ++column) {
      const double recall = map.at("recall")[row][column].get<double>();
      svg += fmt::format(
          "<rect class=\"{}\" opacity=\"{:.2f}\" x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\"/>",
          recall >= wanted ? "fill-good" : "fill-bad",
          recall >= wanted ? 0.85 : 0.85 * (1.0 - recall),
          kLeft + kWide * static_cast<double>(column),
          y,
          kWide - 1.0,
          kHigh - 1.0);
    }
  }
  for (std::size_t column = 0; column < stops.size(); column += 2) {
    svg += fmt::format("<text class=\"label\" font-size=\"11\" x=\"{}\" y=\"{}\">{:+.0f}</text>",
                       kLeft + kWide * static_cast<double>(column),
                       height + 14.0,
                       stops[column].get<double>());
  }
  return drawing(
      svg + "</svg>",
      fmt::format("Where the set of {} holds, by exposure and colour temperature", object),
      fmt::format("Exposure in stops (across) and colour temperature (up) changed from "
                  "how the frames were made: green where at least {:.0f} % of the pixels "
                  "are kept in every light, redder where fewer are.",
                  100.0 * wanted));
}

/// A frame and, beside it, what the sets make of it.
cv::Mat before_and_after(const cv::Mat& bgr, const cv::Mat& mask, const colour::ClassTable& table) {
  static const cv::Scalar kColours[] = {
      {0, 140, 255}, {170, 190, 0}, {200, 60, 160}, {0, 210, 240}, {80, 80, 230}, {120, 200, 80}};
  cv::Mat after;
  cv::cvtColor(bgr, after, cv::COLOR_BGR2GRAY);
  cv::cvtColor(after * 0.45, after, cv::COLOR_GRAY2BGR);
  for (int v = 0; v < bgr.rows; ++v) {
    for (int u = 0; u < bgr.cols; ++u) {
      const auto& p = bgr.at<cv::Vec3b>(v, u);
      const int cls = mask.at<unsigned char>(v, u) == 0 ? 0 : table.at(p[2], p[1], p[0]);
      if (cls == 0) continue;
      const cv::Scalar& colour = kColours[static_cast<std::size_t>(cls - 1) % std::size(kColours)];
      after.at<cv::Vec3b>(v, u) = cv::Vec3b(cv::saturate_cast<unsigned char>(colour[0]),
                                            cv::saturate_cast<unsigned char>(colour[1]),
                                            cv::saturate_cast<unsigned char>(colour[2]));
    }
  }
  cv::Mat both;
  cv::hconcat(bgr, after, both);
  const int scale = std::max(1, cvRound(480.0 / bgr.cols));
  cv::resize(both, both, {}, scale, scale, cv::INTER_NEAREST);
  return both;
}

std::string strips(const Workspace& workspace, const std::vector<colour::ThresholdSet>& sets) {
  std::string html;
  // The class of an object is its place in venue.yaml.
  std::vector<colour::ThresholdSet> ordered;
  for (const ObjectSpec& object : workspace.venue.objects) {
    const auto found = std::find_if(sets.begin(), sets.end(), [&](const colour::ThresholdSet& set) {
      return set.object == object.name;
    });
    ordered.push_back(found == sets.end() ? colour::ThresholdSet{object.name, {}} : *found);
  }
  const colour::ClassTable table = colour::make_class_table(ordered);
  const CameraSpec& camera = workspace.rig.camera;
  std::error_code error;
  const std::filesystem::path mask_path = workspace.results() / "mask.png";
  const cv::Mat mask = std::filesystem::is_regular_file(mask_path, error)
                           ? vision::read_mask(mask_path, camera)
                           : cv::Mat(camera.height_px, camera.width_px, CV_8U, cv::Scalar(255));
  std::map<std::string, const FrameFile*> first;
  for (const FrameFile& frame : workspace.frames) first.try_emplace(frame.light, &frame);
  for (const auto& [light, frame] : first) {
    cv::Mat bgr;
    try {
      bgr = vision::load_image(frame->path, camera);
    } catch (const InputError&) {
      continue;  // the step that needs the frame says what is wrong with it
    }
    html += picture(before_and_after(bgr, mask, table),
                    fmt::format("A frame and what the sets find in it, {}", frame->image),
                    fmt::format("{}: as captured, and the pixels each set takes.", frame->image));
  }
  return html;
}

std::string percent(double share) { return fmt::format("{:.1f} %", 100.0 * share); }

std::string span_text(const std::optional<std::array<double, 2>>& span, bool stops) {
  if (!span) return "-";
  return stops ? fmt::format("{:+.1f} to {:+.1f}", (*span)[0], (*span)[1])
               : fmt::format("{:.0f} to {:.0f} K", (*span)[0], (*span)[1]);
}

}  // namespace

std::optional<Section> colours_section(const Workspace& workspace) {
  const std::filesystem::path file = result_of(workspace, "colours");
  std::error_code error;
  if (!std::filesystem::is_regular_file(file, error)) return std::nullopt;
  const std::vector<colour::ChosenSet> chosen = colour::read_chosen_sets(file);
  ordered_json details;
  const std::filesystem::path details_file = workspace.results() / "colours.json";
  if (std::filesystem::is_regular_file(details_file, error)) {
    details = ordered_json::parse(read_file(details_file), nullptr, false);
  }
  Section section;
  section.id = "colours";
  section.title = "Colours";
  const auto worst = std::min_element(
      chosen.begin(), chosen.end(), [](const colour::ChosenSet& a, const colour::ChosenSet& b) {
        return a.score < b.score;
      });
  if (worst != chosen.end()) {
    section.lead = fmt::format(
        "The set that loses most is that of {}: in its worst light it keeps {} of its pixels.",
        worst->set.object,
        percent(worst->score));
  }
  std::vector<std::vector<std::string>> rows = {{"Object",
                                                 "Boxes",
                                                 "Worst light",
                                                 "Under",
                                                 "Keeps",
                                                 "No box on the grid keeps more than",
                                                 "False",
                                                 "Holds, stops",
                                                 "Holds, light"}};
  std::vector<colour::ThresholdSet> sets;
  for (const colour::ChosenSet& one : chosen) {
    sets.push_back(one.set);
    rows.push_back({one.set.object,
                    std::to_string(one.set.boxes.size()),
                    one.worst_light.empty() ? "(unnamed)" : one.worst_light,
                    one.worst_change,
                    percent(one.score),
                    percent(one.bound),
                    fmt::format("{:.1e}", one.false_positive_rate),
                    span_text(one.envelope.stops, true),
                    span_text(one.envelope.kelvin, false)});
  }
  section.html += table(
      rows,
      "Thresholds, judged in every light under every change of light that venue.yaml expects");
  for (const colour::ChosenSet& one : chosen) {
    const std::string& name = one.set.object;
    if (!details.is_object() || !details.contains("pictures") ||
        !details["pictures"].contains(name)) {
      continue;
    }
    const ordered_json& found = details["objects"][name];
    section.html += "<h3>" + text(name) + "</h3>\n";
    for (const ordered_json& collision : found["collisions"]) {
      section.html += paragraph(
          fmt::format("In {} ({}) it looks like {} in {} ({}): {} of that has the same colours.",
                      collision["light"].get<std::string>(),
                      collision["change"].get<std::string>(),
                      collision["with"].get<std::string>(),
                      collision["with_light"].get<std::string>(),
                      collision["with_change"].get<std::string>(),
                      percent(collision["share"].get<double>())));
    }
    for (const ordered_json& advice : found["advice"]) {
      section.html += paragraph("What would help: " + advice.get<std::string>() + ".");
    }
    const ordered_json& pictures = details["pictures"][name];
    section.html += plane_drawing(pictures["hs"], one.set, true, name);
    section.html += plane_drawing(pictures["sv"], one.set, false, name);
    section.html +=
        envelope_drawing(pictures["envelope_map"], workspace.venue.tolerance.recall, name);
  }
  section.html += strips(workspace, sets);
  return section;
}

}  // namespace rondel::app::report
