#include "texture/bin_weights.h"

#include <Eigen/Dense>
#include <cmath>
#include <numbers>

namespace laygauge {
namespace {

constexpr int kBins = BinWeights::kBins;
using Column = Eigen::Matrix<double, kBins, 1>;
using Square = Eigen::Matrix<double, kBins, kBins>;

// Transforms of a unit box, of the window cos^2(pi u) on it, and of the window's square, at a
// distance in bins.
double OfBox(double d) {
  const double x = std::numbers::pi * d;
  return std::abs(x) < 1e-9 ? 1 : std::sin(x) / x;
}
double OfWindow(double d) { return OfBox(d) / 2 + (OfBox(d - 1) + OfBox(d + 1)) / 4; }
double OfSquare(double d) {
  return OfBox(d) * 3 / 8 + (OfBox(d - 1) + OfBox(d + 1)) / 4 + (OfBox(d - 2) + OfBox(d + 2)) / 16;
}

// Inverse of the bins' products under the squared window.
Square InverseProducts() {
  Square products;
  for (int i = 0; i < kBins; ++i) {
    for (int j = 0; j < kBins; ++j) products(i, j) = OfSquare(i - j);
  }
  return products.inverse();
}

}  // namespace

BinWeights WeighBins(double frequency_bins) {
  static const Square inverse = InverseProducts();
  BinWeights bins;
  bins.first = static_cast<int>(std::floor(frequency_bins)) - kBins / 2 + 1;
  Column right;
  Column window;
  for (int i = 0; i < kBins; ++i) {
    right[i] = OfSquare(frequency_bins - bins.first - i);
    window[i] = OfWindow(frequency_bins - bins.first - i);
  }
  const Column weights = inverse * right;
  const double scale = OfWindow(0) / weights.dot(window);
  for (int i = 0; i < kBins; ++i) {
    // Half a window's shift turns the odd bins by half a turn.
    const double sign = (bins.first + i) % 2 == 0 ? 1 : -1;
    bins.weights[static_cast<std::size_t>(i)] = static_cast<float>(sign * scale * weights[i]);
  }
  return bins;
}

}  // namespace laygauge
