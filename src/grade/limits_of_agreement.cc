#include "grade/limits_of_agreement.h"

#include <boost/math/distributions/students_t.hpp>
#include <cmath>
#include <stdexcept>
#include <vector>

#include "base/statistics.h"

namespace laygauge {

Expected<LimitsOfAgreement> CompareMeans(std::span<const double> a, std::span<const double> b) {
  if (a.size() != b.size()) throw std::invalid_argument("limits of agreement: unpaired values");
  if (a.size() < 2) return Unmeasurable("limits of agreement need two pairs");
  std::vector<double> differences;
  for (size_t i = 0; i < a.size(); ++i) differences.push_back(a[i] - b[i]);
  const auto n = static_cast<double>(a.size());
  LimitsOfAgreement limits;
  limits.mean = Mean(differences);
  limits.sd = StandardDeviation(differences);
  limits.low = limits.mean - 1.96 * limits.sd;
  limits.high = limits.mean + 1.96 * limits.sd;
  const double t = boost::math::quantile(boost::math::students_t(n - 1), 0.975);
  limits.mean_low = limits.mean - t * limits.sd / std::sqrt(n);
  limits.mean_high = limits.mean + t * limits.sd / std::sqrt(n);
  limits.limit_standard_error = std::sqrt(3 / n) * limits.sd;
  return limits;
}

}  // namespace laygauge
