#pragma once

#include <Eigen/Core>
#include <array>
#include <string>

#include "base/error.h"

namespace laygauge {

struct IntraclassCorrelation {
  std::string name;  // "ICC(2,1)"
  double value = 0;
  double low = 0;  // confidence limits
  double high = 0;
};

// The six forms of Shrout & Fleiss, "Intraclass correlations: uses in assessing rater reliability",
// Psychological Bulletin 86 (1979) 420-428, doi:10.1037/0033-2909.86.2.420, with their confidence
// intervals: (1,1) (2,1) (3,1), then the same of the mean of all judges, (1,k) (2,k) (3,k).
struct IntraclassTable {
  double mean_square_targets = 0;
  double mean_square_judges = 0;
  double mean_square_residual = 0;
  double mean_square_within = 0;
  std::array<IntraclassCorrelation, 6> forms;
};

// ratings: targets x judges, none missing; 0 < confidence < 1.
// Problem: fewer than 2 targets or judges, or ratings that do not differ at all.
[[nodiscard]] Expected<IntraclassTable> IntraclassCorrelations(const Eigen::MatrixXd& ratings,
                                                               double confidence = 0.95);

}  // namespace laygauge
