#include "grade/scale.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>

namespace laygauge {
namespace {

constexpr double kBest = 10;
constexpr double kWorst = 1;
constexpr double kSpan = kBest - kWorst;
// A value just beyond the outermost graded coupon is no news: 5 % of the range are allowed.
constexpr double kRangeTolerance = 0.05;

// How far `value` lies out of the range: in widths of it, 0 inside.
double OutsideShare(const FeatureRange& range, double value) {
  const double width = range.high - range.low;
  const double beyond = std::max(range.low - value, value - range.high);
  if (beyond <= kRangeTolerance * width) return 0;
  return width > 0 ? beyond / width : 1;
}

std::string OutsideText(const FeatureRange& range, double value) {
  return fmt::format("{} {:.3g} (graded: {:.3g} to {:.3g})", range.feature, value, range.low,
                     range.high);
}

void AddMissing(const ScaleTerm& term, Eigen::Index index, DefectSum& sum) {
  if (term.when_missing != WhenMissing::kTypical) return;
  sum.terms[index] = term.typical_term;
  sum.unknown_variance += std::pow(term.weight * term.typical_sd, 2);
}

void AddMeasured(const ScaleTerm& term, Eigen::Index index, const FeatureValue& feature,
                 DefectSum& sum) {
  const double value = *feature.value;
  sum.terms[index] = term.transform(value);
  const double sd = feature.sd.value_or(0) * term.transform.Slope(value);
  sum.feature_variance += std::pow(term.weight * sd, 2);
  const double share = OutsideShare(term.range, value);
  if (share == 0) return;
  // Nobody graded so far out: the whole step beyond the range is in doubt.
  const double edge = std::clamp(value, term.range.low, term.range.high);
  const double step = sum.terms[index] - term.transform(edge);
  sum.unknown_variance += std::pow(term.weight * step, 2);
  sum.outside_share = std::max(sum.outside_share, share);
  sum.unfamiliar.push_back(OutsideText(term.range, value));
}

Expected<FeatureValue> Find(const FeatureTable& features, const std::string& name) {
  const auto found = features.find(name);
  if (found != features.end()) return found->second;
  return BadInput(fmt::format(
      "the scale needs the feature {}, which these results do not have; measure the photos again "
      "with this program, or score them with a scale made from such results",
      name));
}

double DeviationOf(const Scale& scale, const DefectSum& sum) {
  const double slope = ScoreSlope(sum.sum);
  const double panel_variance = scale.grader_sd * scale.grader_sd / scale.panel;
  // Out of the graded range the residual itself is less sure: one width out doubles it.
  const double residual = scale.residual_sd * (1 + std::min(sum.outside_share, 2.0));
  const double coupon_variance = std::max(residual * residual - panel_variance, 0.0);
  const double photo_variance = slope * slope * sum.feature_variance;
  const double known_variance = std::max(sum.weight_variance, 0.0) + sum.unknown_variance;
  return std::sqrt(slope * slope * known_variance + panel_variance +
                   std::max(photo_variance, coupon_variance));
}

}  // namespace

double ScoreOfDefects(double defects) { return kWorst + kSpan * std::exp(-defects / kSpan); }

double ScoreSlope(double defects) { return -std::exp(-defects / kSpan); }

Expected<DefectSum> SumDefects(const Scale& scale, const FeatureTable& features) {
  const auto count = static_cast<Eigen::Index>(scale.terms.size());
  DefectSum sum;
  sum.terms = Eigen::VectorXd::Zero(count);
  for (Eigen::Index i = 0; i < count; ++i) {
    const ScaleTerm& term = scale.terms[static_cast<size_t>(i)];
    const auto feature = Find(features, term.range.feature);
    if (!feature) return tl::unexpected(feature.error());
    if (feature->value) {
      AddMeasured(term, i, *feature, sum);
    } else if (term.when_missing == WhenMissing::kRefuse) {
      return Unmeasurable(fmt::format("{} could not be measured, and there is no score without it",
                                      term.range.feature));
    } else {
      AddMissing(term, i, sum);
    }
    sum.sum += term.weight * sum.terms[i];
  }
  for (const FeatureRange& range : scale.watched) {
    const auto feature = Find(features, range.feature);
    if (!feature) return tl::unexpected(feature.error());
    const double share = feature->value ? OutsideShare(range, *feature->value) : 0;
    if (share == 0) continue;
    sum.outside_share = std::max(sum.outside_share, share);
    sum.unfamiliar.push_back(OutsideText(range, *feature->value));
  }
  sum.weight_variance = sum.terms.dot(scale.covariance * sum.terms);
  return sum;
}

Expected<Score> ScoreCoupon(const Scale& scale, const FeatureTable& features) {
  const auto sum = SumDefects(scale, features);
  if (!sum) return tl::unexpected(sum.error());
  Score score;
  score.value = ScoreOfDefects(sum->sum);
  score.sd = DeviationOf(scale, *sum);
  score.unfamiliar = sum->unfamiliar;

  std::map<std::string, double> shares;
  for (size_t i = 0; i < scale.terms.size(); ++i) {
    const ScaleTerm& term = scale.terms[i];
    shares[term.loss] += term.weight * sum->terms[static_cast<Eigen::Index>(i)];
  }
  for (const auto& [name, share] : shares) {
    const double points = sum->sum > 0 ? (kBest - score.value) * share / sum->sum : 0;
    score.losses.push_back({name, points});
  }
  std::stable_sort(score.losses.begin(), score.losses.end(),
                   [](const Loss& a, const Loss& b) { return a.points > b.points; });
  return score;
}

Done CheckMetricVersions(const Scale& scale, const std::vector<Metric>& metrics,
                         std::string_view scale_file) {
  std::vector<FeatureRange> ranges = scale.watched;
  for (const ScaleTerm& term : scale.terms) ranges.push_back(term.range);
  for (const FeatureRange& range : ranges) {
    const auto metric = std::find_if(metrics.begin(), metrics.end(),
                                     [&](const Metric& m) { return m.name == range.metric; });
    if (metric == metrics.end()) {
      return BadInput(
          fmt::format("{}: it scores by the metric \"{}\", which this program does not have; "
                      "calibrate anew from results of this program",
                      scale_file, range.metric));
    }
    if (metric->version != range.metric_version) {
      return BadInput(fmt::format(
          "{}: it was made with version {} of the metric \"{}\", and this program has version {}: "
          "its numbers differ; measure the graded photos again and calibrate anew",
          scale_file, range.metric_version, range.metric, metric->version));
    }
    const bool found =
        std::any_of(metric->features.begin(), metric->features.end(),
                    [&](const FeatureInfo& info) { return info.name == range.feature; });
    if (!found) {
      return BadInput(fmt::format("{}: the metric \"{}\" has no feature {}; calibrate anew",
                                  scale_file, range.metric, range.feature));
    }
  }
  return {};
}

}  // namespace laygauge
