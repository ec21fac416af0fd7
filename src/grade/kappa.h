#pragma once

#include <Eigen/Core>
#include <span>

#include "base/error.h"

namespace laygauge {

// How much a disagreement by d categories counts, of at most m: any alike, d / m, (d / m)^2.
enum class KappaWeights { kNone, kLinear, kQuadratic };

struct Kappa {
  double value = 0;
  double standard_error = 0;       // large sample, for intervals
  double standard_error_null = 0;  // under chance agreement, for tests
};

// Cohen, "Weighted kappa", Psychological Bulletin 70 (1968) 213-220, doi:10.1037/h0026256;
// standard errors of Fleiss, Cohen & Everitt, Psychological Bulletin 72 (1969) 323-327,
// doi:10.1037/h0028106. counts: square, one grader's category by row, the other's by column;
// agreement: the same shape, 1 on the diagonal.
// Problem: no counts, or all in one cell (chance agreement is perfect).
[[nodiscard]] Expected<Kappa> WeightedKappa(const Eigen::MatrixXd& counts,
                                            const Eigen::MatrixXd& agreement);
[[nodiscard]] Expected<Kappa> WeightedKappa(const Eigen::MatrixXd& counts, KappaWeights weights);

// Of two graders' grades in half steps from 1 to 10, paired; other values go to the nearest.
[[nodiscard]] Expected<Kappa> GradeKappa(std::span<const double> a, std::span<const double> b,
                                         KappaWeights weights);

}  // namespace laygauge
