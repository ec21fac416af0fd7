#pragma once

#include <sstream>
#include <string>
#include <vector>

#include "cli/program.h"

namespace laygauge {

// What a command left behind: its exit code, standard output and error.
struct Outcome {
  int code;
  std::string out;
  std::string err;
};

inline Outcome RunWith(const std::vector<std::string>& arguments) {
  std::ostringstream out;
  std::ostringstream err;
  const int code = RunProgram(arguments, {out, err});
  return {code, out.str(), err.str()};
}

inline bool IsOneLine(const std::string& text) {
  return text.rfind("laygauge: ", 0) == 0 && text.find('\n') == text.size() - 1;
}

}  // namespace laygauge
