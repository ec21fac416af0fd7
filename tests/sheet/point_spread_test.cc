#include "sheet/point_spread.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

namespace laygauge {
namespace {

// Analytic constants of a Gaussian (recomputed with scipy): MTF50 sqrt(ln2/2)/pi, MTF10, the rise
// from 10 to 90 %. 1e-9: bisection to rounding.
TEST(PointSpread, GaussianConstants) {
  for (const double sd : {0.03, 0.06, 1.7}) {
    const PointSpread gauss{sd, 0, 0};
    EXPECT_NEAR(gauss.Mtf50PerMm() * sd, 0.187390625129, 1e-9);
    EXPECT_NEAR(gauss.Modulation(0.341541100791 / sd), 0.1, 1e-9);
    EXPECT_NEAR(gauss.Modulation(0.246969582750 / sd), 0.3, 1e-9);
    EXPECT_NEAR(gauss.RiseMm() / sd, 2.563103131, 1e-8);
  }
}

// The modulation is the Fourier transform of the line spread, which is the derivative of the edge
// response: both by sums on a fine grid. Trapezoid sums of functions that vanish with all their
// derivatives at the ends err by rounding only; the difference quotient by step^2.
TEST(PointSpread, EdgeLineAndModulationBelongTogether) {
  const PointSpread spread{0.05, 0.6, 0.09};
  const double step = 1e-3;
  for (const double f : {0.0, 1.5, 4.0, 8.0}) {
    double sum = 0;
    for (int i = -2000; i <= 2000; ++i) {
      const double x = i * step;
      sum += step * spread.LineSpread(x) * std::cos(2 * std::numbers::pi * f * x);
    }
    EXPECT_NEAR(spread.Modulation(f), sum, 1e-10);
  }
  for (const double x : {-0.13, 0.0, 0.07}) {
    const double slope = (spread.EdgeResponse(x + 1e-5) - spread.EdgeResponse(x - 1e-5)) / 2e-5;
    EXPECT_NEAR(spread.LineSpread(x), slope, 1e-5);  // of values near 10
  }
}

TEST(PointSpread, SharpeningRaisesMtf50AndShortensTheRise) {
  const PointSpread plain{0.05, 0, 0};
  const PointSpread sharpened{0.05, 0.5, 0.09};
  EXPECT_GT(sharpened.Mtf50PerMm(), plain.Mtf50PerMm());
  EXPECT_NEAR(sharpened.Modulation(sharpened.Mtf50PerMm()), 0.5, 1e-9);  // its definition
  EXPECT_LT(sharpened.RiseMm(), plain.RiseMm());
  EXPECT_NEAR(sharpened.EdgeResponse(sharpened.RiseMm() / 2), 0.9, 1e-9);
}

}  // namespace
}  // namespace laygauge
