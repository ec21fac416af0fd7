#pragma once

#include <Eigen/Core>
#include <vector>

#include "base/error.h"

namespace laygauge {

struct LeastSquaresFit {
  Eigen::VectorXd coefficients;
  Eigen::VectorXd standard_errors;
  Eigen::VectorXd residuals;
  double residual_sd = 0;  // divisor rows - columns; 0 if there are as many columns as rows
};

// min |design x - values|, by Householder's QR after scaling each column to unit length: normal
// equations would lose half of the digits (Golub & Van Loan, "Matrix Computations", 4th ed., ch.
// 5). Problem: fewer rows than columns, or columns that depend on each other to rounding.
[[nodiscard]] Expected<LeastSquaresFit> FitLeastSquares(const Eigen::MatrixXd& design,
                                                        const Eigen::VectorXd& values);

struct NonNegativeFit {
  Eigen::VectorXd coefficients;  // those of bounded columns are >= 0
  double residual_norm = 0;
};

// min |design x - values| with x_j >= 0 wherever bounded[j]: active sets, Lawson & Hanson, "Solving
// Least Squares Problems" (1974), ch. 23. Differs from it: columns without bound are never taken
// out of the passive set. The design's columns must be independent.
[[nodiscard]] NonNegativeFit FitNonNegative(const Eigen::MatrixXd& design,
                                            const Eigen::VectorXd& values,
                                            const std::vector<bool>& bounded);

}  // namespace laygauge
