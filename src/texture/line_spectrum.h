#pragma once

#include "base/error.h"
#include "coupon/patch.h"
#include "texture/field_spectrum.h"

namespace laygauge {

struct LineSpectrumOptions {
  double min_pitch_mm = 0.2;
  double max_pitch_mm = 1.2;
  double min_peak_ratio = 12;  // the peak's power over the median of its ring of frequencies
  void Check() const;          // throws BadOption: field, value, rule
};

// The lines of the top layer, as the spectrum of the field shows them.
struct Lines {
  double pitch_mm = 0;
  double lay_deg = 0;  // counter-clockwise from the coupon's +x seen from above, [0, 180)
  double peak_ratio = 0;
};

// Finds the lines' pitch and lay. Problem: the field is too small or shows no lines.
[[nodiscard]] Expected<Lines> FindLines(const Patch& patch, const FieldSpectrum& spectrum,
                                        const LineSpectrumOptions& options = {});

}  // namespace laygauge
