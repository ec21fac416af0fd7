#include "grade/agreement.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "base/statistics.h"

namespace laygauge {
namespace {

using GradesByGrader = std::map<std::string, std::map<CouponName, double>>;

std::optional<double> Finite(double value) {
  return std::isfinite(value) ? std::optional(value) : std::nullopt;
}

template <class T>
std::optional<T> ValueOf(const Expected<T>& expected) {
  return expected ? std::optional(*expected) : std::nullopt;
}

// Of the coupons that both have.
PairAgreement AgreeOnCommon(const std::string& first, const std::string& second,
                            const std::map<CouponName, double>& a,
                            const std::map<CouponName, double>& b) {
  std::vector<double> values_a;
  std::vector<double> values_b;
  for (const auto& [coupon, value] : a) {
    const auto other = b.find(coupon);
    if (other == b.end()) continue;
    values_a.push_back(value);
    values_b.push_back(other->second);
  }
  return Agree(first, second, values_a, values_b);
}

// Coupons that every grader graded, by row; graders by column.
Eigen::MatrixXd CommonGrades(const GradesByGrader& grades, const std::set<CouponName>& coupons) {
  std::vector<std::vector<double>> rows;
  for (const CouponName& coupon : coupons) {
    std::vector<double> row;
    for (const auto& [grader, of_grader] : grades) {
      const auto found = of_grader.find(coupon);
      if (found != of_grader.end()) row.push_back(found->second);
    }
    if (row.size() == grades.size()) rows.push_back(row);
  }
  Eigen::MatrixXd matrix(static_cast<Eigen::Index>(rows.size()),
                         static_cast<Eigen::Index>(grades.size()));
  for (size_t i = 0; i < rows.size(); ++i) {
    for (size_t j = 0; j < rows[i].size(); ++j) {
      matrix(static_cast<Eigen::Index>(i), static_cast<Eigen::Index>(j)) = rows[i][j];
    }
  }
  return matrix;
}

void CompareAll(const Eigen::MatrixXd& common, AgreementReport& report) {
  const auto intraclass = IntraclassCorrelations(common);
  if (!intraclass) report.notes.push_back(intraclass.error().message);
  report.intraclass = ValueOf(intraclass);
  const auto concordance = KendallConcordance(common);
  if (!concordance) report.notes.push_back(concordance.error().message);
  report.concordance = ValueOf(concordance);
}

std::map<CouponName, double> MeanOfGraders(const GradesByGrader& grades,
                                           const std::set<CouponName>& coupons) {
  std::map<CouponName, double> means;
  for (const CouponName& coupon : coupons) {
    std::vector<double> values;
    for (const auto& [grader, of_grader] : grades) {
      const auto found = of_grader.find(coupon);
      if (found != of_grader.end()) values.push_back(found->second);
    }
    means[coupon] = Mean(values);
  }
  return means;
}

void CompareWithScores(const GradesByGrader& grades, const std::set<CouponName>& coupons,
                       const std::map<CouponName, double>& scores, AgreementReport& report) {
  for (const auto& [grader, of_grader] : grades) {
    report.with_scores.push_back(AgreeOnCommon(grader, "score", of_grader, scores));
  }
  report.with_scores.push_back(
      AgreeOnCommon("mean of graders", "score", MeanOfGraders(grades, coupons), scores));
  const auto unscored = std::count_if(coupons.begin(), coupons.end(),
                                      [&](const auto& coupon) { return !scores.contains(coupon); });
  if (unscored > 0) {
    report.notes.push_back(std::to_string(unscored) + " graded coupons have no score");
  }
}

}  // namespace

PairAgreement Agree(std::string first, std::string second, const std::vector<double>& a,
                    const std::vector<double>& b) {
  PairAgreement agreement;
  agreement.first = std::move(first);
  agreement.second = std::move(second);
  agreement.coupons = static_cast<int>(a.size());
  if (a.size() < 2) return agreement;
  agreement.spearman = Finite(RankCorrelation(a, b));
  agreement.kendall_tau = Finite(KendallTau(a, b));
  agreement.linear_kappa = ValueOf(GradeKappa(a, b, KappaWeights::kLinear));
  agreement.quadratic_kappa = ValueOf(GradeKappa(a, b, KappaWeights::kQuadratic));
  agreement.difference = ValueOf(CompareMeans(a, b));
  double sum = 0;
  for (size_t i = 0; i < a.size(); ++i) sum += std::abs(a[i] - b[i]);
  agreement.mean_absolute_difference = sum / static_cast<double>(a.size());
  return agreement;
}

AgreementReport CompareGraders(const std::vector<Judgement>& judgements,
                               const std::map<CouponName, double>& scores) {
  AgreementReport report;
  report.graders = GraderNames(judgements);
  report.judgements = static_cast<int>(judgements.size());
  GradesByGrader grades;
  for (const std::string& grader : report.graders) grades[grader] = MeanGrades(judgements, grader);
  std::set<CouponName> coupons;
  for (const Judgement& judgement : judgements) coupons.insert(judgement.coupon);
  report.coupons = static_cast<int>(coupons.size());

  const Eigen::MatrixXd common = CommonGrades(grades, coupons);
  report.coupons_of_all = static_cast<int>(common.rows());
  CompareAll(common, report);
  for (auto a = grades.begin(); a != grades.end(); ++a) {
    for (auto b = std::next(a); b != grades.end(); ++b) {
      report.between_graders.push_back(AgreeOnCommon(a->first, b->first, a->second, b->second));
    }
    const RepeatGrades repeats = RepeatsOf(judgements, a->first);
    if (repeats.first.empty()) continue;
    report.of_each_grader_with_himself.push_back(
        Agree(a->first, a->first + " again", repeats.first, repeats.second));
  }
  if (!scores.empty()) CompareWithScores(grades, coupons, scores, report);
  return report;
}

}  // namespace laygauge
