#include "tools/rondel/report/section.h"

#include <fmt/core.h>

#include <array>
#include <cctype>
#include <cstdint>
#include <opencv2/imgcodecs.hpp>

namespace rondel::app::report {
namespace {

std::string base64(const std::vector<std::uint8_t>& bytes) {
  static constexpr std::string_view kDigits =
      "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
  std::string out;
  out.reserve((bytes.size() + 2) / 3 * 4);
  for (std::size_t i = 0; i < bytes.size(); i += 3) {
    const std::size_t left = std::min<std::size_t>(3, bytes.size() - i);
    std::uint32_t group = std::uint32_t{bytes[i]} << 16U;
    if (left > 1) group |= std::uint32_t{bytes[i + 1]} << 8U;
    if (left > 2) group |= std::uint32_t{bytes[i + 2]};
    out += kDigits[group >> 18U];
    out += kDigits[(group >> 12U) & 63U];
    out += left > 1 ? kDigits[(group >> 6U) & 63U] : '=';
    out += left > 2 ? kDigits[group & 63U] : '=';
  }
  return out;
}

std::string caption_html(std::string_view caption) {
  return caption.empty() ? std::string{}
                         : fmt::format("<figcaption>{}</figcaption>", text(caption));
}

/// "12.5 %", "-3", "0.41 .. 0.52", "2.4e-5 m": what reads as a number and is set to the right.
bool reads_as_number(std::string_view cell) {
  if (cell.empty()) return false;
  std::size_t i = 0;
  for (const std::string_view sign : {"-", "+", "\u2212", "\u00b1", "< ", "> "}) {
    if (cell.starts_with(sign)) {
      i = sign.size();
      break;
    }
  }
  if (i < cell.size() && cell[i] == '.') ++i;
  if (i >= cell.size() || std::isdigit(static_cast<unsigned char>(cell[i])) == 0) return false;
  std::size_t letters = 0;
  for (const char c : cell) letters += std::isalpha(static_cast<unsigned char>(c)) != 0 ? 1 : 0;
  return letters <= 5 && cell.find(':') == std::string_view::npos;
}

/// A script element's text must not contain "</" or "<!--"; JSON may write '<' as an escape.
std::string json_for_script(const nlohmann::ordered_json& json) {
  std::string out;
  for (const char c : json.dump()) {
    if (c == '<') {
      out += "\\u003c";
    } else {
      out += c;
    }
  }
  return out;
}

}  // namespace

std::string text(std::string_view plain) {
  std::string out;
  out.reserve(plain.size() + 16);
  for (const char c : plain) {
    switch (c) {
      case '&':
        out += "&amp;";
        break;
      case '<':
        out += "&lt;";
        break;
      case '>':
        out += "&gt;";
        break;
      case '"':
        out += "&quot;";
        break;
      case '\'':
        out += "&#39;";
        break;
      default:
        out += c;
    }
  }
  return out;
}

std::string paragraph(std::string_view plain) { return fmt::format("<p>{}</p>\n", text(plain)); }

std::string picture(const cv::Mat& image, std::string_view alt, std::string_view caption) {
  std::vector<std::uint8_t> png;
  cv::imencode(".png", image, png, {cv::IMWRITE_PNG_COMPRESSION, 9});
  return fmt::format(
      "<figure class=\"picture\"><img src=\"data:image/png;base64,{}\" width=\"{}\" height=\"{}\" "
      "alt=\"{}\">{}</figure>\n",
      base64(png),
      image.cols,
      image.rows,
      text(alt),
      caption_html(caption));
}

std::string drawing(std::string_view svg, std::string_view alt, std::string_view caption) {
  return fmt::format(
      "<figure class=\"drawing\"><div role=\"img\" aria-label=\"{}\">{}</div>{}</figure>\n",
      text(alt),
      svg,
      caption_html(caption));
}

std::string chart(const nlohmann::ordered_json& config,
                  std::string_view alt,
                  std::string_view caption) {
  return fmt::format(
      "<figure class=\"chart\"><div class=\"plot\"><canvas role=\"img\" "
      "aria-label=\"{0}\"></canvas>"
      "</div><script type=\"application/json\">{1}</script><p class=\"instead\">{0}</p>{2}"
      "</figure>\n",
      text(alt),
      json_for_script(config),
      caption_html(caption));
}

std::string table(const std::vector<std::vector<std::string>>& rows, std::string_view caption) {
  // A table of many columns takes the page's whole width.
  const bool wide = !rows.empty() && rows.front().size() > 6;
  std::string out =
      fmt::format("<div class=\"table{}\" tabindex=\"0\"><table>", wide ? " wide" : "");
  if (!caption.empty()) out += fmt::format("<caption>{}</caption>", text(caption));
  // A column is set to the right when every filled cell under its head reads as a number.
  std::vector<bool> right;
  for (std::size_t r = 1; r < rows.size(); ++r) {
    right.resize(std::max(right.size(), rows[r].size()), true);
    for (std::size_t c = 0; c < rows[r].size(); ++c) {
      if (!rows[r][c].empty() && rows[r][c] != "-" && !reads_as_number(rows[r][c]))
        right[c] = false;
    }
  }
  for (std::size_t r = 0; r < rows.size(); ++r) {
    out += r == 0 ? "<thead><tr>" : (r == 1 ? "<tbody><tr>" : "<tr>");
    for (std::size_t c = 0; c < rows[r].size(); ++c) {
      const std::string_view aligned = c < right.size() && right[c] ? " class=\"n\"" : "";
      const std::string_view tag = r == 0 ? "th" : "td";
      const std::string_view scope = r == 0 ? " scope=\"col\"" : "";
      out += fmt::format("<{0}{1}{2}>{3}</{0}>", tag, scope, aligned, text(rows[r][c]));
    }
    out += r == 0 ? "</tr></thead>" : "</tr>";
  }
  if (rows.size() > 1) out += "</tbody>";
  return out + "</table></div>\n";
}

}  // namespace rondel::app::report
