#pragma once

#include <nlohmann/json.hpp>
#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "tools/rondel/workspace.h"

namespace rondel::app::report {

/// One step's part of results/report.html.
struct Section {
  std::string id;     ///< anchor, "range"
  std::string title;  ///< "Range"
  std::string lead;   ///< one plain-text sentence with the step's main number
  std::string html;   ///< body: made with the helpers below
};

/// HTML for plain text, escaped.
[[nodiscard]] std::string text(std::string_view plain);
/// A paragraph of plain text.
[[nodiscard]] std::string paragraph(std::string_view plain);
/// A figure with the picture embedded (PNG), alternative text and caption (both plain text).
[[nodiscard]] std::string picture(const cv::Mat& image,
                                  std::string_view alt,
                                  std::string_view caption);
/// A figure with an inline SVG drawing. Give it a viewBox and no size; it may use the page's
/// classes (rule, faint, ink, good, bad, series-1 .. series-6, limit; fill-... of the same names;
/// label).
[[nodiscard]] std::string drawing(std::string_view svg,
                                  std::string_view alt,
                                  std::string_view caption);
/// A figure with a Chart.js chart; `config` is its plain JSON configuration (no functions). Colours
/// named "series-1".."series-6", "band", "limit", "good", "bad", "ink", "faint" in it follow the
/// page's scheme. Where the axes must keep their proportion, set options.aspectRatio; otherwise the
/// page chooses the height.
[[nodiscard]] std::string chart(const nlohmann::ordered_json& config,
                                std::string_view alt,
                                std::string_view caption);
/// A table; cells are plain text, the first row is the head; numbers are right-aligned.
[[nodiscard]] std::string table(const std::vector<std::vector<std::string>>& rows,
                                std::string_view caption);

// Each step's section, in its own file beside this one; reads results/ of the workspace. Empty
// optional where the step has not been run.
std::optional<Section> centre_section(const Workspace& workspace);
std::optional<Section> mask_section(const Workspace& workspace);
std::optional<Section> range_section(const Workspace& workspace);
std::optional<Section> colours_section(const Workspace& workspace);
std::optional<Section> tables_section(const Workspace& workspace);
std::optional<Section> check_section(const Workspace& workspace);

}  // namespace rondel::app::report
