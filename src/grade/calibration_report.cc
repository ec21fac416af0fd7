#include "grade/calibration_report.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>
#include <map>

#include "base/statistics.h"

namespace laygauge {
namespace {

constexpr int kSuggestions = 8;
constexpr size_t kDisagreements = 5;

double Covariance(const std::vector<double>& a, const std::vector<double>& b) {
  const double mean_a = Mean(a);
  const double mean_b = Mean(b);
  double sum = 0;
  for (size_t i = 0; i < a.size(); ++i) sum += (a[i] - mean_a) * (b[i] - mean_b);
  return sum;
}

std::string Maybe(const std::optional<double>& value) {
  return value ? fmt::format("{:.2f}", *value) : "-";
}

std::string AccuracyText(const std::vector<ScaleAccuracy>& accuracy) {
  if (accuracy.empty()) return "";
  std::string text = "\nLeft out, then foretold (points)\n";
  text += fmt::format("  {:<24}{:>8}{:>14}{:>8}{:>10}{:>18}\n", "", "coupons", "mean |error|",
                      "RMS", "rank", "quadratic kappa");
  for (const ScaleAccuracy& a : accuracy) {
    text += fmt::format("  {:<24}{:>8}{:>14.2f}{:>8.2f}{:>10}{:>18}\n", a.left_out, a.coupons,
                        a.mean_absolute_error, a.rms_error, Maybe(a.rank_correlation),
                        Maybe(a.weighted_kappa));
  }
  return text;
}

std::string GraderText(const std::vector<GraderStrictness>& graders) {
  if (graders.empty()) return "";
  std::string text = "\nStrictness (points that a grader adds)\n";
  for (const GraderStrictness& grader : graders) {
    text += fmt::format("  {:<24}{:>8} grades {:>+7.2f} ±{:.2f}\n", grader.grader, grader.grades,
                        grader.points, grader.sd);
  }
  return text;
}

std::string PairText(const std::string& title, const std::vector<PairAgreement>& pairs) {
  if (pairs.empty()) return "";
  std::string text = fmt::format("\n{}\n", title);
  for (const PairAgreement& pair : pairs) {
    const auto kappa =
        pair.quadratic_kappa ? std::optional(pair.quadratic_kappa->value) : std::optional<double>();
    text +=
        fmt::format("  {:<24}{:>8} coupons, mean |difference| {}, rank {}, quadratic kappa {}\n",
                    pair.first + ", " + pair.second, pair.coupons,
                    Maybe(pair.mean_absolute_difference), Maybe(pair.spearman), Maybe(kappa));
  }
  return text;
}

std::string DisagreementText(const std::vector<LeftOutCoupon>& coupons,
                             const std::function<std::string(const CouponName&)>& picture_of) {
  if (coupons.empty()) return "";
  std::vector<LeftOutCoupon> sorted = coupons;
  std::stable_sort(sorted.begin(), sorted.end(), [](const auto& a, const auto& b) {
    return std::abs(a.grade - a.score) > std::abs(b.grade - b.score);
  });
  sorted.resize(std::min(sorted.size(), kDisagreements));
  std::string text = "\nLargest disagreements\n";
  for (const LeftOutCoupon& coupon : sorted) {
    text += fmt::format("  {:<24}grade {:>5.2f}, score without it {:>5.2f} ±{:.2f}   {}\n",
                        ToText(coupon.coupon), coupon.grade, coupon.score, coupon.sd,
                        picture_of(coupon.coupon));
  }
  return text;
}

std::string LossText(const std::vector<LossShare>& losses) {
  std::string text = "\nWhat carries the scale\n";
  for (const LossShare& loss : losses) {
    text += fmt::format(
        "  {:<24}{:>7.1f} % of the differences, {:.2f} points on average, {:.2f} at "
        "most\n",
        loss.loss, 100 * loss.share, loss.mean_points, loss.most_points);
  }
  return text;
}

std::string SuggestionText(const SuggestedGrades& suggested) {
  if (suggested.coupons.empty()) {
    return fmt::format("\nAll measured coupons are graded; the weights leave {:.2f} points open\n",
                       suggested.sd_now);
  }
  std::string text = fmt::format(
      "\nMore grades: the weights leave {:.2f} points open; to teach most, grade in this order\n",
      suggested.sd_now);
  for (const Suggestion& suggestion : suggested.coupons) {
    text += fmt::format("  {:<24}score {:>5.2f}, leaves {:.2f} points open\n",
                        ToText(suggestion.coupon), suggestion.score, suggestion.sd_after);
  }
  return text;
}

}  // namespace

Expected<std::vector<LossShare>> LossShares(const Scale& scale, const Measurements& measurements) {
  std::vector<double> scores;
  std::map<std::string, std::vector<double>> points;
  for (const GradedCoupon& coupon : scale.coupons) {
    const auto found = measurements.find({coupon.batch, coupon.well});
    if (found == measurements.end() || found->second.status != "ok") continue;
    const auto score = ScoreCoupon(scale, found->second.features);
    if (!score) return tl::unexpected(score.error());
    scores.push_back(score->value);
    for (const Loss& loss : score->losses) points[loss.name].push_back(loss.points);
  }
  std::vector<LossShare> shares;
  if (scores.empty()) return shares;
  const double variance = Covariance(scores, scores);
  for (const auto& [loss, values] : points) {
    const double share = variance > 0 ? -Covariance(values, scores) / variance : 0;
    shares.push_back({loss, Mean(values), *std::max_element(values.begin(), values.end()), share});
  }
  std::stable_sort(shares.begin(), shares.end(),
                   [](const LossShare& a, const LossShare& b) { return a.share > b.share; });
  return shares;
}

Expected<CalibrationReport> ReportCalibration(const CalibratedScale& fit,
                                              const Measurements& measurements,
                                              const std::vector<Judgement>& judgements) {
  CalibrationReport report;
  report.fit = fit;
  std::map<CouponName, double> left_out_scores;
  for (const LeftOutCoupon& coupon : fit.by_coupon) left_out_scores[coupon.coupon] = coupon.score;
  report.agreement = CompareGraders(judgements, left_out_scores);
  auto losses = LossShares(fit.scale, measurements);
  if (!losses) return tl::unexpected(losses.error());
  report.losses = *std::move(losses);
  auto suggested = SuggestGrades(fit.scale, measurements, kSuggestions);
  if (!suggested) return tl::unexpected(suggested.error());
  report.suggested = *std::move(suggested);
  return report;
}

std::string FormatCalibration(const CalibrationReport& report,
                              const std::function<std::string(const CouponName&)>& picture_of) {
  const CalibratedScale& fit = report.fit;
  std::string text =
      fmt::format("Scale {}: fitted to {} coupons\n", fit.scale.name, fit.scale.coupons.size());
  if (!fit.not_measured.empty()) {
    std::vector<std::string> names;
    for (const CouponName& coupon : fit.not_measured) names.push_back(ToText(coupon));
    text += fmt::format("Graded, but not measured and not used: {}\n", fmt::join(names, ", "));
  }
  if (fit.comparisons > 0) {
    text += fmt::format("{} of {} comparisons agree with the scores\n", fit.comparisons_foretold,
                        fit.comparisons);
  }
  text += AccuracyText(fit.scale.accuracy);
  text += PairText("Between graders", report.agreement.between_graders);
  text += PairText("Each grader with himself", report.agreement.of_each_grader_with_himself);
  text +=
      PairText("Each grader with the scores, each coupon left out", report.agreement.with_scores);
  text += GraderText(fit.graders);
  text += DisagreementText(fit.by_coupon, picture_of);
  text += LossText(report.losses);
  text += SuggestionText(report.suggested);
  return text;
}

}  // namespace laygauge
