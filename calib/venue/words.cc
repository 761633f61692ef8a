#include "calib/venue/words.h"

#include <algorithm>
#include <cctype>
#include <charconv>
#include <cmath>
#include <cstddef>
#include <system_error>

namespace rondel {
namespace {

char lower(char c) { return static_cast<char>(std::tolower(static_cast<unsigned char>(c))); }

bool is_digit(char c) { return c >= '0' && c <= '9'; }

std::string_view without_plus(std::string_view text) {
  if (text.size() > 1 && text.front() == '+' && (is_digit(text[1]) || text[1] == '.')) {
    text.remove_prefix(1);
  }
  return text;
}

/// Bytes of the well-formed UTF-8 character at the start of `text`; 0 when it is broken.
std::size_t utf8_length(std::string_view text) {
  const auto byte = [&](std::size_t i) { return static_cast<unsigned char>(text[i]); };
  const unsigned char first = byte(0);
  std::size_t length = 0;
  if (first < 0x80) {
    length = 1;
  } else if (first >= 0xC2 && first < 0xE0) {
    length = 2;
  } else if (first >= 0xE0 && first < 0xF0) {
    length = 3;
  } else if (first >= 0xF0 && first < 0xF5) {
    length = 4;
  }
  if (length == 0 || length > text.size()) return 0;
  for (std::size_t i = 1; i < length; ++i) {
    if ((byte(i) & 0xC0U) != 0x80U) return 0;
  }
  return length;
}

}  // namespace

std::optional<double> parse_number(std::string_view text) {
  text = without_plus(text);
  // from_chars alone would take "inf", "nan" and hexadecimal forms' beginnings.
  for (const char c : text) {
    if (!is_digit(c) && c != '.' && c != '-' && c != '+' && c != 'e' && c != 'E') {
      return std::nullopt;
    }
  }
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc() || end != text.data() + text.size() || !std::isfinite(value)) {
    return std::nullopt;
  }
  return value;
}

std::optional<int> parse_whole(std::string_view text) {
  text = without_plus(text);
  int value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc() || end != text.data() + text.size()) return std::nullopt;
  return value;
}

std::string why_no_number(std::string_view text) {
  if (text.empty()) return "is empty; write a number";
  std::string with_point(text);
  if (std::count(with_point.begin(), with_point.end(), ',') == 1) {
    std::replace(with_point.begin(), with_point.end(), ',', '.');
    if (parse_number(with_point)) return "is not a number; write the decimals after a point";
  }
  std::size_t digits = 0;
  while (digits < text.size() && (is_digit(text[digits]) || text[digits] == '.' ||
                                  (digits == 0 && (text[0] == '-' || text[0] == '+')))) {
    ++digits;
  }
  if (digits > 0 && digits < text.size() && parse_number(text.substr(0, digits)) &&
      (std::isalpha(static_cast<unsigned char>(text[digits])) != 0 || text[digits] == ' ' ||
       text[digits] == '%')) {
    return "is not a number; write the number alone, its unit is in the name";
  }
  return "is not a number";
}

int edit_distance(std::string_view a, std::string_view b) {
  const std::size_t columns = b.size() + 1;
  std::vector<int> before_last(columns);
  std::vector<int> last(columns);
  std::vector<int> row(columns);
  for (std::size_t j = 0; j < columns; ++j) last[j] = static_cast<int>(j);
  for (std::size_t i = 1; i <= a.size(); ++i) {
    row[0] = static_cast<int>(i);
    for (std::size_t j = 1; j < columns; ++j) {
      const bool same = lower(a[i - 1]) == lower(b[j - 1]);
      row[j] = std::min({last[j] + 1, row[j - 1] + 1, last[j - 1] + (same ? 0 : 1)});
      if (i > 1 && j > 1 && lower(a[i - 1]) == lower(b[j - 2]) &&
          lower(a[i - 2]) == lower(b[j - 1])) {
        row[j] = std::min(row[j], before_last[j - 2] + 1);
      }
    }
    std::swap(before_last, last);
    std::swap(last, row);
  }
  return last[columns - 1];
}

std::optional<std::string> near_miss(std::string_view word, std::span<const std::string> allowed) {
  if (word.size() > 80) return std::nullopt;
  std::optional<std::string> best;
  int best_distance = 0;
  bool tie = false;
  for (const std::string& candidate : allowed) {
    const int distance = edit_distance(word, candidate);
    if (distance > std::max<int>(1, static_cast<int>(candidate.size()) / 3)) continue;
    if (!best || distance < best_distance) {
      best = candidate;
      best_distance = distance;
      tie = false;
    } else if (distance == best_distance) {
      tie = true;
    }
  }
  return tie ? std::nullopt : best;
}

std::string hint_for(std::string_view word, std::span<const std::string> allowed) {
  if (const auto meant = near_miss(word, allowed)) return "; did you mean '" + *meant + "'?";
  if (allowed.empty()) return "; none are allowed here";
  return "; allowed: " + joined(allowed);
}

std::string quotable(std::string_view text) {
  constexpr int kMostCharacters = 60;
  std::string out;
  int characters = 0;
  while (!text.empty()) {
    if (characters == kMostCharacters) return out + "...";
    const std::size_t length = utf8_length(text);
    const auto first = static_cast<unsigned char>(text.front());
    if (length == 0 || first < 0x20 || first == 0x7F) {
      out += '?';
      text.remove_prefix(std::max<std::size_t>(length, 1));
    } else {
      out += text.substr(0, length);
      text.remove_prefix(length);
    }
    ++characters;
  }
  return out;
}

std::string joined(std::span<const std::string> words) {
  std::string out;
  for (const std::string& word : words) {
    if (!out.empty()) out += ", ";
    out += word;
  }
  return out;
}

}  // namespace rondel
