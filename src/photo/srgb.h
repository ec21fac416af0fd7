#pragma once

namespace laygauge {

// The transfer functions of IEC 61966-2-1 (sRGB); arguments and results 0..1.
[[nodiscard]] double LinearFromSrgb(double encoded);
[[nodiscard]] double SrgbFromLinear(double linear);

}  // namespace laygauge
