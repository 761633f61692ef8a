#pragma once

#include <string_view>

namespace rondel::app::report {

// The files beside this header, as built into the program.
[[nodiscard]] std::string_view asset_page_css();
[[nodiscard]] std::string_view asset_page_js();
/// Chart.js, minified, from Debian's package libjs-chart.js.
[[nodiscard]] std::string_view asset_chart_min_js();

}  // namespace rondel::app::report
