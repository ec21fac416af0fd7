#pragma once

#include <string>

namespace laygauge {

// The first fenced block after the heading "## HEADING" of docs/FILE, without its fences. Throws
// std::runtime_error if there is none: the test then fails.
[[nodiscard]] std::string DocExample(const std::string& file, const std::string& heading);

}  // namespace laygauge
