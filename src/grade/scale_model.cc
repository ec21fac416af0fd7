#include "grade/scale_model.h"

#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>
#include <numbers>

#include "grade/least_squares.h"
#include "grade/pair_model.h"
#include "grade/scale.h"

namespace laygauge {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;
using Eigen::VectorXd;

// The parameters in one vector: weights, strictness, coupon offsets.
class Posterior {
 public:
  Posterior(const ModelData& data, const ModelPrior& prior)
      : data_(data),
        prior_(prior),
        weights_(data.terms.cols()),
        size_(weights_ + data.graders + data.terms.rows()),
        pair_spread_(PairSpread(std::numbers::sqrt2 * prior.grader_sd)),
        whitening_(Whitening(prior.covariance)) {}

  [[nodiscard]] Index Size() const { return size_; }
  [[nodiscard]] VectorXd Start() const {
    VectorXd parameters = VectorXd::Zero(size_);
    parameters.head(weights_) = prior_.weights;
    return parameters;
  }
  [[nodiscard]] std::vector<bool> Bounded() const {
    std::vector<bool> bounded(static_cast<size_t>(size_), false);
    std::fill_n(bounded.begin(), weights_, true);
    return bounded;
  }

  // Rows of a least-squares problem in the parameters whose quadratic form touches the negative
  // log posterior (twice it) at `at`.
  struct Linear {
    MatrixXd design;
    VectorXd values;
  };
  [[nodiscard]] Linear Linearise(const VectorXd& at) const {
    const auto grades = static_cast<Index>(data_.grades.size());
    const auto pairs = static_cast<Index>(data_.pairs.size());
    Linear linear{MatrixXd::Zero(size_ + grades + pairs, size_),
                  VectorXd::Zero(size_ + grades + pairs)};
    FillPrior(linear);
    for (Index i = 0; i < grades; ++i) FillGrade(at, i, size_ + i, linear);
    for (Index i = 0; i < pairs; ++i) FillPair(at, i, size_ + grades + i, linear);
    return linear;
  }

  // Minus twice the log posterior, without constants and without terms of the prior's size.
  [[nodiscard]] double Cost(const VectorXd& at) const {
    double cost = (whitening_ * (at.head(weights_) - prior_.weights)).squaredNorm();
    cost += at.segment(weights_, data_.graders).squaredNorm() / std::pow(prior_.strictness_sd, 2);
    cost += at.tail(data_.terms.rows()).squaredNorm() / std::pow(prior_.coupon_sd, 2);
    for (const GradeRow& row : data_.grades) {
      cost += std::pow(GradeResidual(at, row) / prior_.grader_sd, 2);
    }
    for (const PairRow& row : data_.pairs) {
      cost -= 2 * LikelihoodOfPair(Difference(at, row), pair_spread_).log_likelihood;
    }
    return cost;
  }

  // Half the log determinant of the prior's precision, and the noise's share of the likelihood.
  [[nodiscard]] double LogNormalisers(const VectorXd& at) const {
    double sum = whitening_.diagonal().array().abs().log().sum();
    sum -= static_cast<double>(data_.graders) * std::log(prior_.strictness_sd);
    sum -= static_cast<double>(data_.terms.rows()) * std::log(prior_.coupon_sd);
    for (const GradeRow& row : data_.grades) {
      if (!IsCensored(at, row)) sum -= std::log(prior_.grader_sd);
    }
    return sum;
  }

  [[nodiscard]] ModelFit Unpack(const VectorXd& at, const MatrixXd& covariance) const {
    ModelFit fit;
    fit.weights = at.head(weights_);
    fit.strictness = at.segment(weights_, data_.graders);
    fit.coupon_offsets = at.tail(data_.terms.rows());
    fit.weight_covariance = covariance.topLeftCorner(weights_, weights_);
    fit.strictness_sd = covariance.diagonal().segment(weights_, data_.graders).cwiseSqrt();
    return fit;
  }

 private:
  // W with W' W = the inverse covariance: lower triangular.
  static MatrixXd Whitening(const MatrixXd& covariance) {
    const MatrixXd lower = covariance.llt().matrixL();
    return lower.triangularView<Eigen::Lower>().solve(
        MatrixXd::Identity(covariance.rows(), covariance.cols()));
  }

