#include "grade/rank_agreement.h"

#include <algorithm>
#include <boost/math/distributions/chi_squared.hpp>
#include <cmath>
#include <map>
#include <stdexcept>
#include <vector>

#include "base/statistics.h"

namespace laygauge {
namespace {

// Sum of t^3 - t over the groups of t equal values.
double TieSum(std::span<const double> values) {
  std::map<double, double> sizes;
  for (const double value : values) ++sizes[value];
  double sum = 0;
  for (const auto& [value, size] : sizes) sum += size * size * size - size;
  return sum;
}

int Sign(double value) { return (value > 0) - (value < 0); }

}  // namespace

Expected<Concordance> KendallConcordance(const Eigen::MatrixXd& ratings) {
  const auto n = static_cast<double>(ratings.rows());
  const auto m = static_cast<double>(ratings.cols());
  if (ratings.rows() < 2 || ratings.cols() < 2) {
    return Unmeasurable("Kendall's W needs two coupons that two graders graded");
  }
  Eigen::VectorXd rank_sums = Eigen::VectorXd::Zero(ratings.rows());
  double ties = 0;
  for (Eigen::Index judge = 0; judge < ratings.cols(); ++judge) {
    const Eigen::VectorXd column = ratings.col(judge);
    const std::span<const double> values(column.data(), static_cast<size_t>(column.size()));
    const std::vector<double> ranks = Ranks(values);
    rank_sums += Eigen::Map<const Eigen::VectorXd>(ranks.data(), ratings.rows());
    ties += TieSum(values);
  }
  const double spread = (rank_sums.array() - rank_sums.mean()).square().sum();
  const double most = (m * m * (n * n * n - n) - m * ties) / 12;
  if (most <= 0) return Unmeasurable("every grader gave all coupons the same grade");
  Concordance concordance;
  concordance.w = spread / most;
  concordance.chi_square = m * (n - 1) * concordance.w;
  concordance.degrees_of_freedom = static_cast<int>(n) - 1;
  const boost::math::chi_squared distribution(n - 1);
  concordance.p_value =
      boost::math::cdf(boost::math::complement(distribution, concordance.chi_square));
  return concordance;
}

double KendallTau(std::span<const double> a, std::span<const double> b) {
  if (a.size() != b.size()) throw std::invalid_argument("Kendall's tau: unpaired values");
  double concordant = 0;
  double differ_a = 0;
  double differ_b = 0;
  for (size_t i = 0; i < a.size(); ++i) {
    for (size_t j = 0; j < i; ++j) {
      const int sign_a = Sign(a[i] - a[j]);
      const int sign_b = Sign(b[i] - b[j]);
      concordant += sign_a * sign_b;
      differ_a += std::abs(sign_a);
      differ_b += std::abs(sign_b);
    }
  }
  return concordant / std::sqrt(differ_a * differ_b);
}

}  // namespace laygauge
