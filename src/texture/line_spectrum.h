#pragma once

#include <optional>

#include "base/error.h"
#include "texture/field_spectrum.h"

namespace laygauge {

struct LineSpectrumOptions {
  double min_pitch_mm = 0.2;
  double max_pitch_mm = 1.2;
  // Of a peak's power over the median of all bins at its distance from zero. The largest of a
  // thousand bins of noise, averaged over 30 tiles, stays below 3.
  double min_peak_ratio = 12;
  double min_contrast = 0.003;     // of the fundamental and its harmonics, of mean reflectance
  double min_second_lay_deg = 15;  // between the lays of two layers
  std::optional<double> nominal_lay_deg =
      std::nullopt;    // of the drawing: decides between two lays that both lead
  void Check() const;  // throws BadOption: field, value, rule
};

// Lines of another direction in the same field: the layer below shows.
struct SecondLay {
  double lay_deg = 0;  // [0, 180)
  double share = 0;    // of the tiles in which they outweigh the top layer's lines
};

// The lines of the top layer, as the spectrum of the field shows them.
struct Lines {
  double pitch_mm = 0;
  double lay_deg = 0;  // counter-clockwise from the coupon's +x seen from above, [0, 180)
  double pitch_sd_mm = 0;
  double lay_sd_deg = 0;
  cv::Point2d frequency_per_mm;  // wave vector of the fundamental, image axes, x >= 0
  double phase_agreement = 0;    // of the tiles at this frequency, 0..1
  double peak_ratio = 0;         // see LineSpectrumOptions::min_peak_ratio
  std::optional<SecondLay> second_lay;
};

// Finds the lines' pitch and lay: the strongest peak of the mean power spectrum (a parabola
// through the logarithms of its neighbours), then the plane that fits the phases of all tiles at
// that frequency, found on a grid and refined by least squares, weighted by the tiles'
// amplitudes. A harmonic that outweighs its fundamental is recognised by the waves at a half and
// a third of its frequency, which agree over the whole field. Of two lays the top's is the one
// that leads in more tiles (see also nominal_lay_deg).
// Standard deviations: of the fit, from the tiles' residual phases.
// Problem: the field is smaller than one tile, or shows no lines.
// Sources: Rife & Boorstyn, "Single tone parameter estimation from discrete-time observations",
// IEEE Trans. Inf. Theory 20 (1974) 591-598, doi:10.1109/TIT.1974.1055282 (coarse search, then the
// maximum of the periodogram); Tretter, IEEE Trans. Inf. Theory 31 (1985) 832-835,
// doi:10.1109/TIT.1985.1057115 (frequency by regression on phases).
[[nodiscard]] Expected<Lines> FindLines(const FieldSpectrum& spectrum,
                                        const LineSpectrumOptions& options = {});

}  // namespace laygauge
