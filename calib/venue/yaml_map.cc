#include "calib/venue/yaml_map.h"

#include <fmt/format.h>
#include <yaml-cpp/eventhandler.h>

#include <algorithm>
#include <cmath>
#include <set>
#include <sstream>
#include <utility>

#include "calib/base/file.h"
#include "calib/venue/words.h"

namespace rondel {
namespace {

constexpr std::size_t kLargestFile = 4U << 20U;  ///< bytes; a hand-written file is far below

int line_of(const YAML::Node& node) { return std::max(0, node.Mark().line) + 1; }

const char* kind_of(const YAML::Node& node) {
  switch (node.Type()) {
    case YAML::NodeType::Map:
      return "a map of keys";
    case YAML::NodeType::Sequence:
      return "a list";
    case YAML::NodeType::Scalar:
      return "a single value";
    default:
      return "nothing";
  }
}

bool in_quotes(const YAML::Node& node) { return node.Tag() == "!"; }

/// Where a text's documents begin.
class DocumentStarts : public YAML::EventHandler {
 public:
  std::vector<int> lines;
  void OnDocumentStart(const YAML::Mark& mark) override {
    lines.push_back(std::max(0, mark.line) + 1);
  }
  void OnDocumentEnd() override {}
  void OnNull(const YAML::Mark& /*mark*/, YAML::anchor_t /*anchor*/) override {}
  void OnAlias(const YAML::Mark& /*mark*/, YAML::anchor_t /*anchor*/) override {}
  void OnScalar(const YAML::Mark& /*mark*/,
                const std::string& /*tag*/,
                YAML::anchor_t /*anchor*/,
                const std::string& /*value*/) override {}
  void OnSequenceStart(const YAML::Mark& /*mark*/,
                       const std::string& /*tag*/,
                       YAML::anchor_t /*anchor*/,
                       YAML::EmitterStyle::value /*style*/) override {}
  void OnSequenceEnd() override {}
  void OnMapStart(const YAML::Mark& /*mark*/,
                  const std::string& /*tag*/,
                  YAML::anchor_t /*anchor*/,
                  YAML::EmitterStyle::value /*style*/) override {}
  void OnMapEnd() override {}
};

/// The line at which something follows the first document; 0 when nothing does. (Asking for all
/// documents at once never ends where a stray bracket stands between them: the library gives one
/// empty document after the other.)
int line_of_second_document(std::string_view text) {
  std::istringstream in{std::string(text)};
  YAML::Parser parser(in);
  DocumentStarts starts;
  for (int i = 0; i < 2 && parser.HandleNextDocument(starts); ++i) {
  }
  return starts.lines.size() > 1 ? starts.lines[1] : 0;
}

/// The map that `text` holds, or a null node and a problem.
YAML::Node parsed(std::string_view text, const std::string& file, std::vector<Problem>& problems) {
  if (text.size() > kLargestFile) {
    problems.push_back({file, "is larger than 4 MiB; this cannot be a file written by hand"});
    return {};
  }
  if (text.find('\0') != std::string_view::npos) {
    problems.push_back({file, "holds zero bytes; save it as plain text (UTF-8)"});
    return {};
  }
  try {
    const YAML::Node document = YAML::Load(std::string(text));
    if (document.IsNull()) {
      problems.push_back({file, "is empty; 'rondel new' shows what it may hold"});
      return {};
    }
    if (const int line = line_of_second_document(text); line > 0) {
      problems.push_back({fmt::format("{}:{}", file, line),
                          "what begins here belongs to nothing above; check brackets and "
                          "indentation, and leave no line '---'"});
      return {};
    }
    if (!document.IsMap()) {
      problems.push_back(
          {fmt::format("{}:{}", file, line_of(document)),
           fmt::format("the file holds {}; it must hold 'key: value' lines", kind_of(document))});
      return {};
    }
    return document;
  } catch (const YAML::Exception& error) {
    problems.push_back({fmt::format("{}:{}", file, std::max(0, error.mark.line) + 1),
                        fmt::format("cannot be read as YAML ({}); check colons, brackets and "
                                    "indentation (spaces, no tabs)",
                                    error.msg)});
  }
  return {};
}

}  // namespace

std::string text_of(const Limits& limits) {
  if (limits.above_low) {
    return fmt::format("must be above {:.15g} and at most {:.15g}", limits.low, limits.high);
  }
  return fmt::format("must be from {:.15g} to {:.15g}", limits.low, limits.high);
}

YamlMap::YamlMap(std::string_view text, std::string file, std::vector<Problem>& problems)
    : node_(parsed(text, file, problems)), file_(std::move(file)), problems_(&problems) {
  check_keys_once();
}

YamlMap::YamlMap(const YamlMap& parent, const YAML::Node& node, std::string path)
    : node_(node), path_(std::move(path)), file_(parent.file_), problems_(parent.problems_) {
  check_keys_once();
}

void YamlMap::check_keys_once() const {
  std::set<std::string> seen;
  for (const auto& entry : node_) {
    if (!entry.first.IsScalar()) {
      add(entry.first, path_, "a key is no word; write 'key: value'");
    } else if (!seen.insert(entry.first.Scalar()).second) {
      problems_->push_back(
          {fmt::format("{}:{}", file_, line_of(entry.first)),
           fmt::format("{}: the key is given twice; keep one", path_of(entry.first.Scalar()))});
    }
  }
}

std::string YamlMap::path_of(std::string_view key) const {
  return path_.empty() ? quotable(key) : fmt::format("{}.{}", path_, quotable(key));
}

YAML::Node YamlMap::at(std::string_view key) const {
  for (const auto& entry : node_) {
    if (entry.first.IsScalar() && entry.first.Scalar() == key) return entry.second;
  }
  return YAML::Node(YAML::NodeType::Undefined);
}

int YamlMap::line_of_key(const YAML::Node& value) const {
  for (const auto& entry : node_) {
    if (entry.second.is(value)) return line_of(entry.first);
  }
  return line_of(value);
}

void YamlMap::add(const YAML::Node& node, const std::string& path, std::string_view what) const {
  const bool single = node.IsDefined() && node.IsScalar();
  problems_->push_back({fmt::format("{}:{}", file_, line_of(node)),
                        single ? fmt::format("{} = {}: {}", path, quotable(node.Scalar()), what)
                               : fmt::format("{}: {}", path, what)});
}

void YamlMap::allow(std::initializer_list<std::string_view> keys) const {
  const std::vector<std::string> allowed(keys.begin(), keys.end());
  for (const auto& entry : node_) {
    if (!entry.first.IsScalar()) continue;
    const std::string& key = entry.first.Scalar();
    if (std::find(allowed.begin(), allowed.end(), key) != allowed.end()) continue;
    problems_->push_back({fmt::format("{}:{}", file_, line_of(entry.first)),
                          fmt::format("{}: unknown key{}", path_of(key), hint_for(key, allowed))});
  }
}

std::vector<std::string> YamlMap::keys() const {
  std::vector<std::string> keys;
  for (const auto& entry : node_) {
    if (!entry.first.IsScalar()) continue;
    const std::string& key = entry.first.Scalar();
    if (std::find(keys.begin(), keys.end(), key) == keys.end()) keys.push_back(key);
  }
  return keys;
}

bool YamlMap::has(std::string_view key) const {
  const std::vector<std::string> all = keys();
  return std::find(all.begin(), all.end(), key) != all.end();
}

bool YamlMap::require(std::string_view key, std::string_view what_to_do) const {
  if (has(key)) return true;
  // An unreadable file has its problem already; its missing keys are no news.
  if (node_.IsMap()) {
    problems_->push_back({fmt::format("{}:{}", file_, line_of(node_)),
                          fmt::format("{}: is missing; {}", path_of(key), what_to_do)});
  }
  return false;
}

std::optional<std::string> YamlMap::scalar(const YAML::Node& node,
                                           const std::string& path,
                                           std::string_view must_be) const {
  if (!node.IsDefined()) return std::nullopt;
  if (node.IsNull()) {
    problems_->push_back(
        {fmt::format("{}:{}", file_, line_of_key(node)),
         fmt::format("{}: has no value; it {}, or remove the line", path, must_be)});
    return std::nullopt;
  }
  if (!node.IsScalar()) {
    add(node, path, fmt::format("is {}; it {}", kind_of(node), must_be));
    return std::nullopt;
  }
  return node.Scalar();
}

std::optional<double> YamlMap::number_of(const YAML::Node& node,
                                         const std::string& path,
                                         const Limits& limits) const {
  const auto written = scalar(node, path, text_of(limits));
  if (!written) return std::nullopt;
  if (in_quotes(node)) {
    add(node, path, "is text in quotes; write the number without them");
    return std::nullopt;
  }
  const auto value = parse_number(*written);
  if (!value) {
    add(node, path, fmt::format("{}; it {}", why_no_number(*written), text_of(limits)));
    return std::nullopt;
  }
  const bool low_enough = limits.above_low ? *value > limits.low : *value >= limits.low;
  if (!low_enough || !(*value <= limits.high)) {
    add(node, path, text_of(limits));
    return std::nullopt;
  }
  return value;
}

std::optional<double> YamlMap::number(std::string_view key, const Limits& limits) const {
  return number_of(at(key), path_of(key), limits);
}

std::optional<int> YamlMap::whole(std::string_view key, int low, int high) const {
  const YAML::Node node = at(key);
  const Limits limits{static_cast<double>(low), static_cast<double>(high), false};
  const auto value = number_of(node, path_of(key), limits);
  if (!value) return std::nullopt;
  if (std::floor(*value) != *value) {
    add(node, path_of(key), fmt::format("must be a whole number from {} to {}", low, high));
    return std::nullopt;
  }
  return static_cast<int>(*value);
}

std::optional<bool> YamlMap::yes_or_no(std::string_view key) const {
  const YAML::Node node = at(key);
  const auto written = scalar(node, path_of(key), "must be true or false");
  if (!written) return std::nullopt;
  if (!in_quotes(node)) {
    if (*written == "true") return true;
    if (*written == "false") return false;
  }
  add(node, path_of(key), "must be true or false");
  return std::nullopt;
}

std::optional<std::string> YamlMap::text(std::string_view key) const {
  const YAML::Node node = at(key);
  auto written = scalar(node, path_of(key), "must be text");
  if (!written) return std::nullopt;
  if (quotable(*written) != *written) {
    add(node, path_of(key), "must be one line of at most 60 characters of UTF-8 text");
    return std::nullopt;
  }
  if (written->empty()) {
    add(node, path_of(key), "must not be empty");
    return std::nullopt;
  }
  return written;
}

std::optional<std::size_t> YamlMap::word(std::string_view key,
                                         std::initializer_list<std::string_view> words) const {
  const std::vector<std::string> allowed(words.begin(), words.end());
  const YAML::Node node = at(key);
  const auto written =
      scalar(node, path_of(key), fmt::format("must be one of: {}", joined(allowed)));
  if (!written) return std::nullopt;
  const auto found = std::find(allowed.begin(), allowed.end(), *written);
  if (found != allowed.end()) return static_cast<std::size_t>(found - allowed.begin());
  const auto meant = near_miss(*written, allowed);
  add(node,
      path_of(key),
      fmt::format("must be one of: {}{}",
                  joined(allowed),
                  meant ? fmt::format("; did you mean '{}'?", *meant) : ""));
  return std::nullopt;
}

std::optional<Uncertain> YamlMap::uncertain(std::string_view key,
                                            const Limits& limits,
                                            UsualTolerance usual) const {
  const YAML::Node node = at(key);
  if (!node.IsDefined()) return std::nullopt;
  if (!node.IsMap()) {
    const auto value = number_of(node, path_of(key), limits);
    if (!value) return std::nullopt;
    return Uncertain{*value, usual.absolute + usual.relative * std::abs(*value)};
  }
  const YamlMap both(*this, node, path_of(key));
  both.allow({"value", "tolerance"});
  if (!both.require("value", "write {value: ..., tolerance: ...} or the bare number")) {
    return std::nullopt;
  }
  const auto value = both.number("value", limits);
  const double widest = std::max(std::abs(limits.low), std::abs(limits.high));
  const auto tolerance = both.number("tolerance", {0.0, widest, false});
  if (!value || (both.has("tolerance") && !tolerance)) return std::nullopt;
  return Uncertain{*value, tolerance.value_or(usual.absolute + usual.relative * std::abs(*value))};
}

std::optional<std::array<double, 2>> YamlMap::pair(std::string_view key,
                                                   const Limits& limits) const {
  const YAML::Node node = at(key);
  if (!node.IsDefined()) return std::nullopt;
  if (!node.IsSequence() || node.size() != 2) {
    add(node, path_of(key), "must be a list of two numbers, [low, high]");
    return std::nullopt;
  }
  const auto low = number_of(node[0], path_of(key) + "[0]", limits);
  const auto high = number_of(node[1], path_of(key) + "[1]", limits);
  if (!low || !high) return std::nullopt;
  if (*low > *high) {
    add(node,
        path_of(key),
        fmt::format(
            "[{}, {}] goes downwards; write [low, high]", number_text(*low), number_text(*high)));
    return std::nullopt;
  }
  return std::array<double, 2>{*low, *high};
}

std::optional<std::vector<std::pair<double, double>>> YamlMap::points(std::string_view key,
                                                                      const Limits& first,
                                                                      const Limits& second) const {
  const YAML::Node node = at(key);
  if (!node.IsDefined()) return std::nullopt;
  if (!node.IsSequence() || node.size() == 0) {
    add(node, path_of(key), "must be a list of pairs, [[a, b], [a, b], ...]");
    return std::nullopt;
  }
  std::vector<std::pair<double, double>> points;
  for (std::size_t i = 0; i < node.size(); ++i) {
    const std::string path = fmt::format("{}[{}]", path_of(key), i);
    if (!node[i].IsSequence() || node[i].size() != 2) {
      add(node[i], path, "must be a pair of numbers, [a, b]");
      continue;
    }
    const auto a = number_of(node[i][0], path + "[0]", first);
    const auto b = number_of(node[i][1], path + "[1]", second);
    if (a && b) points.emplace_back(*a, *b);
  }
  if (points.size() != node.size()) return std::nullopt;
  return points;
}

std::optional<YamlMap> YamlMap::map(std::string_view key) const {
  const YAML::Node node = at(key);
  if (!node.IsDefined()) return std::nullopt;
  if (node.IsNull()) {
    problems_->push_back(
        {fmt::format("{}:{}", file_, line_of_key(node)),
         fmt::format("{}: has no value; write its keys below it, or remove the line",
                     path_of(key))});
    return std::nullopt;
  }
  if (!node.IsMap()) {
    add(node, path_of(key), "must hold keys, {key: value, ...}");
    return std::nullopt;
  }
  return YamlMap(*this, node, path_of(key));
}

void YamlMap::complain(std::string_view key, std::string_view what) const {
  const YAML::Node node = at(key);
  add(node.IsDefined() ? node : node_, path_of(key), what);
}

void YamlMap::complain(std::string_view what) const {
  add(node_, path_.empty() ? "the file" : path_, what);
}

}  // namespace rondel
