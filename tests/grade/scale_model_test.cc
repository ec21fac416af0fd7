#include "grade/scale_model.h"

#include <gtest/gtest.h>

#include <cmath>

#include "grade/scale.h"

namespace laygauge {
namespace {

ModelPrior LoosePrior(Eigen::Index terms) {
  ModelPrior prior;
  prior.weights = Eigen::VectorXd::Constant(terms, 1);
  prior.covariance = 100 * Eigen::MatrixXd::Identity(terms, terms);
  prior.coupon_sd = 0.01;
  prior.grader_sd = 0.01;
  prior.strictness_sd = 1;
  return prior;
}

// Eight coupons with two terms, graded without noise by the weights 2 and 0.5.
ModelData Noiseless(double strictness) {
  ModelData data;
  data.terms.resize(8, 2);
  data.terms << 0, 0, 1, 0, 0, 1, 1, 1, 2, 0, 0, 2, 2, 3, 3, 1;
  data.graders = 2;
  for (Eigen::Index i = 0; i < 8; ++i) {
    const double score = ScoreOfDefects(data.terms.row(i).dot(Eigen::Vector2d(2, 0.5)));
    data.grades.push_back({i, 0, std::min(10.0, score + strictness)});
    data.grades.push_back({i, 1, std::min(10.0, score - strictness)});
  }
  return data;
}

// With next to no noise and a prior that says nothing, the truth comes back. Tolerances: the noise
// of 0.01 points over a weight's lever of about a point a unit.
TEST(ScaleModel, RecoversWeightsAndStrictness) {
  const ModelFit fit = FitModel(Noiseless(0.5), LoosePrior(2));
  EXPECT_NEAR(fit.weights[0], 2, 0.02);
  EXPECT_NEAR(fit.weights[1], 0.5, 0.02);
  EXPECT_NEAR(fit.strictness[0], 0.5, 0.02);
  EXPECT_NEAR(fit.strictness[1], -0.5, 0.02);
}

TEST(ScaleModel, AWeightStaysAtZeroWhereMoreOfADefectGetsBetterGrades) {
  ModelData data = Noiseless(0);
  for (GradeRow& row : data.grades) {
    row.grade = std::min(10.0, 5 + 0.5 * data.terms(row.coupon, 1) - data.terms(row.coupon, 0));
  }
  const ModelFit fit = FitModel(data, LoosePrior(2));
  EXPECT_EQ(fit.weights[1], 0);
  EXPECT_GT(fit.weights[0], 0);
}

TEST(ScaleModel, WithoutDataThePriorStays) {
  ModelData data;
  data.terms = Eigen::MatrixXd::Ones(3, 2);
  ModelPrior prior = LoosePrior(2);
  const ModelFit fit = FitModel(data, prior);
  EXPECT_NEAR((fit.weights - prior.weights).norm(), 0, 1e-9);
  EXPECT_NEAR((fit.weight_covariance - prior.covariance).norm(), 0, 1e-6);
}

// One term, one coupon with D = w: the posterior of w worked by hand for a linear score. With
// small terms the score is 10 - w t; grade variance 0.16 + 0.09, prior variance 0.25.
TEST(ScaleModel, PosteriorByHandWhereTheScoreIsLinear) {
  const double t = 1e-3;
  ModelData data;
  data.terms = Eigen::MatrixXd::Constant(1, 1, t);
  data.graders = 1;
  data.grades = {{0, 0, 9.9}};
  ModelPrior prior = LoosePrior(1);
  prior.covariance(0, 0) = 1e6;
  prior.weights[0] = 100;
  prior.grader_sd = 0.4;
  prior.coupon_sd = 0.3;
  prior.strictness_sd = 0.5;
  const ModelFit fit = FitModel(data, prior);
  const double noise = 0.16 + 0.09 + 0.25;  // grade, coupon and strictness all blur the one grade
  const double precision = 1e-6 + t * t / noise;
  // The score's curvature at D = 0.1 is 0.1 / 9 of its slope.
  EXPECT_NEAR(fit.weight_covariance(0, 0) * precision, 1, 0.03);
}

// Comparisons alone bring the weights into their order, and tie them no tighter than they tell.
TEST(ScaleModel, ComparisonsTeachWeights) {
  ModelData data = Noiseless(0);
  data.grades.clear();
  data.graders = 0;
  const Eigen::Vector2d truth(2, 0.5);
  for (Eigen::Index i = 0; i < 8; ++i) {
    for (Eigen::Index j = 0; j < 8; ++j) {
      if (data.terms.row(i).dot(truth) < data.terms.row(j).dot(truth)) data.pairs.push_back({i, j});
    }
  }
  ModelPrior prior = LoosePrior(2);
  prior.covariance = Eigen::MatrixXd::Identity(2, 2);
  prior.grader_sd = 0.4;
  prior.coupon_sd = 0.3;
  const ModelFit fit = FitModel(data, prior);
  EXPECT_GT(fit.weights[0], 1.3 * fit.weights[1]);
  EXPECT_LT(fit.weight_covariance(0, 0), 1);
  EXPECT_GT(fit.weight_covariance(0, 0), 0.01);
}

// A grade of 10 says "at least 10": a lenient grader's tens do not pull the score above it.
TEST(ScaleModel, TensAreBounds) {
  ModelData data = Noiseless(0);
  data.graders = 1;
  data.grades.clear();
  for (Eigen::Index i = 0; i < 8; ++i) {
    const double score = ScoreOfDefects(data.terms.row(i).dot(Eigen::Vector2d(2, 0.5)));
    data.grades.push_back({i, 0, std::min(10.0, score + 2)});
  }
  ModelPrior prior = LoosePrior(2);
  prior.strictness_sd = 10;
  const ModelFit fit = FitModel(data, prior);
  EXPECT_NEAR(fit.weights[0], 2, 0.05);
  EXPECT_NEAR(fit.strictness[0], 2, 0.05);
}

}  // namespace
}  // namespace laygauge
