#include "photo/luma.h"

#include <limits>

namespace laygauge {
namespace {

template <class Sample>
void Convert(const SampleRow& row, int width, Sample* out, int out_step) {
  const auto* red = static_cast<const Sample*>(row.first[0]);
  const auto* green = static_cast<const Sample*>(row.first[1]);
  const auto* blue = static_cast<const Sample*>(row.first[2]);
  const Sample flip = row.inverted ? std::numeric_limits<Sample>::max() : Sample{0};
  for (int x = 0; x < width; ++x) {
    const int at = x * row.stride;
    const Sample value = row.samples == 1 ? red[at] : Luma<Sample>(red[at], green[at], blue[at]);
    out[static_cast<std::ptrdiff_t>(x) * out_step] = static_cast<Sample>(value ^ flip);
  }
}

}  // namespace

void LumaRow(const SampleRow& row, int width, void* out, int out_step) {
  if (row.bits == 8) {
    Convert(row, width, static_cast<std::uint8_t*>(out), out_step);
  } else {
    Convert(row, width, static_cast<std::uint16_t*>(out), out_step);
  }
}

}  // namespace laygauge
