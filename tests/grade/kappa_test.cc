#include "grade/kappa.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace laygauge {
namespace {

Eigen::MatrixXd Square(std::vector<double> values) {
  const auto side = static_cast<Eigen::Index>(std::lround(std::sqrt(values.size())));
  return Eigen::Map<Eigen::MatrixXd>(values.data(), side, side).transpose();
}

// Cohen 1968: proportions and disagreement weights; kappa .492 and weighted .348 (29/59, 8/23).
TEST(Kappa, Cohen1968) {
  const Eigen::MatrixXd p = Square({.44, .07, .09, .05, .20, .05, .01, .03, .06});
  const Eigen::MatrixXd disagreement = Square({0, 1, 3, 1, 0, 6, 3, 6, 0});
  EXPECT_NEAR(WeightedKappa(p, KappaWeights::kNone)->value, 29.0 / 59, 1e-12);
  const Eigen::MatrixXd agreement = 1 - disagreement.array() / 6;
  EXPECT_NEAR(WeightedKappa(p, agreement)->value, 8.0 / 23, 1e-12);
}

// Fleiss, Cohen & Everitt 1969; digits and standard errors by R (vcd) and statsmodels 0.13.5.
TEST(Kappa, FleissCohenEveritt1969) {
  const Eigen::MatrixXd counts = Square({106, 10, 4, 22, 28, 10, 2, 12, 6});
  const Kappa plain = WeightedKappa(counts, KappaWeights::kNone).value();
  EXPECT_NEAR(plain.value, 0.428571428571, 1e-12);
  EXPECT_NEAR(plain.standard_error, 0.0537110049, 5e-11);
  EXPECT_NEAR(plain.standard_error_null, 0.0555124549, 5e-11);
  const Kappa linear = WeightedKappa(counts, KappaWeights::kLinear).value();
  EXPECT_NEAR(linear.value, 0.492307692308, 1e-12);
  EXPECT_NEAR(linear.standard_error, 0.0507186076, 5e-11);
  const Kappa quadratic = WeightedKappa(counts, KappaWeights::kQuadratic).value();
  EXPECT_NEAR(quadratic.value, 0.566666666667, 1e-12);
  EXPECT_NEAR(quadratic.standard_error, 0.0556663402, 5e-11);
  // The paper's own similarity weights.
  const Eigen::MatrixXd similarity = Square({1, 0, .4444, 0, 1, .6667, .4444, .6667, 1});
  EXPECT_NEAR(WeightedKappa(counts, similarity)->value, 0.50706996, 5e-9);
}

// Fleiss 1981, and the 4 x 4 table of Hout et al. 1987 in Agresti; by R (vcd) and statsmodels.
TEST(Kappa, FurtherPublishedTables) {
  const Eigen::MatrixXd fleiss = Square({75, 1, 4, 5, 4, 1, 0, 0, 10});
  EXPECT_NEAR(WeightedKappa(fleiss, KappaWeights::kNone)->value, 23.0 / 34, 1e-12);
  EXPECT_NEAR(WeightedKappa(fleiss, KappaWeights::kNone)->standard_error, 0.0877029535, 5e-11);
  EXPECT_NEAR(WeightedKappa(fleiss, KappaWeights::kQuadratic)->value, 0.755319148936, 1e-12);
  const Eigen::MatrixXd hout = Square({7, 7, 2, 3, 2, 8, 3, 7, 1, 5, 4, 9, 2, 8, 9, 14});
  const Kappa quadratic = WeightedKappa(hout, KappaWeights::kQuadratic).value();
  EXPECT_NEAR(quadratic.value, 0.332045586247, 1e-12);
  EXPECT_NEAR(quadratic.standard_error, 0.0972975220, 5e-11);
}

// Quadratic kappa is 1 - (mean squared difference) / (the same over all combinations), by hand.
TEST(Kappa, OfGradesInHalfSteps) {
  const std::vector<double> a{1, 1, 5, 9, 10};
  const std::vector<double> b{1, 2, 5, 9, 9.5};
  double chance = 0;
  for (const double x : a) {
    for (const double y : b) chance += (x - y) * (x - y) / 25;
  }
  EXPECT_NEAR(GradeKappa(a, b, KappaWeights::kQuadratic)->value, 1 - 1.25 / 5 / chance, 1e-12);
}

TEST(Kappa, RefusesNothingAndOneCell) {
  EXPECT_FALSE(WeightedKappa(Eigen::MatrixXd::Zero(3, 3), KappaWeights::kNone));
  const std::vector<double> same{7, 7, 7};
  EXPECT_FALSE(GradeKappa(same, same, KappaWeights::kLinear));
}

}  // namespace
}  // namespace laygauge
