#include "tools/rondel/place.h"

#include <fmt/format.h>

#include <algorithm>
#include <charconv>
#include <cmath>
#include <cstdio>
#include <fstream>
#include <iostream>
#include <thread>
#include <utility>
#include <vector>

#include "calib/base/problem.h"
#include "calib/range/curve_file.h"
#include "vision/mask/mask_file.h"

namespace rondel::app {
namespace {

/// Rows that are read, worked and written together.
constexpr std::size_t kBlock = 65536;

std::string_view trimmed(std::string_view text) {
  while (!text.empty() && (text.front() == ' ' || text.front() == '\t')) text.remove_prefix(1);
  while (!text.empty() && (text.back() == ' ' || text.back() == '\t' || text.back() == '\r')) {
    text.remove_suffix(1);
  }
  return text;
}

std::optional<double> number_in(std::string_view text) {
  text = trimmed(text);
  if (!text.empty() && text.front() == '+') text.remove_prefix(1);
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc() || end != text.data() + text.size() || !std::isfinite(value)) {
    return std::nullopt;
  }
  return value;
}

void work_block(const std::vector<std::pair<double, double>>& points,
                const std::function<void(double, double, std::string&)>& answer) {
  const std::size_t workers =
      points.size() < 256 ? 1 : std::max(1U, std::thread::hardware_concurrency());
  std::vector<std::string> texts(workers);
  std::vector<std::thread> threads;
  for (std::size_t w = 0; w < workers; ++w) {
    threads.emplace_back([&, w] {
      const std::size_t from = points.size() * w / workers;
      const std::size_t to = points.size() * (w + 1) / workers;
      for (std::size_t i = from; i < to; ++i) answer(points[i].first, points[i].second, texts[w]);
    });
  }
  for (std::thread& thread : threads) thread.join();
  for (const std::string& text : texts) std::fwrite(text.data(), 1, text.size(), stdout);
}

}  // namespace

bool PlaceContext::visible(ImagePoint at) const {
  if (mask.empty()) return true;
  const auto u = static_cast<int>(std::lround(at.u_px));
  const auto v = static_cast<int>(std::lround(at.v_px));
  return u >= 0 && v >= 0 && u < mask.cols && v < mask.rows && mask.at<unsigned char>(v, u) != 0;
}

PlaceContext place_context(const Arguments& arguments) {
  const Workspace workspace = open_workspace(arguments.words.at(0));
  PlaceContext context;
  context.curve = range::read_range_curve(workspace.results() / "range.yaml");
  const std::filesystem::path mask = workspace.results() / "mask.png";
  std::error_code error;
  if (std::filesystem::is_regular_file(mask, error)) {
    context.mask = vision::read_mask(mask, workspace.rig.camera);
  }
  if (arguments.has("--object") && arguments.has("--height-mm")) {
    throw InputError("--height-mm", "give either this or --object, not both");
  }
  if (const auto name = arguments.value("--object")) {
    const ObjectSpec* object = workspace.venue.find_object(*name);
    if (object == nullptr) {
      std::vector<std::string> names;
      for (const ObjectSpec& o : workspace.venue.objects) names.push_back(o.name);
      throw InputError(
          "--object",
          fmt::format("'{}' is none of venue.yaml's objects: {}", *name, fmt::join(names, ", ")));
    }
    context.height_m = object->seen_height_m();
  } else if (const auto height = arguments.number("--height-mm")) {
    if (*height < 0.0)
      throw InputError("--height-mm", fmt::format("{} must be 0 or more", *height));
    context.height_m = *height * 1e-3;
  }
  return context;
}

double number_word(const Arguments& arguments, std::size_t index, const char* name) {
  const std::string& word = arguments.words.at(index);
  const auto number = number_in(word);
  if (!number) throw InputError(name, fmt::format("'{}' is not a number", word));
  return *number;
}

std::size_t stream_points(const std::string& source,
                          std::string_view columns,
                          std::string_view header,
                          const std::function<void(double, double, std::string&)>& answer) {
  std::ifstream file;
  const bool standard = source == "-";
  if (!standard) {
    file.open(source);
    if (!file) throw InputError(source, "cannot be read; give a CSV file, or - for standard input");
  }
  std::istream& in = standard ? std::cin : file;
  const std::string name = standard ? "standard input" : source;
  std::string line;
  std::vector<std::pair<double, double>> points;
  points.reserve(kBlock);
  std::size_t count = 0;
  bool headed = false;
  const auto flush = [&] {
    if (!headed) {
      std::fwrite(header.data(), 1, header.size(), stdout);
      std::fputc('\n', stdout);
      headed = true;
    }
    work_block(points, answer);
    count += points.size();
    points.clear();
  };
  for (int number = 1; std::getline(in, line); ++number) {
    std::string_view text = trimmed(line);
    if (number == 1 && text.substr(0, 3) == "\xEF\xBB\xBF") text.remove_prefix(3);
    if (text.empty() || (number == 1 && text == columns)) continue;
    const std::size_t comma = text.find(',');
    const auto first = number_in(text.substr(0, comma));
    const auto second =
        number_in(comma == std::string_view::npos ? std::string_view() : text.substr(comma + 1));
    if (!first || !second) {
      throw InputError(
          fmt::format("{}:{}", name, number),
          fmt::format("'{}' is not '{}'; give two numbers with a comma", text, columns));
    }
    points.emplace_back(*first, *second);
    if (points.size() == kBlock) flush();
  }
  flush();
  return count;
}

}  // namespace rondel::app
