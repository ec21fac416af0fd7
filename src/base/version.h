#pragma once

#include <string_view>

namespace laygauge {

// The program's version, as in "0.1.0" (CMakeLists.txt, project).
[[nodiscard]] std::string_view ProgramVersion();

}  // namespace laygauge
