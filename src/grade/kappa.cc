#include "grade/kappa.h"

#include <algorithm>
#include <cmath>
#include <stdexcept>

namespace laygauge {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;
using Eigen::RowVectorXd;
using Eigen::VectorXd;

constexpr Index kHalfSteps = 19;  // 1, 1.5, ..., 10

Index HalfStep(double grade) {
  return static_cast<Index>(std::lround((std::clamp(grade, 1.0, 10.0) - 1) * 2));
}

MatrixXd Agreement(Index categories, KappaWeights weights) {
  MatrixXd agreement = MatrixXd::Identity(categories, categories);
  if (weights == KappaWeights::kNone) return agreement;
  const double farthest = std::max<double>(1, static_cast<double>(categories - 1));
  for (Index i = 0; i < categories; ++i) {
    for (Index j = 0; j < categories; ++j) {
      const double share = static_cast<double>(std::abs(i - j)) / farthest;
      agreement(i, j) = 1 - (weights == KappaWeights::kLinear ? share : share * share);
    }
  }
  return agreement;
}

}  // namespace

Expected<Kappa> WeightedKappa(const MatrixXd& counts, const MatrixXd& agreement) {
  const double total = counts.sum();
  if (total <= 0) return Unmeasurable("kappa needs coupons that both graders graded");
  const MatrixXd p = counts / total;
  const VectorXd rows = p.rowwise().sum();
  const RowVectorXd columns = p.colwise().sum();
  const MatrixXd chance_table = rows * columns;
  const double observed = p.cwiseProduct(agreement).sum();
  const double chance = chance_table.cwiseProduct(agreement).sum();
  if (1 - chance < 1e-12) {
    return Unmeasurable("both graders gave every coupon the same grade, so kappa says nothing");
  }
  Kappa kappa;
  kappa.value = (observed - chance) / (1 - chance);
  const VectorXd row_mean = agreement * columns.transpose();
  const RowVectorXd column_mean = rows.transpose() * agreement;
  const MatrixXd marginal = row_mean.replicate(1, p.cols()) + column_mean.replicate(p.rows(), 1);
  const double scale = total * (1 - chance) * (1 - chance);
  const double left = p.cwiseProduct((agreement - marginal * (1 - kappa.value)).cwiseAbs2()).sum();
  const double middle = kappa.value - chance * (1 - kappa.value);
  kappa.standard_error = std::sqrt(std::max(0.0, (left - middle * middle) / scale));
  const double null = chance_table.cwiseProduct((agreement - marginal).cwiseAbs2()).sum();
  kappa.standard_error_null = std::sqrt(std::max(0.0, (null - chance * chance) / scale));
  return kappa;
}

Expected<Kappa> WeightedKappa(const MatrixXd& counts, KappaWeights weights) {
  return WeightedKappa(counts, Agreement(counts.rows(), weights));
}

Expected<Kappa> GradeKappa(std::span<const double> a, std::span<const double> b,
                           KappaWeights weights) {
  if (a.size() != b.size()) throw std::invalid_argument("kappa: unpaired grades");
  MatrixXd counts = MatrixXd::Zero(kHalfSteps, kHalfSteps);
  for (size_t i = 0; i < a.size(); ++i) counts(HalfStep(a[i]), HalfStep(b[i])) += 1;
  return WeightedKappa(counts, weights);
}

}  // namespace laygauge
