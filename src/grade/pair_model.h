#pragma once

#include <Eigen/Core>

#include "base/error.h"

namespace laygauge {

// How likely is "a is better than b", a being `difference` better: 1 / (1 + exp(-difference /
// spread)). Bradley & Terry, "Rank analysis of incomplete block designs: I", Biometrika 39 (1952)
// 324-345, doi:10.2307/2334029, in logarithmic worths.
struct PairTerm {
  double log_likelihood = 0;
  double slope = 0;      // d log_likelihood / d difference, > 0
  double curvature = 0;  // -d^2 log_likelihood / d difference^2, > 0
};
[[nodiscard]] PairTerm LikelihoodOfPair(double difference, double spread);

// The spread that fits differences with a normal error of standard deviation `sd`: a logistic
// distribution of the same variance (common practice).
[[nodiscard]] double PairSpread(double sd);

struct BradleyTerryFit {
  Eigen::VectorXd worths;           // logarithmic; the reference item's is 0
  Eigen::VectorXd standard_errors;  // of the differences from the reference
  double log_likelihood = 0;
};

// wins(i, j): how often item i was found better than j. Maximum likelihood.
// Problem: the items fall into two sets of which one never lost to the other (no maximum: Ford,
// "Solution of a ranking problem from binary comparisons", American Mathematical Monthly 64
// (1957)).
[[nodiscard]] Expected<BradleyTerryFit> FitBradleyTerry(const Eigen::MatrixXd& wins,
                                                        Eigen::Index reference);

}  // namespace laygauge
