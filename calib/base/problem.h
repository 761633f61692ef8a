#pragma once

#include <exception>
#include <string>
#include <vector>

namespace rondel {

/// One thing wrong with what a person gave us.
struct Problem {
  std::string where;  ///< "marks.csv:14", "venue.yaml:3", or a file or flag; may be empty
  std::string what;   ///< "range_m = -0.40: must be > 0; measure from the robot's axis"
};

/// "where: what", or just `what` when there is no place to name.
[[nodiscard]] std::string to_text(const Problem& problem);

/// Bad input, all of it at once. Thrown by readers, turned into exit status 2 by tools/.
class InputError : public std::exception {
 public:
  explicit InputError(std::vector<Problem> problems);
  InputError(std::string where, std::string what);

  [[nodiscard]] const std::vector<Problem>& problems() const { return problems_; }
  /// All problems, one a line.
  [[nodiscard]] const char* what() const noexcept override { return text_.c_str(); }

 private:
  std::vector<Problem> problems_;
  std::string text_;
};

}  // namespace rondel
