#include "grade/scale.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <numeric>
#include <random>

#include "grade/scale_example.h"

namespace laygauge {
namespace {

using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::SizeIs;

double LossSum(const Score& score) {
  return std::accumulate(score.losses.begin(), score.losses.end(), 0.0,
                         [](double sum, const Loss& loss) { return sum + loss.points; });
}

// gap 2 -> term 1, ridge 10 -> term 1: D = 3, score 1 + 9 exp(-1/3), worked by hand.
TEST(Scale, ScoreByHand) {
  const Score score = ScoreCoupon(ExampleScale(), ExampleFeatures(2, 10)).value();
  const double expected = 1 + 9 * std::exp(-1.0 / 3);
  EXPECT_NEAR(score.value, expected, 1e-12);
  ASSERT_THAT(score.losses, SizeIs(2));
  EXPECT_EQ(score.losses[0].name, "gaps");
  EXPECT_NEAR(score.losses[0].points, (10 - expected) * 2 / 3, 1e-12);
  EXPECT_NEAR(score.losses[1].points, (10 - expected) / 3, 1e-12);
  EXPECT_THAT(score.unfamiliar, SizeIs(0));
  // Variance of D: 0.04 + 0.09 by the weights; slope exp(-1/3).
  const double slope = std::exp(-1.0 / 3);
  EXPECT_NEAR(score.sd, std::sqrt(slope * slope * 0.13 + 0.09), 1e-12);
}

TEST(Scale, NoDefectIsTen) {
  const Score score = ScoreCoupon(ExampleScale(), ExampleFeatures(0, 0)).value();
  EXPECT_EQ(score.value, 10);
  EXPECT_EQ(LossSum(score), 0);
}

// Never outside 1..10, losses that add up, and never a better score for more of a defect, over
// features far outside any real coupon's.
TEST(Scale, BoundsSumAndMonotony) {
  const Scale scale = ExampleScale();
  std::mt19937 random(7);
  std::exponential_distribution<double> size(0.05);
  for (int i = 0; i < 500; ++i) {
    const double gap = size(random) - 5;  // some below 0: a noisy feature near none
    const double ridge = size(random) - 5;
    const Score score = ScoreCoupon(scale, ExampleFeatures(gap, ridge)).value();
    EXPECT_GE(score.value, 1);
    EXPECT_LE(score.value, 10);
    EXPECT_NEAR(10 - LossSum(score), score.value, 1e-12);
    EXPECT_GT(score.sd, 0);
    EXPECT_LE(ScoreCoupon(scale, ExampleFeatures(gap + 1, ridge))->value, score.value);
    EXPECT_LE(ScoreCoupon(scale, ExampleFeatures(gap, ridge + 1))->value, score.value);
  }
}

// A feature's noise counts where it exceeds what the residual holds already: 0.3^2 - 0.4^2 / 3.
TEST(Scale, FeatureNoiseWidensTheScore) {
  FeatureTable features = ExampleFeatures(2, 10);
  const double before = ScoreCoupon(ExampleScale(), features)->sd;
  features["ridge_index"].sd = 0.5;  // term sd 0.05, weight 1: less than the residual
  EXPECT_EQ(ScoreCoupon(ExampleScale(), features)->sd, before);
  features["ridge_index"].sd = 5;  // term sd 0.5
  const double slope = std::exp(-1.0 / 3);
  EXPECT_NEAR(std::pow(ScoreCoupon(ExampleScale(), features)->sd, 2) - before * before,
              slope * slope * 0.25 - (0.09 - 0.16 / 3), 1e-12);
}

TEST(Scale, OutOfRangeIsNamedAndLessSure) {
  const Score inside = ScoreCoupon(ExampleScale(), ExampleFeatures(2, 20)).value();
  const Score edge = ScoreCoupon(ExampleScale(), ExampleFeatures(2, 20.9)).value();
  const Score outside = ScoreCoupon(ExampleScale(), ExampleFeatures(2, 40)).value();
  EXPECT_THAT(edge.unfamiliar, SizeIs(0));  // 4.5 % of the range beyond
  EXPECT_THAT(outside.unfamiliar, ElementsAre("ridge_index 40 (graded: 0 to 20)"));
  EXPECT_GT(outside.sd, 1.5 * inside.sd);
}

TEST(Scale, WatchedFeatureOutOfRangeIsNamedAndLessSure) {
  FeatureTable features = ExampleFeatures(2, 10);
  const Score before = ScoreCoupon(ExampleScale(), features).value();
  features["pitch_mm"].value = 0.8;
  const Score after = ScoreCoupon(ExampleScale(), features).value();
  EXPECT_EQ(after.value, before.value);
  EXPECT_GT(after.sd, before.sd);
  EXPECT_THAT(after.unfamiliar, ElementsAre("pitch_mm 0.8 (graded: 0.3 to 0.5)"));
}

TEST(Scale, UnmeasuredFeatures) {
  FeatureTable features = ExampleFeatures(2, 10);
  features["ridge_index"].value.reset();  // typical: term 0.5, sd 0.4
  const Score score = ScoreCoupon(ExampleScale(), features).value();
  EXPECT_NEAR(score.value, ScoreOfDefects(2.5), 1e-12);
  features["gap_area_pct"].value.reset();
  const auto refused = ScoreCoupon(ExampleScale(), features);
  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().kind, ProblemKind::kUnmeasurable);
  EXPECT_THAT(refused.error().message, HasSubstr("gap_area_pct"));
}

TEST(Scale, AFeatureThatTheResultsLack) {
  FeatureTable features = ExampleFeatures(2, 10);
  features.erase("ridge_index");
  const auto score = ScoreCoupon(ExampleScale(), features);
  ASSERT_FALSE(score);
  EXPECT_THAT(score.error().message, HasSubstr("ridge_index"));
}

TEST(Scale, MetricVersionsAreChecked) {
  std::vector<Metric> metrics{{"gaps", 1, {{"gap_area_pct", ""}}, nullptr},
                              {"ridges", 3, {{"ridge_index", ""}}, nullptr},
                              {"lines", 1, {{"pitch_mm", ""}}, nullptr}};
  EXPECT_TRUE(CheckMetricVersions(ExampleScale(), metrics, "s.json"));
  metrics[1].version = 4;
  const Done changed = CheckMetricVersions(ExampleScale(), metrics, "s.json");
  ASSERT_FALSE(changed);
  EXPECT_THAT(changed.error().message, HasSubstr("version 3 of the metric \"ridges\""));
  EXPECT_THAT(changed.error().message, HasSubstr("calibrate anew"));
  metrics[1] = {"ridges", 3, {{"other", ""}}, nullptr};
  EXPECT_FALSE(CheckMetricVersions(ExampleScale(), metrics, "s.json"));
  metrics.erase(metrics.begin() + 1);
  EXPECT_FALSE(CheckMetricVersions(ExampleScale(), metrics, "s.json"));
}

}  // namespace
}  // namespace laygauge
