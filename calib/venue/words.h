#pragma once

#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

namespace rondel {

/// `text` as a finite number, whatever the locale: an optional sign, digits with an optional point,
/// an optional exponent, and nothing else. No answer for anything that is not just that.
[[nodiscard]] std::optional<double> parse_number(std::string_view text);

/// `text` as a whole number: an optional sign and digits, nothing else, within int.
[[nodiscard]] std::optional<int> parse_whole(std::string_view text);

/// Why `text` is no number, as a clause for a message: "is not a number", with what to do where the
/// mistake is a common one (decimal comma, unit behind the number).
[[nodiscard]] std::string why_no_number(std::string_view text);

/// Insertions, deletions, substitutions and swaps of neighbours that lead from `a` to `b`
/// (optimal string alignment distance; Damerau 1964), upper and lower case being equal.
[[nodiscard]] int edit_distance(std::string_view a, std::string_view b);

/// The word of `allowed` that `word` was probably meant to be: at most a third of its letters away
/// and nearer than any other. Nothing where no word is that near.
[[nodiscard]] std::optional<std::string> near_miss(std::string_view word,
                                                   std::span<const std::string> allowed);

/// "; did you mean 'diameter_mm'?" where there is a near miss, else "; allowed: a, b, c".
[[nodiscard]] std::string hint_for(std::string_view word, std::span<const std::string> allowed);

/// `text` made fit for one line of a message: control characters and broken UTF-8 become '?', and
/// more than 60 characters are cut off with "...".
[[nodiscard]] std::string quotable(std::string_view text);

/// "a, b, c".
[[nodiscard]] std::string joined(std::span<const std::string> words);

}  // namespace rondel