  [[nodiscard]] double Defects(const VectorXd& at, Index coupon) const {
    return data_.terms.row(coupon).dot(at.head(weights_));
  }
  // The score with the coupon's offset.
  [[nodiscard]] double Quality(const VectorXd& at, Index coupon) const {
    return ScoreOfDefects(Defects(at, coupon)) + at[OffsetPlace(coupon)];
  }
  [[nodiscard]] double Foretold(const VectorXd& at, const GradeRow& row) const {
    return Quality(at, row.coupon) + at[weights_ + row.grader];
  }
  [[nodiscard]] bool IsCensored(const VectorXd& at, const GradeRow& row) const {
    const double foretold = Foretold(at, row);
    return (row.grade >= 10 && foretold > 10) || (row.grade <= 1 && foretold < 1);
  }
  [[nodiscard]] double GradeResidual(const VectorXd& at, const GradeRow& row) const {
    return IsCensored(at, row) ? 0 : row.grade - Foretold(at, row);
  }
  [[nodiscard]] double Difference(const VectorXd& at, const PairRow& row) const {
    return Quality(at, row.better) - Quality(at, row.worse);
  }
  [[nodiscard]] Index OffsetPlace(Index coupon) const { return weights_ + data_.graders + coupon; }

  void FillPrior(Linear& linear) const {
    linear.design.topLeftCorner(weights_, weights_) = whitening_;
    linear.values.head(weights_) = whitening_ * prior_.weights;
    for (Index i = weights_; i < size_; ++i) {
      const bool is_strictness = i < weights_ + data_.graders;
      linear.design(i, i) = 1 / (is_strictness ? prior_.strictness_sd : prior_.coupon_sd);
    }
  }

  void FillGrade(const VectorXd& at, Index index, Index row_index, Linear& linear) const {
    const GradeRow& row = data_.grades[static_cast<size_t>(index)];
    if (IsCensored(at, row)) return;
    auto design = linear.design.row(row_index);
    design.head(weights_) = ScoreSlope(Defects(at, row.coupon)) * data_.terms.row(row.coupon);
    design[weights_ + row.grader] = 1;
    design[OffsetPlace(row.coupon)] = 1;
    design /= prior_.grader_sd;
    linear.values[row_index] = GradeResidual(at, row) / prior_.grader_sd + design.dot(at);
  }

  // The pair's log likelihood as a parabola about `at`.
  void FillPair(const VectorXd& at, Index index, Index row_index, Linear& linear) const {
    const PairRow& row = data_.pairs[static_cast<size_t>(index)];
    const PairTerm term = LikelihoodOfPair(Difference(at, row), pair_spread_);
    auto design = linear.design.row(row_index);
    design.head(weights_) = ScoreSlope(Defects(at, row.better)) * data_.terms.row(row.better) -
                            ScoreSlope(Defects(at, row.worse)) * data_.terms.row(row.worse);
    design[OffsetPlace(row.better)] = 1;
    design[OffsetPlace(row.worse)] = -1;
    // Far on the wrong side the likelihood is nearly straight: a little curvature bounds the step.
    const double least = 0.02 / (pair_spread_ * pair_spread_);
    const double root = std::sqrt(std::max(term.curvature, least));
    design *= root;
    linear.values[row_index] = term.slope / root + design.dot(at);
  }

  const ModelData& data_;
  const ModelPrior& prior_;
  Index weights_;
  Index size_;
  double pair_spread_;
  MatrixXd whitening_;
};

// The step towards `target`, halved until the cost falls; false if it does not.
bool Advance(const Posterior& posterior, const VectorXd& target, VectorXd& at, double& cost) {
  for (double step = 1; step > 1e-4; step /= 2) {
    const VectorXd next = at + step * (target - at);
    const double next_cost = posterior.Cost(next);
    if (next_cost >= cost) continue;
    const bool moves = cost - next_cost > 1e-9 * (1 + cost);
    at = next;
    cost = next_cost;
    return moves;
  }
  return false;
}

}  // namespace

ModelFit FitModel(const ModelData& data, const ModelPrior& prior) {
  const Posterior posterior(data, prior);
  const std::vector<bool> bounded = posterior.Bounded();
  VectorXd at = posterior.Start();
  double cost = posterior.Cost(at);
  for (int step = 0; step < 100; ++step) {
    const Posterior::Linear linear = posterior.Linearise(at);
    const VectorXd target = FitNonNegative(linear.design, linear.values, bounded).coefficients;
    if (!Advance(posterior, target, at, cost)) break;
  }
  const Posterior::Linear linear = posterior.Linearise(at);
  const Eigen::LDLT<MatrixXd> precision(linear.design.transpose() * linear.design);
  const Index size = posterior.Size();
  ModelFit fit = posterior.Unpack(at, precision.solve(MatrixXd::Identity(size, size)));
  fit.log_evidence =
      posterior.LogNormalisers(at) - cost / 2 - precision.vectorD().array().log().sum() / 2;
  return fit;
}

}  // namespace laygauge
