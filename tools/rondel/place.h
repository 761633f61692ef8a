#pragma once

#include <filesystem>
#include <functional>
#include <istream>
#include <memory>
#include <opencv2/core.hpp>
#include <string>
#include <string_view>

#include "calib/range/range_curve.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

/// What `at` and `where` need of a venue.
struct PlaceContext {
  std::shared_ptr<const range::RangeCurve> curve;
  cv::Mat mask;  ///< empty: none yet, everything counts as visible
  double height_m = 0.0;

  /// Whether the mask lets this pixel see.
  [[nodiscard]] bool visible(ImagePoint at) const;
};

/// Height from --object or --height-mm.
[[nodiscard]] PlaceContext place_context(const Arguments& arguments);

/// The positional word at `index` as a number; InputError naming it as `name`.
[[nodiscard]] double number_word(const Arguments& arguments, std::size_t index, const char* name);

/// Reads lines of two numbers, after a header that names `columns`, from FILE or standard input
/// ('-'), and writes `header` and what `answer` appends for each to standard output, in blocks.
/// InputError naming the line. Returns how many there were.
std::size_t stream_points(const std::string& source,
                          std::string_view columns,
                          std::string_view header,
                          const std::function<void(double, double, std::string&)>& answer);

}  // namespace rondel::app
