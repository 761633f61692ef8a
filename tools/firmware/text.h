#pragma once

#include <cstdint>
#include <span>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

namespace rondel::firmware {

/// `text` fit for a comment in any of the emitted languages: printable ASCII only, nothing that
/// ends or continues a comment, no trigraph; other bytes as <XX>.
[[nodiscard]] std::string for_comment(std::string_view text);

/// `text` as a double-quoted string of C, Python and YAML: printable ASCII, the rest as \ooo octal
/// (C, Python) or \xXX (YAML).
[[nodiscard]] std::string quoted(std::string_view text);
[[nodiscard]] std::string yaml_quoted(std::string_view text);

/// `prefix` as an identifier: letters, digits and '_', not beginning with a digit.
[[nodiscard]] std::string identifier(std::string_view prefix);
[[nodiscard]] std::string upper(std::string_view text);

/// `pattern` with every '@key@' replaced.
[[nodiscard]] std::string fill(std::string_view pattern,
                               const std::vector<std::pair<std::string, std::string>>& values);

/// "1, 2, 3" in indented lines of at most 96 characters.
template <class T>
[[nodiscard]] std::string number_lines(const std::vector<T>& values);

/// b'\x00...' of Python in lines: one literal in brackets.
[[nodiscard]] std::string python_bytes(std::span<const std::uint8_t> bytes);

template <class T>
std::string number_lines(const std::vector<T>& values) {
  std::string out;
  std::string line = "   ";
  for (std::size_t i = 0; i < values.size(); ++i) {
    std::string number = std::to_string(values[i]);
    number.insert(0, 1, ' ');
    if (i + 1 < values.size()) number += ',';
    if (line.size() + number.size() > 96) {
      out += line + "\n";
      line = "   ";
    }
    line += number;
  }
  return out + line;
}

}  // namespace rondel::firmware
