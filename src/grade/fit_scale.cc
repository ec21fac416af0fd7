#include "grade/fit_scale.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <set>
#include <utility>

#include "base/statistics.h"
#include "grade/calibration_data.h"
#include "grade/kappa.h"

namespace laygauge {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;
using Eigen::VectorXd;

constexpr size_t kFewestCoupons = 6;
constexpr size_t kFewestBatches = 3;

// The base's weights, free to move by `spread` of themselves beyond their own covariance. A weight
// that the base puts near 0 may still come to be: it counts as a quarter of a point.
ModelPrior PriorFrom(const Scale& base, double spread, double coupon_sd, double grader_sd) {
  const auto count = static_cast<Index>(base.terms.size());
  ModelPrior prior;
  prior.weights.resize(count);
  prior.covariance = base.covariance;
  for (Index i = 0; i < count; ++i) {
    prior.weights[i] = base.terms[static_cast<size_t>(i)].weight;
    prior.covariance(i, i) += std::pow(spread * std::max(prior.weights[i], 0.25), 2);
  }
  prior.coupon_sd = coupon_sd;
  prior.grader_sd = grader_sd;
  prior.strictness_sd = base.strictness_sd;
  return prior;
}

// How much the noise may differ from the base's: a factor of two is two standard deviations.
double LogNoisePrior(double factor) { return -0.5 * std::pow(std::log(factor) / 0.35, 2); }

struct ChosenModel {
  ModelPrior prior;
  ModelFit fit;
  double spread = 0;
};

// The best of a coarse grid by evidence; the evidence is flat, and finer steps would be noise.
ChosenModel ChooseModel(const ModelData& data, const Scale& base) {
  // A bare base has no residual of its own: its coupon_sd is what its residual says of one coupon.
  const double coupon_variance =
      base.residual_sd * base.residual_sd - base.grader_sd * base.grader_sd / base.panel;
  const double coupon_sd = std::sqrt(std::max(coupon_variance, 0.01));
  ChosenModel best;
  double best_evidence = -std::numeric_limits<double>::infinity();
  for (const double spread : {0.05, 0.15, 0.4, 1.0}) {
    for (const double coupon_factor : {0.6, 1.0, 1.6}) {
      for (const double grader_factor : {0.7, 1.0, 1.4}) {
        const ModelPrior prior =
            PriorFrom(base, spread, coupon_factor * coupon_sd, grader_factor * base.grader_sd);
        const ModelFit fit = FitModel(data, prior);
        const double evidence =
            fit.log_evidence + LogNoisePrior(coupon_factor) + LogNoisePrior(grader_factor);
        if (evidence <= best_evidence) continue;
        best_evidence = evidence;
        best = {prior, fit, spread};
      }
    }
  }
  return best;
}

// One coupon's grades, each grader's strictness taken off.
struct CouponGrades {
  double mean = 0;
  int count = 0;
};
CouponGrades GradesOf(const ModelData& data, Index coupon, const VectorXd& strictness) {
  CouponGrades grades;
  for (const GradeRow& row : data.grades) {
    if (row.coupon != coupon) continue;
    grades.mean += row.grade - strictness[row.grader];
    ++grades.count;
  }
  if (grades.count > 0) grades.mean /= grades.count;
  return grades;
}

// Leaves the marked coupons out, and says what the rest foretells of them.
void LeaveOut(const CalibrationData& data, const ModelPrior& prior,
              const std::vector<bool>& left_out, std::vector<LeftOutCoupon>& result) {
  const ModelFit fit = FitModel(WithoutCoupons(data.model, left_out), prior);
  for (size_t i = 0; i < data.coupons.size(); ++i) {
    if (!left_out[i]) continue;
    const auto coupon = static_cast<Index>(i);
    const CouponGrades grades = GradesOf(data.model, coupon, fit.strictness);
    if (grades.count == 0) continue;
    const VectorXd terms = data.model.terms.row(coupon);
    const double defects = terms.dot(fit.weights);
    const double slope = ScoreSlope(defects);
    const double variance = slope * slope * terms.dot(fit.weight_covariance * terms) +
                            prior.coupon_sd * prior.coupon_sd +
                            prior.grader_sd * prior.grader_sd / grades.count;
    result.push_back({data.coupons[i], grades.mean, ScoreOfDefects(defects), std::sqrt(variance)});
  }
}

std::vector<LeftOutCoupon> LeaveCouponsOut(const CalibrationData& data, const ModelPrior& prior) {
  std::vector<LeftOutCoupon> result;
  for (size_t i = 0; i < data.coupons.size(); ++i) {
    std::vector<bool> left_out(data.coupons.size(), false);
    left_out[i] = true;
    LeaveOut(data, prior, left_out, result);
  }
  return result;
}

std::vector<LeftOutCoupon> LeaveBatchesOut(const CalibrationData& data, const ModelPrior& prior) {
  std::set<std::string> batches;
  for (const CouponName& coupon : data.coupons) batches.insert(coupon.batch);
  std::vector<LeftOutCoupon> result;
  if (batches.size() < kFewestBatches) return result;
  for (const std::string& batch : batches) {
    std::vector<bool> left_out;
    for (const CouponName& coupon : data.coupons) left_out.push_back(coupon.batch == batch);
    LeaveOut(data, prior, left_out, result);
  }
  return result;
}

// What the foretold standard deviations must be multiplied by to be what leaving out finds, shrunk
// towards 1 as if eight coupons had been as foretold.
double DeviationFactor(const std::vector<LeftOutCoupon>& coupons) {
  constexpr double kPriorCoupons = 8;
  double sum = kPriorCoupons;
  for (const LeftOutCoupon& coupon : coupons) {
    sum += std::pow((coupon.grade - coupon.score) / coupon.sd, 2);
  }
  return std::sqrt(sum / (kPriorCoupons + static_cast<double>(coupons.size())));
}

void SetRange(double value, bool first, FeatureRange& range) {
  range.low = first ? value : std::min(range.low, value);
  range.high = first ? value : std::max(range.high, value);
}

// The ranges of the graded coupons, on top of the base's if it had any.
void SetRanges(const CalibrationData& data, bool from_base, FeatureRange& range) {
  bool first = !from_base;
  for (const FeatureTable& features : data.features) {
    const auto& value = features.at(range.feature).value;
    if (!value) continue;
    SetRange(*value, first, range);
    first = false;
  }
}

void SetTerms(const CalibrationData& data, const ModelFit& fit, Scale& scale) {
  const bool from_base = !scale.coupons.empty();
  for (size_t i = 0; i < scale.terms.size(); ++i) {
    const auto column = static_cast<Index>(i);
    ScaleTerm& term = scale.terms[i];
    term.weight = fit.weights[column];
    SetRanges(data, from_base, term.range);
    if (from_base) continue;
    std::vector<double> values;
    for (size_t c = 0; c < data.features.size(); ++c) {
      if (!data.features[c].at(term.range.feature).value) continue;
      values.push_back(data.model.terms(static_cast<Index>(c), column));
    }
    if (values.empty()) continue;
    term.typical_term = Mean(values);
    term.typical_sd = StandardDeviation(values);
  }
  for (FeatureRange& range : scale.watched) SetRanges(data, from_base, range);
  scale.covariance = fit.weight_covariance;
}

void SetCoupons(const CalibrationData& data, const ModelFit& fit, Scale& scale) {
  scale.coupons.clear();
  for (size_t i = 0; i < data.coupons.size(); ++i) {
    const auto coupon = static_cast<Index>(i);
    const CouponGrades grades = GradesOf(data.model, coupon, fit.strictness);
    const double score = ScoreOfDefects(data.model.terms.row(coupon).dot(fit.weights));
    const auto grade = grades.count > 0 ? std::optional(grades.mean) : std::nullopt;
    scale.coupons.push_back({data.coupons[i].batch, data.coupons[i].well, grade, score});
  }
}

void CountComparisons(const CalibrationData& data, const ModelFit& fit, CalibratedScale& result) {
  const VectorXd defects = data.model.terms * fit.weights;
  for (const PairRow& row : data.model.pairs) {
    ++result.comparisons;
    result.comparisons_foretold += defects[row.better] < defects[row.worse] ? 1 : 0;
  }
}

void AddGraders(const CalibrationData& data, const ModelFit& fit, CalibratedScale& result) {
  for (size_t i = 0; i < data.graders.size(); ++i) {
    const auto grader = static_cast<Index>(i);
    const auto grades = std::count_if(data.model.grades.begin(), data.model.grades.end(),
                                      [&](const GradeRow& row) { return row.grader == grader; });
    result.graders.push_back({data.graders[i], static_cast<int>(grades), fit.strictness[grader],
                              fit.strictness_sd[grader]});
  }
}

CalibratedScale Build(const CalibrationData& data, const FitOptions& options) {
  const ChosenModel chosen = ChooseModel(data.model, options.base);
  CalibratedScale result;
  result.by_coupon = LeaveCouponsOut(data, chosen.prior);
  result.by_batch = LeaveBatchesOut(data, chosen.prior);
  result.not_measured = data.not_measured;
  result.weight_spread = chosen.spread;
  result.coupon_sd = chosen.prior.coupon_sd;
  result.scale = options.base;
  Scale& scale = result.scale;
  scale.name = options.name;
  scale.remark = options.remark;
  scale.conditions = options.conditions;
  scale.panel = options.panel;
  scale.grader_sd = chosen.prior.grader_sd;
  SetTerms(data, chosen.fit, scale);
  SetCoupons(data, chosen.fit, scale);
  const auto& left_out = result.by_batch.empty() ? result.by_coupon : result.by_batch;
  const double noise = std::pow(chosen.prior.grader_sd, 2) / options.panel;
  scale.residual_sd =
      DeviationFactor(left_out) * std::sqrt(std::pow(chosen.prior.coupon_sd, 2) + noise);
  scale.accuracy.clear();
  if (result.by_coupon.size() > 1) {
    scale.accuracy.push_back(SummariseErrors(result.by_coupon, "one coupon at a time"));
  }
  if (!result.by_batch.empty()) {
    scale.accuracy.push_back(SummariseErrors(result.by_batch, "one batch at a time"));
  }
  AddGraders(data, chosen.fit, result);
  CountComparisons(data, chosen.fit, result);
  return result;
}

}  // namespace

