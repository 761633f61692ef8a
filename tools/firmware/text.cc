#include "tools/firmware/text.h"

#include <fmt/format.h>

#include <algorithm>

namespace rondel::firmware {
namespace {

bool printable(char c) { return c >= ' ' && c <= '~'; }

}  // namespace

std::string for_comment(std::string_view text) {
  std::string out;
  for (std::size_t i = 0; i < text.size(); ++i) {
    const char c = text[i];
    const char next = i + 1 < text.size() ? text[i + 1] : '\0';
    const bool ends = (c == '*' && next == '/') || (c == '/' && next == '*') ||
                      (c == '?' && next == '?') || c == '\\';
    out += printable(c) && !ends ? std::string(1, c)
                                 : fmt::format("<{:02X}>", static_cast<unsigned char>(c));
  }
  return out;
}

std::string quoted(std::string_view text) {
  std::string out = "\"";
  for (const char c : text) {
    // '?' too, so that no trigraph comes about.
    const bool plain = printable(c) && c != '"' && c != '\\' && c != '?';
    out += plain ? std::string(1, c) : fmt::format("\\{:03o}", static_cast<unsigned char>(c));
  }
  return out + "\"";
}

std::string yaml_quoted(std::string_view text) {
  std::string out = "\"";
  for (const char c : text) {
    const bool control = static_cast<unsigned char>(c) < 0x20 || c == 0x7F;
    if (control) {
      out += fmt::format("\\x{:02X}", static_cast<unsigned char>(c));
    } else {
      if (c == '"' || c == '\\') out += '\\';
      out += c;
    }
  }
  return out + "\"";
}

std::string identifier(std::string_view prefix) {
  std::string out;
  for (const char c : prefix) {
    const bool letter = (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || c == '_';
    const bool digit = c >= '0' && c <= '9';
    out += letter || (digit && !out.empty()) ? c : '_';
  }
  return out.empty() ? "rondel" : out;
}

std::string upper(std::string_view text) {
  std::string out(text);
  std::transform(out.begin(), out.end(), out.begin(), [](char c) {
    return c >= 'a' && c <= 'z' ? static_cast<char>(c - 'a' + 'A') : c;
  });
  return out;
}

std::string fill(std::string_view pattern,
                 const std::vector<std::pair<std::string, std::string>>& values) {
  std::string out;
  std::size_t at = 0;
  while (at < pattern.size()) {
    const std::size_t open = pattern.find('@', at);
    const std::size_t close = open == std::string_view::npos ? open : pattern.find('@', open + 1);
    if (close == std::string_view::npos) break;
    out += pattern.substr(at, open - at);
    const std::string_view key = pattern.substr(open + 1, close - open - 1);
    const auto value = std::find_if(
        values.begin(), values.end(), [key](const auto& entry) { return entry.first == key; });
    if (value == values.end()) {  // not one of ours: an '@' of the text itself
      out += '@';
      at = open + 1;
      continue;
    }
    out += value->second;
    at = close + 1;
  }
  return out + std::string(pattern.substr(at));
}

std::string python_bytes(std::span<const std::uint8_t> bytes) {
  constexpr std::size_t kPerLine = 22;
  std::string out = "(";
  for (std::size_t i = 0; i < bytes.size(); i += kPerLine) {
    out += "\n    b'";
    for (std::size_t k = i; k < std::min(bytes.size(), i + kPerLine); ++k) {
      out += fmt::format("\\x{:02x}", bytes[k]);
    }
    out += "'";
  }
  if (bytes.empty()) out += "b''";
  return out + ")";
}

}  // namespace rondel::firmware
