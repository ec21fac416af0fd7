#pragma once

#include <functional>
#include <opencv2/core.hpp>

#include "texture/field_spectrum.h"

namespace laygauge {

struct Peak {
  cv::Point bin;  // (kx, ky) of FieldSpectrum::power
  double power = 0;
};

// Frequency of a (fractional) bin, cycles per mm, image axes.
[[nodiscard]] cv::Point2d FrequencyOf(const FieldSpectrum& spectrum, double kx, double ky);

// Power of a bin; kx may be negative: a real image's spectrum is symmetric about zero.
[[nodiscard]] double PowerAt(const cv::Mat& power, int kx, int ky);

// The strongest of the nine bins about a frequency.
[[nodiscard]] double PowerNear(const FieldSpectrum& spectrum, cv::Point2d frequency);

// The strongest bin of the mean power between two distances from zero for whose frequency `wanted`
// holds. Power 0: none.
[[nodiscard]] Peak StrongestPeak(const FieldSpectrum& spectrum, double low_per_mm,
                                 double high_per_mm,
                                 const std::function<bool(cv::Point2d)>& wanted);

// A peak's power over the median of the bins at its distance from zero, one and a half bins on
// either side.
[[nodiscard]] double PeakRatio(const FieldSpectrum& spectrum, const Peak& peak);

// Frequency of the vertex of parabolas through the logarithms of a bin and its neighbours on either
// axis; exact to 0.016 bins for one wave under a Hann window.
// power: the mean's or a tile's.
[[nodiscard]] cv::Point2d InterpolatedFrequency(const FieldSpectrum& spectrum, const cv::Mat& power,
                                                const Peak& peak);

}  // namespace laygauge