void FitOptions::Check() const {
  if (name.empty()) throw BadOption("FitOptions.name: it is empty; a scale needs a name");
  if (panel < 1) {
    throw BadOption(fmt::format("FitOptions.panel: {}; it must be at least 1", panel));
  }
  if (base.terms.empty()) throw BadOption("FitOptions.base: it has no terms to fit");
}

Expected<CalibratedScale> FitScale(const Measurements& measurements,
                                   const std::vector<Judgement>& judgements,
                                   const std::vector<Preference>& preferences,
                                   const FitOptions& options) {
  options.Check();
  std::set<CouponName> known;
  for (const auto& [name, coupon] : measurements) known.insert(name);
  if (const Done done = CheckCouponsKnown(judgements, preferences, known); !done) {
    return tl::unexpected(done.error());
  }
  if (const Done done = CheckGradesTeach(judgements, preferences); !done) {
    return tl::unexpected(done.error());
  }
  const auto data = JoinGradesAndMetrics(options.base, measurements, judgements, preferences);
  if (!data) return tl::unexpected(data.error());
  if (data->coupons.size() < kFewestCoupons) {
    return BadInput(
        fmt::format("only {} of the graded coupons could be measured; a scale needs at least {}",
                    data->coupons.size(), kFewestCoupons));
  }
  return Build(*data, options);
}

ScaleAccuracy SummariseErrors(const std::vector<LeftOutCoupon>& coupons, std::string left_out) {
  std::vector<double> grades;
  std::vector<double> scores;
  ScaleAccuracy accuracy;
  accuracy.left_out = std::move(left_out);
  accuracy.coupons = static_cast<int>(coupons.size());
  for (const LeftOutCoupon& coupon : coupons) {
    grades.push_back(coupon.grade);
    scores.push_back(coupon.score);
    accuracy.mean_absolute_error += std::abs(coupon.grade - coupon.score);
    accuracy.rms_error += std::pow(coupon.grade - coupon.score, 2);
  }
  if (coupons.empty()) return accuracy;
  const auto count = static_cast<double>(coupons.size());
  accuracy.mean_absolute_error /= count;
  accuracy.rms_error = std::sqrt(accuracy.rms_error / count);
  const double rank = coupons.size() > 1 ? RankCorrelation(grades, scores) : std::nan("");
  if (std::isfinite(rank)) accuracy.rank_correlation = rank;
  const auto kappa = GradeKappa(grades, scores, KappaWeights::kQuadratic);
  if (kappa) accuracy.weighted_kappa = kappa->value;
  return accuracy;
}

}  // namespace laygauge
