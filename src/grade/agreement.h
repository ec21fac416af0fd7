#pragma once

#include <map>
#include <optional>
#include <string>
#include <vector>

#include "grade/grades.h"
#include "grade/intraclass.h"
#include "grade/kappa.h"
#include "grade/limits_of_agreement.h"
#include "grade/rank_agreement.h"

namespace laygauge {

// Two columns of grades of the same coupons. What cannot be said of them has no value.
struct PairAgreement {
  std::string first;
  std::string second;
  int coupons = 0;
  std::optional<double> spearman;
  std::optional<double> kendall_tau;
  std::optional<Kappa> linear_kappa;
  std::optional<Kappa> quadratic_kappa;
  std::optional<LimitsOfAgreement> difference;  // first - second
  std::optional<double> mean_absolute_difference;
};
[[nodiscard]] PairAgreement Agree(std::string first, std::string second,
                                  const std::vector<double>& a, const std::vector<double>& b);

struct AgreementReport {
  std::vector<std::string> graders;
  int judgements = 0;
  int coupons = 0;
  int coupons_of_all = 0;  // graded by every grader
  std::optional<IntraclassTable> intraclass;
  std::optional<Concordance> concordance;
  std::vector<PairAgreement> between_graders;
  std::vector<PairAgreement> of_each_grader_with_himself;  // first and second grade of a coupon
  std::vector<PairAgreement> with_scores;  // each grader, then "mean of graders"; may be empty
  std::vector<std::string> notes;          // why something is missing
};

// A coupon that a grader graded twice counts with his mean, but against himself.
[[nodiscard]] AgreementReport CompareGraders(const std::vector<Judgement>& judgements,
                                             const std::map<CouponName, double>& scores);

// For a person, and for a program.
[[nodiscard]] std::string FormatAgreement(const AgreementReport& report);
[[nodiscard]] std::string FormatAgreementJson(const AgreementReport& report);

}  // namespace laygauge
