#include "calib/base/problem.h"

#include <utility>

namespace rondel {

std::string to_text(const Problem& problem) {
  return problem.where.empty() ? problem.what : problem.where + ": " + problem.what;
}

InputError::InputError(std::vector<Problem> problems) : problems_(std::move(problems)) {
  for (const Problem& problem : problems_) {
    if (!text_.empty()) text_ += '\n';
    text_ += to_text(problem);
  }
}

InputError::InputError(std::string where, std::string what)
    : InputError(std::vector<Problem>{{std::move(where), std::move(what)}}) {}

}  // namespace rondel
