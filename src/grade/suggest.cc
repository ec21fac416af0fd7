#include "grade/suggest.h"

#include <algorithm>
#include <cmath>
#include <set>

namespace laygauge {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;
using Eigen::VectorXd;

struct Candidate {
  CouponName name;
  VectorXd lever;  // d score / d weights
  double score = 0;
  bool open = false;  // it may be suggested
};

// The covariance once `lever` was observed with noise of that variance.
MatrixXd Observed(const MatrixXd& covariance, const VectorXd& lever, double noise_variance) {
  const VectorXd column = covariance * lever;
  return covariance - column * column.transpose() / (noise_variance + lever.dot(column));
}

double MeanVariance(const std::vector<Candidate>& candidates, const MatrixXd& covariance) {
  double sum = 0;
  for (const Candidate& candidate : candidates) {
    sum += candidate.lever.dot(covariance * candidate.lever);
  }
  return candidates.empty() ? 0 : sum / static_cast<double>(candidates.size());
}

Expected<std::vector<Candidate>> CandidatesOf(const Scale& scale,
                                              const Measurements& measurements) {
  std::set<CouponName> graded;
  for (const GradedCoupon& coupon : scale.coupons) graded.insert({coupon.batch, coupon.well});
  std::vector<Candidate> candidates;
  for (const auto& [name, coupon] : measurements) {
    if (coupon.status != "ok") continue;
    const auto sum = SumDefects(scale, coupon.features);
    if (!sum) return tl::unexpected(sum.error());
    candidates.push_back({name, ScoreSlope(sum->sum) * sum->terms, ScoreOfDefects(sum->sum),
                          !graded.contains(name)});
  }
  return candidates;
}

}  // namespace

Expected<SuggestedGrades> SuggestGrades(const Scale& scale, const Measurements& measurements,
                                        int count) {
  auto candidates = CandidatesOf(scale, measurements);
  if (!candidates) return tl::unexpected(candidates.error());
  const double panel_variance = scale.grader_sd * scale.grader_sd / scale.panel;
  const double coupon_variance =
      std::max(scale.residual_sd * scale.residual_sd - panel_variance, 0.0);
  const double noise = coupon_variance + scale.grader_sd * scale.grader_sd;
  MatrixXd covariance = scale.covariance;
  SuggestedGrades suggested;
  suggested.sd_now = std::sqrt(MeanVariance(*candidates, covariance));
  while (static_cast<int>(suggested.coupons.size()) < count) {
    Candidate* best = nullptr;
    double best_variance = 0;
    for (Candidate& candidate : *candidates) {
      if (!candidate.open) continue;
      const double variance =
          MeanVariance(*candidates, Observed(covariance, candidate.lever, noise));
      if (best != nullptr && variance >= best_variance) continue;
      best = &candidate;
      best_variance = variance;
    }
    if (best == nullptr) break;
    best->open = false;
    covariance = Observed(covariance, best->lever, noise);
    suggested.coupons.push_back({best->name, best->score, std::sqrt(best_variance)});
  }
  return suggested;
}

}  // namespace laygauge
