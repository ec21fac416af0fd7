#include "grade/fit_scale.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "base/statistics.h"
#include "grade/scale_file.h"
#include "grade/simulated_panel.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;
using ::testing::SizeIs;

FitOptions Options() {
  FitOptions options;
  options.name = "test-1";
  options.base = LooseBase();
  return options;
}

CouponName Name(int i) { return {fmt::format("b{}", i % 4), fmt::format("W{}", i)}; }

struct Study {
  Measurements measurements;
  std::vector<Judgement> judgements;
};

// `graded` coupons of 4 batches by three graders of different strictness.
Study Simulate(SimulatedPanel& panel, int graded) {
  Study study;
  for (int i = 0; i < graded; ++i) {
    panel.Draw(Name(i), study.measurements);
    study.judgements.push_back({"ash", Name(i), panel.Grade(Name(i), 0.5)});
    study.judgements.push_back({"birch", Name(i), panel.Grade(Name(i), -0.6)});
    study.judgements.push_back({"cedar", Name(i), panel.Grade(Name(i), 0.1)});
  }
  return study;
}

// score_sd is honest: over coupons not used in the fit, the panel's mean lies within one standard
// deviation about two times in three. 25 studies with 12 graded and 40 other coupons each; the
// share's own standard error, coupons of one study being alike, is about 0.02.
TEST(FitScale, CoverageOnCouponsNotUsed) {
  double within_one = 0;
  double within_two = 0;
  double count = 0;
  for (unsigned seed = 1; seed <= 25; ++seed) {
    SimulatedPanel panel(seed);
    const Study study = Simulate(panel, 12);
    const auto fit = FitScale(study.measurements, study.judgements, {}, Options());
    ASSERT_TRUE(fit) << fit.error().message;
    for (int i = 0; i < 40; ++i) {
      Measurements other;
      const CouponName name{"new", fmt::format("W{}", i)};
      panel.Draw(name, other);
      const Score score = ScoreCoupon(fit->scale, other.at(name).features).value();
      const double error = std::abs(panel.PanelMean(name) - score.value);
      within_one += error <= score.sd ? 1 : 0;
      within_two += error <= 2 * score.sd ? 1 : 0;
      ++count;
    }
  }
  EXPECT_GE(within_one / count, 0.60);
  EXPECT_LE(within_one / count, 0.80);
  EXPECT_GE(within_two / count, 0.90);
  EXPECT_LE(within_two / count, 0.99);
}

// Three graders' strictness of 0.5, -0.6 and 0.1 is found, and more grades bring it nearer.
TEST(FitScale, FindsStrictness) {
  SimulatedPanel panel(3);
  const Study study = Simulate(panel, 24);
  const CalibratedScale fit = FitScale(study.measurements, study.judgements, {}, Options()).value();
  ASSERT_THAT(fit.graders, SizeIs(3));
  const std::vector<double> truth{0.5, -0.6, 0.1};
  for (size_t i = 0; i < 3; ++i) {
    EXPECT_EQ(fit.graders[i].grades, 24);
    EXPECT_NEAR(fit.graders[i].points, truth[i], 3 * fit.graders[i].sd);
    EXPECT_LT(fit.graders[i].sd, 0.3);
  }
  EXPECT_THAT(fit.scale.coupons, SizeIs(24));
  ASSERT_THAT(fit.scale.accuracy, SizeIs(2));  // by coupon, and by batch
  // 0.25 points unseen and a panel mean's noise of 0.23: a mean absolute error of 0.27 at best.
  EXPECT_LT(fit.scale.accuracy[0].mean_absolute_error, 0.45);
}

// 40 answers over 15 coupons, no grades: the fitted order is what the grader sees as far as the
// metrics show it, that is nearly as near to it as the order by the grader's own weights. 0.05 is
// what two swaps of neighbours among 15 change.
TEST(FitScale, ComparisonsAlone) {
  SimulatedPanel panel(11);
  Measurements measurements;
  for (int i = 0; i < 15; ++i) panel.Draw(Name(i), measurements);
  std::vector<Preference> answers;
  for (int i = 0; i < 15; ++i) {
    for (int step = 1; step <= 3 && answers.size() < 40; ++step) {
      const CouponName a = Name(i);
      const CouponName b = Name((i + step) % 15);
      const bool first = panel.Grade(a, 0) >= panel.Grade(b, 0);
      answers.push_back({"ash", first ? a : b, first ? b : a});
    }
  }
  const CalibratedScale fit = FitScale(measurements, {}, answers, Options()).value();
  EXPECT_EQ(fit.comparisons, 40);
  EXPECT_GT(fit.comparisons_foretold, 28);
  std::vector<double> scores;
  std::vector<double> qualities;
  std::vector<double> best;
  for (const GradedCoupon& coupon : fit.scale.coupons) {
    EXPECT_FALSE(coupon.grade);
    scores.push_back(coupon.score);
    const CouponName name{coupon.batch, coupon.well};
    qualities.push_back(panel.Quality(name));
    best.push_back(panel.TrueScore(measurements.at(name).features));
  }
  EXPECT_GT(RankCorrelation(scores, qualities), RankCorrelation(best, qualities) - 0.05);
}

TEST(FitScale, TheFileOfAFittedScaleIsReadAgain) {
  SimulatedPanel panel(5);
  const Study study = Simulate(panel, 8);
  const CalibratedScale fit = FitScale(study.measurements, study.judgements, {}, Options()).value();
  const auto again = ParseScale(FormatScale(fit.scale), "s.json");
  ASSERT_TRUE(again) << again.error().message;
  EXPECT_EQ(again->coupons.size(), 8U);
}

TEST(FitScale, RefusesWithReasons) {
  SimulatedPanel panel(5);
  Study study = Simulate(panel, 8);
  std::vector<Judgement> foreign = study.judgements;
  foreign.push_back({"ash", {"elsewhere", "A1"}, 5});
  const auto unknown = FitScale(study.measurements, foreign, {}, Options());
  ASSERT_FALSE(unknown);
  EXPECT_THAT(unknown.error().message, HasSubstr("elsewhere A1"));
  for (int i = 0; i < 3; ++i) study.measurements[Name(i)] = {"scores.csv", "retake", {}, {}};
  const auto few = FitScale(study.measurements, study.judgements, {}, Options());
  ASSERT_FALSE(few);
  EXPECT_THAT(few.error().message, HasSubstr("only 5 of the graded coupons"));
}

TEST(FitScale, GradedButUnmeasuredCouponsAreNamed) {
  SimulatedPanel panel(5);
  Study study = Simulate(panel, 10);
  study.measurements[Name(1)] = {"scores.csv", "retake", {}, {}};
  const CalibratedScale fit = FitScale(study.measurements, study.judgements, {}, Options()).value();
  ASSERT_THAT(fit.not_measured, SizeIs(1));
  EXPECT_EQ(fit.not_measured[0], Name(1));
}

TEST(FitScale, OptionsAreChecked) {
  EXPECT_NO_THROW(Options().Check());
  EXPECT_THROW(FitOptions{}.Check(), BadOption);
  FitOptions options = Options();
  options.panel = 0;
  EXPECT_THROW(options.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
