#include "grade/pair_model.h"

#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>
#include <numbers>

namespace laygauge {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;
using Eigen::VectorXd;

// Whether every item can be reached from every other along "lost at least once to".
bool IsConnected(const MatrixXd& wins) {
  const Index n = wins.rows();
  MatrixXd reach = (wins.array() > 0).cast<double>().matrix() + MatrixXd::Identity(n, n);
  for (Index length = 1; length < n; length *= 2) {
    reach = ((reach * reach).array() > 0).cast<double>();
  }
  return reach.minCoeff() > 0;
}

struct Derivatives {
  double log_likelihood = 0;
  VectorXd slope;
  MatrixXd curvature;
};

Derivatives Derive(const MatrixXd& wins, const VectorXd& worths) {
  const Index n = wins.rows();
  Derivatives d{0, VectorXd::Zero(n), MatrixXd::Zero(n, n)};
  for (Index i = 0; i < n; ++i) {
    for (Index j = 0; j < n; ++j) {
      if (wins(i, j) == 0) continue;
      const PairTerm term = LikelihoodOfPair(worths[i] - worths[j], 1);
      d.log_likelihood += wins(i, j) * term.log_likelihood;
      d.slope[i] += wins(i, j) * term.slope;
      d.slope[j] -= wins(i, j) * term.slope;
      const double c = wins(i, j) * term.curvature;
      d.curvature(i, i) += c;
      d.curvature(j, j) += c;
      d.curvature(i, j) -= c;
      d.curvature(j, i) -= c;
    }
  }
  return d;
}

// Takes the item out of the equations: its worth stays as it is.
void HoldAtZero(Index item, Derivatives& d) {
  d.slope[item] = 0;
  d.curvature.row(item).setZero();
  d.curvature.col(item).setZero();
  d.curvature(item, item) = 1;
}

}  // namespace

PairTerm LikelihoodOfPair(double difference, double spread) {
  const double x = difference / spread;
  PairTerm term;
  // log(1 / (1 + exp(-x))) without overflow.
  term.log_likelihood = std::min(x, 0.0) - std::log1p(std::exp(-std::abs(x)));
  const double wrong = 1 / (1 + std::exp(x));
  term.slope = wrong / spread;
  term.curvature = wrong * (1 - wrong) / (spread * spread);
  return term;
}

double PairSpread(double sd) { return sd * std::numbers::sqrt3 / std::numbers::pi; }

Expected<BradleyTerryFit> FitBradleyTerry(const MatrixXd& wins, Index reference) {
  if (!IsConnected(wins)) {
    return Unmeasurable(
        "some of the items never lost to the others, so the comparisons set no bound to their "
        "worth");
  }
  VectorXd worths = VectorXd::Zero(wins.rows());
  BradleyTerryFit fit;
  // The likelihood is concave and Newton's steps converge quadratically; 50 are never needed.
  for (int step = 0; step < 50; ++step) {
    Derivatives d = Derive(wins, worths);
    HoldAtZero(reference, d);
    const Eigen::LDLT<MatrixXd> solver(d.curvature);
    const VectorXd change = solver.solve(d.slope);
    const double largest = change.cwiseAbs().maxCoeff();
    worths += change * std::min(1.0, 2 / largest);
    fit.log_likelihood = d.log_likelihood;
    const MatrixXd covariance = solver.solve(MatrixXd::Identity(wins.rows(), wins.rows()));
    fit.standard_errors = covariance.diagonal().cwiseSqrt();
    fit.standard_errors[reference] = 0;
    if (largest < 1e-12) break;
  }
  fit.worths = worths;
  return fit;
}

}  // namespace laygauge
