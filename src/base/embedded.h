#pragma once

#include <string_view>

namespace laygauge {

// A file of calibration/ that is compiled into the program (laygauge_embed in src/CMakeLists.txt).
struct EmbeddedFile {
  std::string_view name;  // without folder
  std::string_view text;
};

}  // namespace laygauge
