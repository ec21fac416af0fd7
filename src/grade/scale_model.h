#pragma once

#include <Eigen/Core>
#include <vector>

namespace laygauge {

// The data of a calibration, by index.
struct GradeRow {
  Eigen::Index coupon = 0;
  Eigen::Index grader = 0;
  double grade = 0;  // 1 to 10
};
struct PairRow {
  Eigen::Index better = 0;
  Eigen::Index worse = 0;
};
struct ModelData {
  Eigen::MatrixXd terms;  // coupons x terms of the scale, >= 0
  Eigen::Index graders = 0;
  std::vector<GradeRow> grades;
  std::vector<PairRow> pairs;
};

// What is assumed before the data. Standard deviations in points.
struct ModelPrior {
  Eigen::VectorXd weights;     // mean, >= 0
  Eigen::MatrixXd covariance;  // of the weights
  double coupon_sd = 0.3;      // what the metrics do not see of a coupon
  double grader_sd = 0.4;      // of one grade about the grader's own mean
  double strictness_sd = 0.5;  // between graders
};

struct ModelFit {
  Eigen::VectorXd weights;  // >= 0
  Eigen::MatrixXd weight_covariance;
  Eigen::VectorXd strictness;  // of each grader: what he adds to the score
  Eigen::VectorXd strictness_sd;
  Eigen::VectorXd coupon_offsets;  // what the graders see beyond the metrics
  double log_evidence = 0;         // of the data under the prior, up to a constant
};

// grade = score(weights . terms) + coupon offset + strictness + noise, where a grade of 10 says
// only "at least 10" of the sum, and a grade of 1 "at most 1"; of a pair, the better one's score
// plus offset is the larger one by Bradley and Terry's model with noise of sqrt(2) grader_sd. The
// most probable parameters with weights >= 0, by Gauss-Newton steps, each a non-negative
// least-squares problem; covariances and evidence by Laplace's approximation there (MacKay,
// "Bayesian interpolation", Neural Computation 4 (1992) 415-447, doi:10.1162/neco.1992.4.3.415).
[[nodiscard]] ModelFit FitModel(const ModelData& data, const ModelPrior& prior);

}  // namespace laygauge
