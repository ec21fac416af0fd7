#pragma once

#include <Eigen/Core>
#include <complex>
#include <opencv2/core.hpp>
#include <vector>

#include "texture/field_spectrum.h"

namespace laygauge {

using Amplitudes = std::vector<std::complex<double>>;  // of a wave, one a tile

// A wave as all tiles of a field show it.
struct Wave {
  cv::Point2d frequency;                                 // cycles per mm, image axes
  Eigen::Matrix2d covariance = Eigen::Matrix2d::Zero();  // of the frequency
  double agreement = 0;                                  // of the tiles, see Agreement
};

// |sum| over the sum of absolute values: 1 if all phases are equal, 1 / sqrt(n) by chance.
[[nodiscard]] double Agreement(const Amplitudes& amplitudes);

// The amplitudes with the plane of phases taken off on which they agree best: a shift of the
// frequency by a third of a bin at most, on a grid of a 48th. The phase of one harmonic drifts over
// the field where the light falls on the lines at changing angles, though the lines do not move.
[[nodiscard]] Amplitudes WithoutPhaseDrift(const FieldSpectrum& spectrum,
                                           const Amplitudes& amplitudes);

[[nodiscard]] Amplitudes AmplitudesAt(const FieldSpectrum& spectrum, cv::Point2d frequency);

// Squared sums of the tiles' amplitudes: what the whole field holds of each wave.
[[nodiscard]] std::vector<double> CoherentPowers(const FieldSpectrum& spectrum,
                                                 const std::vector<cv::Point2d>& frequencies);

// The frequency, within half a bin of a coarse one, at which the tiles agree best on the wave and
// its second harmonic (if not above `high_per_mm`): a grid of a twelfth of a bin. Each harmonic
// counts by its agreement, not by its strength, as a strong fundamental may be spread by the lines'
// wander while a faint harmonic is sharp; it counts only within half a bin of its own peak.
struct AgreedWave {
  cv::Point2d frequency;
  double agreement = 0;  // of the better harmonic: |sum|^2 / (n sum of squares), 0..1
};
[[nodiscard]] AgreedWave FindAgreedWave(const FieldSpectrum& spectrum, cv::Point2d coarse,
                                        double high_per_mm);

// Refines a frequency that is right to a twelfth of a bin: the plane phase = c + 2 pi f . x through
// the tiles' phases, weighted by squared amplitudes, twice. The covariance is the fit's; tiles
// along one line share its wander, so that a row of them counts as one tile. Source: Tretter, IEEE
// Trans. Inf. Theory 31 (1985) 832-835, doi:10.1109/TIT.1985.1057115.
[[nodiscard]] Wave RefineWave(const FieldSpectrum& spectrum, cv::Point2d start);

}  // namespace laygauge
