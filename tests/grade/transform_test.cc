#include "grade/transform.h"

#include <gtest/gtest.h>

#include <array>

namespace laygauge {
namespace {

constexpr std::array kKinds{TransformKind::kLinear, TransformKind::kSaturating,
                            TransformKind::kRoot, TransformKind::kLogarithm};

// Worked by hand from the definitions, x = 3 h.
TEST(Transform, ValuesByHand) {
  const double h = 2;
  EXPECT_DOUBLE_EQ((Transform{TransformKind::kLinear, h}(6)), 3);
  EXPECT_DOUBLE_EQ((Transform{TransformKind::kSaturating, h}(6)), 1.5);
  EXPECT_DOUBLE_EQ((Transform{TransformKind::kRoot, h}(12)), 2.449489742783178);  // sqrt(6)
  EXPECT_DOUBLE_EQ((Transform{TransformKind::kLogarithm, h}(6)), 2);
}

TEST(Transform, AllStartAtZeroAndAreOneAtHalf) {
  for (const TransformKind kind : kKinds) {
    const Transform transform{kind, 0.7};
    EXPECT_EQ(transform(0), 0) << TransformName(kind);
    EXPECT_EQ(transform(-5), 0) << TransformName(kind);
    EXPECT_DOUBLE_EQ(transform(0.7), 1) << TransformName(kind);
  }
}

TEST(Transform, RisesAndItsSlopeIsItsDerivative) {
  for (const TransformKind kind : kKinds) {
    const Transform transform{kind, 0.7};
    for (double x = 0.02; x < 20; x *= 1.5) {
      const double step = 1e-5 * x;  // central difference: error of order step^2
      const double numeric = (transform(x + step) - transform(x - step)) / (2 * step);
      EXPECT_GT(numeric, 0);
      EXPECT_NEAR(transform.Slope(x) / numeric, 1, 1e-6) << TransformName(kind) << " at " << x;
    }
  }
}

TEST(Transform, NamesAreRead) {
  for (const TransformKind kind : kKinds) EXPECT_EQ(TransformByName(TransformName(kind)), kind);
  EXPECT_EQ(TransformByName("cubic"), std::nullopt);
}

}  // namespace
}  // namespace laygauge
