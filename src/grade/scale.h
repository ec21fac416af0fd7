#pragma once

#include <Eigen/Core>
#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"
#include "grade/transform.h"
#include "texture/metric.h"

namespace laygauge {

// What was measured on a coupon: feature name -> value and standard deviation, in the feature's
// unit. No value: it could not be measured.
struct FeatureValue {
  std::optional<double> value;
  std::optional<double> sd;
};
using FeatureTable = std::map<std::string, FeatureValue, std::less<>>;

// The points that one kind of defect costs, >= 0.
struct Loss {
  std::string name;  // "gaps"
  double points = 0;
};

// 1 <= value <= 10, and value = 10 - the sum of all losses' points.
struct Score {
  double value = 0;
  double sd = 0;                        // of a panel's mean grade about `value`
  std::vector<Loss> losses;             // the costliest first
  std::vector<std::string> unfamiliar;  // "gap_area_pct 61 (graded: 0 to 51)"
};

// What a scale does with a feature that could not be measured on a coupon.
enum class WhenMissing {
  kNoLoss,   // the defect is not there: no lines, no ridges
  kTypical,  // the mean term of the graded coupons, with their spread as its uncertainty
  kRefuse,   // no score
};

// The range of a feature over the graded coupons.
struct FeatureRange {
  std::string feature;
  std::string metric;  // the metric that measures it, and its version
  int metric_version = 1;
  double low = 0;
  double high = 0;
};

// One term of the scale: weight * transform(feature).
struct ScaleTerm {
  FeatureRange range;
  std::string loss;  // the name under which its points are told; terms may share one
  Transform transform;
  WhenMissing when_missing = WhenMissing::kNoLoss;
  double weight = 0;        // >= 0
  double typical_term = 0;  // mean and standard deviation of the term over the graded coupons
  double typical_sd = 0;
};

struct GradedCoupon {
  std::string batch;
  std::string well;
  std::optional<double> grade;  // the graders' mean, their strictness off; none: only compared
  double score = 0;             // what the scale says
};

// Figures of the calibration, as it found them by leaving coupons out (docs/scale.md).
struct ScaleAccuracy {
  std::string left_out;  // "one coupon at a time", "one batch at a time"
  int coupons = 0;
  double mean_absolute_error = 0;
  double rms_error = 0;
  std::optional<double> rank_correlation;
  std::optional<double> weighted_kappa;  // quadratic, half steps
};

// Metrics -> score (docs/scale.md): score = 1 + 9 exp(-D / 9), D the sum of the terms. Near 10 a
// unit of D costs one point; far below each costs less, so that the score stays above 1.
struct Scale {
  std::string name;        // with version and valid conditions
  std::string remark;      // what must be said wherever a score of it shows; may be empty
  std::string conditions;  // lights, finishes, sizes it was fitted to
  double working_px_per_mm = 0;
  std::vector<ScaleTerm> terms;
  Eigen::MatrixXd covariance;         // of the weights, terms x terms
  std::vector<FeatureRange> watched;  // not in the score; only their ranges are heeded
  double residual_sd = 0;             // points: a panel's mean about the score, weights known
  double grader_sd = 0;               // points: one grade of a steady grader about his own mean
  double strictness_sd = 0;           // points: between graders
  int panel = 1;                      // the number of graders whose mean `Score::sd` is meant for
  std::vector<GradedCoupon> coupons;
  std::vector<ScaleAccuracy> accuracy;
  std::vector<std::string> report;  // what the calibration told, line by line
};

// D, with the parts of its uncertainty; for the fit and for suggestions.
struct DefectSum {
  Eigen::VectorXd terms;        // transform(feature), in the order of Scale::terms
  double sum = 0;               // D
  double weight_variance = 0;   // of D, by the weights' covariance
  double feature_variance = 0;  // of D, by the features' standard deviations
  double unknown_variance = 0;  // of D, by features not measured or outside their graded range
  double outside_share = 0;     // largest distance out of a range, in widths of that range
  std::vector<std::string> unfamiliar;
};

// Problem: a feature of the scale that the table lacks altogether (another program's results), or
// one without value which the scale needs.
[[nodiscard]] Expected<DefectSum> SumDefects(const Scale& scale, const FeatureTable& features);

// Score::sd joins the weights' covariance, what is not known of the features, the panel's noise,
// and the larger one of the photo's noise (the features' standard deviations) and the residual that
// the calibration found: that was found with features of usual noise, which must not count twice.
[[nodiscard]] Expected<Score> ScoreCoupon(const Scale& scale, const FeatureTable& features);

// score = 1 + 9 exp(-D / 9) and its slope d score / d D, for D >= 0.
[[nodiscard]] double ScoreOfDefects(double defects);
[[nodiscard]] double ScoreSlope(double defects);

// Problem: the scale was made with another version of a metric, or with one that is not there.
[[nodiscard]] Done CheckMetricVersions(const Scale& scale, const std::vector<Metric>& metrics,
                                       std::string_view scale_file);

}  // namespace laygauge
