#pragma once

#include <cstdint>
#include <span>

namespace laygauge {

// Luma of encoded red, green and blue by the weights of ITU-R BT.601 (0.299, 0.587, 0.114), which
// JFIF (ITU-T T.871) also uses: a JPEG's own luma and a PNG's or TIFF's then agree.
template <class Sample>
[[nodiscard]] Sample Luma(std::uint32_t red, std::uint32_t green, std::uint32_t blue) {
  // 65536ths; their sum times 65535, and the half for rounding, still fit into 32 bits.
  return static_cast<Sample>((19595 * red + 38470 * green + 7471 * blue + 32768) >> 16);
}

// One row of pixels to luma. `samples`: each sample's pixels `stride` apart; 1 or at least 3
// spans of samples (gray, or red, green and blue; anything further is ignored).
struct SampleRow {
  const void* first[3] = {nullptr, nullptr, nullptr};  // gray, or red, green and blue
  int samples = 1;                                     // 1: gray; 3: colour
  int stride = 1;                                      // samples from pixel to pixel
  int bits = 8;                                        // 8 or 16, host order
  bool inverted = false;                               // 0 is white
};

// Writes pixel i of the row to out[i * out_step], as 8 or 16 bit by row.bits.
void LumaRow(const SampleRow& row, int width, void* out, int out_step);

}  // namespace laygauge
