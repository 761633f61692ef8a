#include "tools/rondel/desk/request.h"

#include <fmt/format.h>

#include "tools/rondel/desk/bench.h"

namespace rondel::app {

using nlohmann::json;

double number_of(const json& request, const char* key, double low, double high) {
  const auto member = request.find(key);
  if (member == request.end() || !member->is_number()) {
    throw Refusal(400, fmt::format("{}: must be a number", key));
  }
  const double value = member->get<double>();
  if (!(value >= low && value <= high)) {
    throw Refusal(400, fmt::format("{} = {}: must be from {} to {}", key, value, low, high));
  }
  return value;
}

std::string text_of(const json& request, const char* key) {
  const auto member = request.find(key);
  if (member == request.end() || !member->is_string()) {
    throw Refusal(400, fmt::format("{}: must be text", key));
  }
  return member->get<std::string>();
}

std::vector<std::string> words_of(const json& request, const char* key) {
  const auto member = request.find(key);
  if (member == request.end() || !member->is_array() || member->size() > 32) {
    throw Refusal(400, fmt::format("{}: must be a list of texts", key));
  }
  std::vector<std::string> words;
  for (const json& word : *member) {
    if (!word.is_string()) throw Refusal(400, fmt::format("{}: must be a list of texts", key));
    words.push_back(word.get<std::string>());
  }
  return words;
}

}  // namespace rondel::app
