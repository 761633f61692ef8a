#pragma once

#include <yaml-cpp/yaml.h>

#include <array>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/problem.h"
#include "calib/venue/spec.h"

namespace rondel {

/// What a number may be. The ends themselves are allowed unless said otherwise.
struct Limits {
  double low = 0.0;
  double high = 0.0;
  bool above_low = false;  ///< `low` itself is not allowed
};
/// "must be above 0 and at most 2000", "must be from 0 to 1".
[[nodiscard]] std::string text_of(const Limits& limits);

/// How far a bare number may be off: one standard deviation, `absolute` + `relative` * |value|.
struct UsualTolerance {
  double absolute = 0.0;
  double relative = 0.0;
};

/// Reads one map of a YAML file strictly. Whatever is wrong is added to the file's problems with
/// its line, its full key, its value and what is allowed; reading goes on, so that all problems of
/// a file come together. A value that is missing or wrong is an empty optional.
class YamlMap {
 public:
  /// The map at the top of `text`. Problems name `file` and the line. What cannot be read as YAML
  /// at all, is empty or is no map gives a map without keys and one problem.
  YamlMap(std::string_view text, std::string file, std::vector<Problem>& problems);

  /// Every key must be one of `keys`; a near miss gets a 'did you mean'.
  void allow(std::initializer_list<std::string_view> keys) const;
  /// The map's own keys in the file's order, each once.
  [[nodiscard]] std::vector<std::string> keys() const;
  [[nodiscard]] bool has(std::string_view key) const;
  /// Adds a problem when `key` is missing; `what_to_do` ends the sentence.
  [[nodiscard]] bool require(std::string_view key, std::string_view what_to_do) const;

  [[nodiscard]] std::optional<double> number(std::string_view key, const Limits& limits) const;
  [[nodiscard]] std::optional<int> whole(std::string_view key, int low, int high) const;
  [[nodiscard]] std::optional<bool> yes_or_no(std::string_view key) const;
  [[nodiscard]] std::optional<std::string> text(std::string_view key) const;
  /// Index into `words`.
  [[nodiscard]] std::optional<std::size_t> word(
      std::string_view key, std::initializer_list<std::string_view> words) const;
  /// A bare number with its usual tolerance, or {value:, tolerance:}.
  [[nodiscard]] std::optional<Uncertain> uncertain(std::string_view key,
                                                   const Limits& limits,
                                                   UsualTolerance usual) const;
  /// [low, high] with low <= high.
  [[nodiscard]] std::optional<std::array<double, 2>> pair(std::string_view key,
                                                          const Limits& limits) const;
  /// [[a, b], ...], at least one.
  [[nodiscard]] std::optional<std::vector<std::pair<double, double>>> points(
      std::string_view key, const Limits& first, const Limits& second) const;
  /// The map at `key`.
  [[nodiscard]] std::optional<YamlMap> map(std::string_view key) const;

  /// Adds a problem about `key` at its line: "key = value: what", or "key: what" where it holds no
  /// single value or is not there.
  void complain(std::string_view key, std::string_view what) const;
  /// Adds a problem about the map itself.
  void complain(std::string_view what) const;
  [[nodiscard]] std::string path_of(std::string_view key) const;

 private:
  YamlMap(const YamlMap& parent, const YAML::Node& node, std::string path);
  [[nodiscard]] YAML::Node at(std::string_view key) const;
  /// The line of the key that `value` belongs to; a missing value has no line of its own.
  [[nodiscard]] int line_of_key(const YAML::Node& value) const;
  void add(const YAML::Node& node, const std::string& path, std::string_view what) const;
  [[nodiscard]] std::optional<std::string> scalar(const YAML::Node& node,
                                                  const std::string& path,
                                                  std::string_view must_be) const;
  [[nodiscard]] std::optional<double> number_of(const YAML::Node& node,
                                                const std::string& path,
                                                const Limits& limits) const;
  void check_keys_once() const;

  YAML::Node node_;
  std::string path_;  ///< "" at the top, "objects.buoy" below
  std::string file_;
  std::vector<Problem>* problems_;
};

}  // namespace rondel
