#pragma once

#include <Eigen/Core>
#include <span>

#include "base/error.h"

namespace laygauge {

struct Concordance {
  double w = 0;  // Kendall's coefficient of concordance, 0 to 1
  double chi_square = 0;
  int degrees_of_freedom = 0;
  double p_value = 0;  // that chance agreement gives at least this, large sample
};

// Kendall & Babington Smith, "The problem of m rankings", Annals of Mathematical Statistics 10
// (1939) 275-287, doi:10.1214/aoms/1177732186, corrected for ties. ratings: targets x judges,
// ranked within each judge. Problem: too few, or a judge who ranks all alike throughout.
[[nodiscard]] Expected<Concordance> KendallConcordance(const Eigen::MatrixXd& ratings);

// Kendall's tau-b (Kendall 1945, "The treatment of ties in ranking problems", Biometrika 33).
// Same length; NaN when one side is constant.
[[nodiscard]] double KendallTau(std::span<const double> a, std::span<const double> b);

}  // namespace laygauge
