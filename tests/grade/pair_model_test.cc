#include "grade/pair_model.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace laygauge {
namespace {

// Seven teams of a league over one season, as in Agresti, "Categorical Data Analysis" (1990), ch.
// 10, table 10.10: wins of the row's over the column's. His Bradley-Terry estimates, the last team
// being 0: 1.58 1.44 1.29 1.25 1.11 0.68 (from memory; recomputed with statsmodels 0.13.5, which
// gives the digits and the standard errors below).
TEST(PairModel, PublishedPairedComparisons) {
  Eigen::MatrixXd wins(7, 7);
  wins << 0, 7, 9, 7, 7, 9, 11,  //
      6, 0, 7, 5, 11, 9, 9,      //
      4, 6, 0, 7, 7, 8, 12,      //
      6, 8, 6, 0, 6, 7, 10,      //
      6, 2, 6, 7, 0, 7, 12,      //
      4, 4, 5, 6, 6, 0, 6,       //
      2, 4, 1, 3, 1, 7, 0;
  const BradleyTerryFit fit = FitBradleyTerry(wins, 6).value();
  const std::vector<double> published{1.58, 1.44, 1.29, 1.25, 1.11, 0.68, 0};
  const std::vector<double> recomputed{
      1.581355877, 1.436408432, 1.294485124, 1.247617845, 1.107697705, 0.683852769, 0};
  const std::vector<double> errors{
      0.343255982, 0.339568506, 0.336669401, 0.335860923, 0.333878207, 0.331876673, 0};
  for (Eigen::Index i = 0; i < 7; ++i) {
    const auto place = static_cast<size_t>(i);
    EXPECT_NEAR(fit.worths[i], published[place], 0.005) << i;  // two printed decimals
    EXPECT_NEAR(fit.worths[i], recomputed[place], 1e-8) << i;
    EXPECT_NEAR(fit.standard_errors[i], errors[place], 1e-7) << i;
  }
}

// Two items, one beating the other 3 times of 4: the odds are 3, by hand.
TEST(PairModel, TwoItemsByHand) {
  Eigen::MatrixXd wins(2, 2);
  wins << 0, 3, 1, 0;
  EXPECT_NEAR(FitBradleyTerry(wins, 1)->worths[0], std::log(3), 1e-12);
}

TEST(PairModel, AnItemThatNeverLosesIsRefused) {
  Eigen::MatrixXd wins(3, 3);
  wins << 0, 3, 1, 0, 0, 2, 0, 1, 0;
  EXPECT_FALSE(FitBradleyTerry(wins, 2));
}

TEST(PairModel, DerivativesAreThoseOfTheLikelihood) {
  for (const double difference : {-30.0, -2.0, 0.0, 0.7, 40.0}) {
    const double step = 1e-4;
    const PairTerm at = LikelihoodOfPair(difference, 0.6);
    const double up = LikelihoodOfPair(difference + step, 0.6).log_likelihood;
    const double down = LikelihoodOfPair(difference - step, 0.6).log_likelihood;
    EXPECT_NEAR(at.slope, (up - down) / (2 * step), 1e-7);  // central difference: step^2
    EXPECT_NEAR(at.curvature, -(up - 2 * at.log_likelihood + down) / (step * step), 1e-5);
  }
}

}  // namespace
}  // namespace laygauge
