#pragma once

#include <span>
#include <vector>

#include "sheet/point_spread.h"

namespace laygauge {

// One pixel near a straight edge.
struct EdgeSample {
  double distance_mm = 0;  // across the edge, towards its bright side
  double along_mm = 0;     // along the edge, from its middle
  double value = 0;        // linear light, 0..1
};

// Samples gathered by their distance into bins of equal width: the edge spread function.
struct EdgeProfile {
  double bin_mm = 0;
  double first_mm = 0;              // centre of the first bin
  std::vector<double> distance_mm;  // mean distance of the bin's samples
  std::vector<double> value;        // their mean value
  std::vector<double> count;        // how many; 0: the other two are 0

  [[nodiscard]] size_t size() const { return value.size(); }
  [[nodiscard]] double Center(size_t bin) const {
    return first_mm + static_cast<double>(bin) * bin_mm;
  }
};

// Samples farther than half_width are left out. bin_mm and half_width_mm > 0.
[[nodiscard]] EdgeProfile BinEdge(std::span<const EdgeSample> samples, double bin_mm,
                                  double half_width_mm);

// A profile as the model describes it: dark + (bright - dark) spread.EdgeResponse(d - offset).
struct EdgeFit {
  double offset_mm = 0;
  double dark = 0;  // linear light far from the edge
  double bright = 0;
  PointSpread spread;
  double residual_rms = 0;  // of the bins, over the contrast

  [[nodiscard]] double Value(double distance_mm) const {
    return dark + (bright - dark) * spread.EdgeResponse(distance_mm - offset_mm);
  }
};

// Least squares (Levenberg 1944, Marquardt 1963) over the bins, weighted by their counts, from
// `start`. The model is clipped to 0..1 as an image is. Within: blur 0.15 to 6 pixels, sharpening
// 0 to 3, halo 0.6 to 4 pixels; hold_sharpening keeps the latter two as they are in `start`.
[[nodiscard]] EdgeFit FitEdge(const EdgeProfile& profile, const EdgeFit& start, double pixel_mm,
                              bool hold_sharpening);

// A first guess from the profile: plateaus, middle, a blur of 0.7 pixel and light sharpening.
[[nodiscard]] EdgeFit GuessEdge(const EdgeProfile& profile, double pixel_mm);

// Modulation transfer at the frequencies (cycles a mm) as ISO 12233:2014 derives it from the edge
// spread: its central difference, a window, Fourier transform, magnitude over that at 0; the
// transfer of the difference, sin(2 pi f h) / (2 pi f h) with bin width h, and that of the
// bins, sinc(f h), are divided out. Departures: the window is flat over its inner half (Tukey's; a
// Hamming window narrows a line spread of 2 px by 3 %), and a bin without samples takes the fit's
// value.
[[nodiscard]] std::vector<double> ModulationTransfer(const EdgeProfile& profile, const EdgeFit& fit,
                                                     std::span<const double> cycles_per_mm);

// The lowest frequency, cycles a mm, at which that transfer falls to a half.
[[nodiscard]] double Mtf50(const EdgeProfile& profile, const EdgeFit& fit);

// Over- and undershoot of the profile beyond the fit's plateaus, percent of the contrast, of
// three-bin means; at least 0.
struct Shoot {
  double over_pct = 0;   // on the bright side
  double under_pct = 0;  // on the dark side
};
[[nodiscard]] Shoot MeasureShoot(const EdgeProfile& profile, const EdgeFit& fit);

// Root mean square of the samples' distances from the fit, over the contrast.
[[nodiscard]] double SampleScatter(std::span<const EdgeSample> samples, const EdgeFit& fit,
                                   double half_width_mm);

// Moves each sample's distance by the polynomial of degree 2 in along_mm that brings it best onto
// the fit's curve: an edge known to a fraction of a pixel is straightened to its own line.
void StraightenEdge(std::span<EdgeSample> samples, const EdgeFit& fit, double half_width_mm);

}  // namespace laygauge
