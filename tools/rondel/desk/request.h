#pragma once

#include <nlohmann/json.hpp>
#include <string>
#include <vector>

namespace rondel::app {

// Members of a request as the page sends it; Refusal where they are not what they must be.
[[nodiscard]] std::string text_of(const nlohmann::json& request, const char* key);
[[nodiscard]] double number_of(const nlohmann::json& request,
                               const char* key,
                               double low,
                               double high);
/// A list of texts.
[[nodiscard]] std::vector<std::string> words_of(const nlohmann::json& request, const char* key);

}  // namespace rondel::app
