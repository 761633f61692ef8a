#pragma once

#include <random>
#include <string>
#include <string_view>
#include <vector>

namespace rondel::fuzz {

/// `seed` with one to six things done to it: bytes changed, cut out, doubled, or one of `tokens`
/// put in. The same generator state gives the same text.
inline std::string mutated(std::string text,
                           const std::vector<std::string_view>& tokens,
                           std::mt19937_64& rng) {
  const auto below = [&rng](std::size_t n) { return n == 0 ? 0 : rng() % n; };
  for (std::size_t i = 0, changes = 1 + below(6); i < changes; ++i) {
    const std::size_t at = below(text.size() + 1);
    const std::size_t length = below(1 + below(24));
    switch (below(6)) {
      case 0:
        if (at < text.size()) text[at] = static_cast<char>(below(256));
        break;
      case 1:
        if (at < text.size()) text[at] = static_cast<char>(text[at] ^ (1 << below(8)));
        break;
      case 2:
        text.erase(at, length);
        break;
      case 3:
        text.insert(at, text.substr(at, length));
        break;
      case 4:
        if (below(8) == 0) text.resize(at);
        break;
      default:
        if (!tokens.empty()) text.insert(at, tokens[below(tokens.size())]);
        break;
    }
  }
  return text;
}

}  // namespace rondel::fuzz
