#include "grade/least_squares.h"

#include <Eigen/QR>
#include <algorithm>
#include <cmath>
#include <limits>

namespace laygauge {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;
using Eigen::VectorXd;

VectorXd ColumnLengths(const MatrixXd& design) {
  VectorXd lengths = design.colwise().norm();
  return (lengths.array() > 0).select(lengths, 1.0);
}

VectorXd Solve(const MatrixXd& design, const VectorXd& values) {
  const VectorXd lengths = ColumnLengths(design);
  const MatrixXd scaled = design * lengths.cwiseInverse().asDiagonal();
  const VectorXd solution = scaled.householderQr().solve(values);
  return solution.cwiseQuotient(lengths);
}

MatrixXd Columns(const MatrixXd& design, const std::vector<Index>& which) {
  MatrixXd columns(design.rows(), static_cast<Index>(which.size()));
  for (size_t i = 0; i < which.size(); ++i)
    columns.col(static_cast<Index>(i)) = design.col(which[i]);
  return columns;
}

// One state of the active-set method.
class ActiveSet {
 public:
  ActiveSet(const MatrixXd& design, const VectorXd& values, const std::vector<bool>& bounded)
      : design_(design), values_(values), bounded_(bounded), x_(VectorXd::Zero(design.cols())) {
    for (Index j = 0; j < design.cols(); ++j) {
      if (!bounded[static_cast<size_t>(j)]) passive_.push_back(j);
    }
    MoveToFeasible();
  }

  // Frees the bounded column that would lower the residual most; false if none would.
  bool FreeBestColumn() {
    const VectorXd gradient = design_.transpose() * (values_ - design_ * x_);
    // Rounding of the gradient: a column's length times the values' length.
    const VectorXd tolerance = 10 * std::numeric_limits<double>::epsilon() *
                               static_cast<double>(design_.rows()) * values_.norm() *
                               ColumnLengths(design_);
    Index best = -1;
    double best_gain = 0;
    for (Index j = 0; j < design_.cols(); ++j) {
      if (IsPassive(j) || gradient[j] <= tolerance[j]) continue;
      const double gain = gradient[j] / ColumnLengths(design_)[j];
      if (gain > best_gain) {
        best = j;
        best_gain = gain;
      }
    }
    if (best < 0) return false;
    passive_.push_back(best);
    MoveToFeasible();
    return true;
  }

  [[nodiscard]] NonNegativeFit Result() const { return {x_, (design_ * x_ - values_).norm()}; }

 private:
  [[nodiscard]] bool IsPassive(Index j) const {
    return std::find(passive_.begin(), passive_.end(), j) != passive_.end();
  }

  // Towards the unbounded optimum of the passive columns, dropping those that reach 0 on the way.
  void MoveToFeasible() {
    while (!passive_.empty()) {
      const VectorXd target = Solve(Columns(design_, passive_), values_);
      double step = 1;
      for (size_t i = 0; i < passive_.size(); ++i) {
        const double to = target[static_cast<Index>(i)];
        const double from = x_[passive_[i]];
        if (IsBounded(passive_[i]) && to < 0) step = std::min(step, from / (from - to));
      }
      for (size_t i = 0; i < passive_.size(); ++i) {
        double& value = x_[passive_[i]];
        value += step * (target[static_cast<Index>(i)] - value);
      }
      if (step == 1) return;
      DropZeros(target);
    }
  }

  void DropZeros(const VectorXd& target) {
    std::vector<Index> kept;
    for (size_t i = 0; i < passive_.size(); ++i) {
      const Index j = passive_[i];
      const bool falls = target[static_cast<Index>(i)] < 0;
      if (IsBounded(j) && falls && x_[j] <= std::numeric_limits<double>::epsilon()) {
        x_[j] = 0;
      } else {
        kept.push_back(j);
      }
    }
    passive_ = kept;
  }

  [[nodiscard]] bool IsBounded(Index j) const { return bounded_[static_cast<size_t>(j)]; }

  const MatrixXd& design_;
  const VectorXd& values_;
  const std::vector<bool>& bounded_;
  VectorXd x_;
  std::vector<Index> passive_;
};

}  // namespace

Expected<LeastSquaresFit> FitLeastSquares(const MatrixXd& design, const VectorXd& values) {
  if (design.rows() < design.cols()) {
    return Unmeasurable("a least-squares fit needs at least as many values as coefficients");
  }
  const VectorXd lengths = ColumnLengths(design);
  const MatrixXd scaled = design * lengths.cwiseInverse().asDiagonal();
  const Eigen::HouseholderQR<MatrixXd> qr(scaled);
  const Index columns = design.cols();
  const MatrixXd triangle = qr.matrixQR().topRows(columns).triangularView<Eigen::Upper>();
  const VectorXd diagonal = triangle.diagonal().cwiseAbs();
  if (diagonal.minCoeff() <= diagonal.maxCoeff() * std::numeric_limits<double>::epsilon()) {
    return Unmeasurable("the columns of a least-squares fit depend on each other");
  }
  LeastSquaresFit fit;
  fit.coefficients = qr.solve(values).cwiseQuotient(lengths);
  fit.residuals = values - design * fit.coefficients;
  const auto freedom = static_cast<double>(design.rows() - columns);
  if (freedom > 0) fit.residual_sd = fit.residuals.norm() / std::sqrt(freedom);
  const MatrixXd inverse =
      triangle.triangularView<Eigen::Upper>().solve(MatrixXd::Identity(columns, columns));
  fit.standard_errors = fit.residual_sd * inverse.rowwise().norm().cwiseQuotient(lengths);
  return fit;
}

NonNegativeFit FitNonNegative(const MatrixXd& design, const VectorXd& values,
                              const std::vector<bool>& bounded) {
  const VectorXd unbounded = Solve(design, values);
  bool feasible = true;
  for (Index j = 0; j < design.cols(); ++j) {
    feasible = feasible && (!bounded[static_cast<size_t>(j)] || unbounded[j] >= 0);
  }
  if (feasible) return {unbounded, (design * unbounded - values).norm()};  // no bound is active
  ActiveSet set(design, values, bounded);
  // Each round lowers the residual, so no set comes twice; rounding could cycle, hence the limit.
  for (Index round = 0; round < 3 * design.cols() && set.FreeBestColumn(); ++round) {
  }
  return set.Result();
}

}  // namespace laygauge
