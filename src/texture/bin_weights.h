#pragma once

#include <array>

namespace laygauge {

// Bins of a windowed spectrum about a frequency between them, with weights that add up to the
// transform there.
struct BinWeights {
  static constexpr int kBins = 10;
  int first = 0;  // the bins are first .. first + kBins - 1, any whole numbers
  std::array<float, kBins> weights{};
};

// Of data under a periodic Hann window of even length; phases count from the window's middle,
// `length` / 2, while the bins' count from its first value.
//   The bins' weighted waves should add up to the wave of the frequency; as the window is all but
// zero at its ends, few bins do. The weights are least squares under the squared window, scaled so
// that a wave of this frequency is exact. White data errs by 0.8 % half-way between bins, a wave
// within a quarter of a bin by 0.1 %, its phase not at all.
// Source: the same idea, least squares, is that of Fessler and Sutton, "Nonuniform fast Fourier
// transforms using min-max interpolation", IEEE Trans. Signal Proc. 51 (2003) 560-574,
// doi:10.1109/TSP.2002.807005. Departure: no zeros are appended, the window stands in for them.
[[nodiscard]] BinWeights WeighBins(double frequency_bins);

}  // namespace laygauge
