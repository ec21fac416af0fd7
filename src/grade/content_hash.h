#pragma once

#include <string>
#include <string_view>

namespace laygauge {

// XXH3, 128 bits (xxHash 0.8), as 32 hexadecimal digits in the canonical order. It tells changed
// content from unchanged; it does not protect against forgery.
[[nodiscard]] std::string ContentHash(std::string_view bytes);

}  // namespace laygauge
