#pragma once

#include <stdexcept>
#include <string>
#include <tl/expected.hpp>
#include <utility>
#include <variant>

namespace laygauge {

// Why something could not be done. cli/ turns the kind into an exit code.
enum class ProblemKind {
  kBadInput,      // a file is missing, malformed or contradicts another
  kUnmeasurable,  // the input is well formed, but nothing can be measured in it
  kCannotWrite,   // an output could not be written
};

// One clear sentence for a person: what, where, why, and what to do. No final newline.
struct Problem {
  ProblemKind kind = ProblemKind::kBadInput;
  std::string message;
};

// A value, or the reason why there is none. Functions that return one are [[nodiscard]].
template <class T>
using Expected = tl::expected<T, Problem>;

using Done = Expected<std::monostate>;

inline tl::unexpected<Problem> BadInput(std::string message) {
  return tl::unexpected<Problem>({ProblemKind::kBadInput, std::move(message)});
}
inline tl::unexpected<Problem> Unmeasurable(std::string message) {
  return tl::unexpected<Problem>({ProblemKind::kUnmeasurable, std::move(message)});
}
inline tl::unexpected<Problem> CannotWrite(std::string message) {
  return tl::unexpected<Problem>({ProblemKind::kCannotWrite, std::move(message)});
}

// Thrown by the Check() of an options struct: field, value and rule. A caller's mistake.
class BadOption : public std::invalid_argument {
 public:
  using std::invalid_argument::invalid_argument;
};

}  // namespace laygauge
