#include "grade/limits_of_agreement.h"

#include <gtest/gtest.h>

#include <vector>

namespace laygauge {
namespace {

// Bland & Altman 1986: peak flow of 17 subjects by two meters, first readings. Published from
// rounded figures: mean -2.1, SD 38.8; limits with 1.96 SD and intervals recomputed with scipy.
TEST(LimitsOfAgreement, BlandAltman1986) {
  const std::vector<double> wright{494, 395, 516, 434, 476, 557, 413, 442, 650,
                                   433, 417, 656, 267, 478, 178, 423, 427};
  const std::vector<double> mini{512, 430, 520, 428, 500, 600, 364, 380, 658,
                                 445, 432, 626, 260, 477, 259, 350, 451};
  const LimitsOfAgreement found = CompareMeans(wright, mini).value();
  EXPECT_NEAR(found.mean, -2.117647058824, 1e-12);
  EXPECT_NEAR(found.sd, 38.765129873607, 1e-11);
  EXPECT_NEAR(found.low, -78.097301611, 5e-9);
  EXPECT_NEAR(found.high, 73.862007493, 5e-9);
  EXPECT_NEAR(found.mean_low, -22.048837697, 5e-9);
  EXPECT_NEAR(found.mean_high, 17.813543579, 5e-9);
  EXPECT_NEAR(found.limit_standard_error, 16.284611795, 5e-9);
}

TEST(LimitsOfAgreement, NeedsTwoPairs) {
  const std::vector<double> one{5};
  EXPECT_FALSE(CompareMeans(one, one));
}

}  // namespace
}  // namespace laygauge
