#include "photo/srgb.h"

#include <gtest/gtest.h>

namespace laygauge {
namespace {

// IEC 61966-2-1, computed from its two formulas with an independent reference library (numpy), to
// 15 decimals. Tolerance: a few units in the last printed place.
TEST(Srgb, DecodesThePublishedCurve) {
  constexpr double kTolerance = 2e-15;
  EXPECT_NEAR(LinearFromSrgb(1 / 255.0), 0.000303526983549, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(10 / 255.0), 0.003035269835488, kTolerance);  // linear branch
  EXPECT_NEAR(LinearFromSrgb(11 / 255.0), 0.003346535763899, kTolerance);  // power branch
  EXPECT_NEAR(LinearFromSrgb(0.5), 0.214041140482233, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(64 / 255.0), 0.051269458374043, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(118 / 255.0), 0.181164244249860, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(119 / 255.0), 0.184474994500441, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(128 / 255.0), 0.215860500113899, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(188 / 255.0), 0.502886458032569, kTolerance);
  EXPECT_NEAR(LinearFromSrgb(0.9), 0.787412289395617, kTolerance);
  EXPECT_EQ(LinearFromSrgb(0), 0);
  EXPECT_EQ(LinearFromSrgb(1), 1);
}

// As above.
TEST(Srgb, EncodesThePublishedCurve) {
  constexpr double kTolerance = 2e-15;
  EXPECT_NEAR(SrgbFromLinear(0.001), 0.01292, kTolerance);
  EXPECT_NEAR(SrgbFromLinear(0.01), 0.099852822734128, kTolerance);
  EXPECT_NEAR(SrgbFromLinear(0.18), 0.461356129500442, kTolerance);
  EXPECT_NEAR(SrgbFromLinear(0.5), 0.735356983052449, kTolerance);
  EXPECT_NEAR(SrgbFromLinear(0.9), 0.954687171885866, kTolerance);
}

// The standard's rounded constants leave the two branches 2.3e-9 apart where they meet.
TEST(Srgb, ReturnsWhereItCameFrom) {
  for (int i = 0; i <= 255; ++i) {
    EXPECT_NEAR(SrgbFromLinear(LinearFromSrgb(i / 255.0)), i / 255.0, 1e-7) << i;
  }
}

}  // namespace
}  // namespace laygauge
