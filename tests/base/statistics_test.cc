#include "base/statistics.h"

#include <gtest/gtest.h>

#include <stdexcept>

namespace laygauge {
namespace {

// Siegel 1956, "Nonparametric Statistics for the Behavioral Sciences", the twelve pairs of the
// rank-correlation chapter: sum of squared rank differences 52, published coefficient .82.
TEST(Statistics, RankCorrelationOfSiegelsPairs) {
  const std::vector<double> a{82, 98, 87, 40, 116, 113, 111, 83, 85, 126, 106, 117};
  const std::vector<double> b{42, 46, 39, 37, 65, 88, 86, 56, 62, 92, 54, 81};
  EXPECT_NEAR(RankCorrelation(a, b), 1 - 6.0 * 52 / (12 * (144 - 1)), 1e-12);
}

// With ties: NIST Dataplot KENDALL.DAT (Conover's GMAT and GPA pairs); scipy 1.10 gives the value.
TEST(Statistics, RankCorrelationSharesTiedRanks) {
  const std::vector<double> a{530, 540, 545, 560, 560, 560, 570, 580, 610, 610, 640, 740};
  const std::vector<double> b{3.5, 3.3, 3.7, 3.2, 3.5, 3.6, 3.2, 3.8, 3.5, 4.0, 3.9, 4.0};
  EXPECT_NEAR(RankCorrelation(a, b), 0.590018762681, 1e-11);
}

// Hyndman & Fan 1996, type 7, worked by hand: position (n - 1) p.
TEST(Statistics, QuantilesInterpolate) {
  const std::vector<double> values{4, 1, 3, 2};
  EXPECT_DOUBLE_EQ(Quantile(values, 0), 1);
  EXPECT_DOUBLE_EQ(Quantile(values, 0.25), 1.75);
  EXPECT_DOUBLE_EQ(Median(values), 2.5);
  EXPECT_DOUBLE_EQ(Quantile(values, 1), 4);
  EXPECT_THROW((void)Median({}), std::invalid_argument);
}

// Divisor n - 1 by hand: deviations of 2, 4, 4, 6 from 4 are -2, 0, 0, 2; 8 / 3.
TEST(Statistics, StandardDeviationOfASample) {
  const std::vector<double> values{2, 4, 4, 6};
  EXPECT_DOUBLE_EQ(StandardDeviation(values) * StandardDeviation(values), 8.0 / 3);
}

}  // namespace
}  // namespace laygauge
