#include <fmt/format.h>

#include <nlohmann/json.hpp>

#include "grade/agreement.h"

namespace laygauge {
namespace {

using nlohmann::ordered_json;

std::string Number(const std::optional<double>& value, int digits = 2) {
  return value ? fmt::format("{:.{}f}", *value, digits) : "-";
}

std::string KappaText(const std::optional<Kappa>& kappa) {
  return kappa ? fmt::format("{:.2f} ±{:.2f}", kappa->value, kappa->standard_error) : "-";
}

std::string PairLine(const PairAgreement& pair) {
  const std::string names = fmt::format("{}, {}", pair.first, pair.second);
  const std::string difference =
      pair.difference ? fmt::format("{:+.2f} ({:+.2f} to {:+.2f})", pair.difference->mean,
                                    pair.difference->low, pair.difference->high)
                      : "-";
  return fmt::format("  {:<26}{:>7}{:>10}{:>8}{:>14}{:>14}{:>8}   {}\n", names, pair.coupons,
                     Number(pair.spearman), Number(pair.kendall_tau), KappaText(pair.linear_kappa),
                     KappaText(pair.quadratic_kappa), Number(pair.mean_absolute_difference),
                     difference);
}

std::string PairTable(const std::string& title, const std::vector<PairAgreement>& pairs) {
  if (pairs.empty()) return "";
  std::string text = fmt::format("\n{}\n  {:<26}{:>7}{:>10}{:>8}{:>14}{:>14}{:>8}   {}\n", title,
                                 "", "coupons", "Spearman", "tau-b", "kappa, linear", "quadratic",
                                 "|diff|", "difference (95 % of them)");
  for (const PairAgreement& pair : pairs) text += PairLine(pair);
  return text;
}

ordered_json Maybe(const std::optional<double>& value) {
  return value ? ordered_json(*value) : ordered_json(nullptr);
}

ordered_json KappaJson(const std::optional<Kappa>& kappa) {
  if (!kappa) return nullptr;
  return {{"value", kappa->value}, {"standard_error", kappa->standard_error}};
}

ordered_json PairJson(const PairAgreement& pair) {
  ordered_json json{{"first", pair.first}, {"second", pair.second}, {"coupons", pair.coupons}};
  json["spearman"] = Maybe(pair.spearman);
  json["kendall_tau_b"] = Maybe(pair.kendall_tau);
  json["linear_kappa"] = KappaJson(pair.linear_kappa);
  json["quadratic_kappa"] = KappaJson(pair.quadratic_kappa);
  json["mean_absolute_difference"] = Maybe(pair.mean_absolute_difference);
  json["difference"] = nullptr;
  if (pair.difference) {
    const LimitsOfAgreement& difference = *pair.difference;
    json["difference"] = {{"mean", difference.mean},
                          {"mean_95_low", difference.mean_low},
                          {"mean_95_high", difference.mean_high},
                          {"sd", difference.sd},
                          {"limit_low", difference.low},
                          {"limit_high", difference.high}};
  }
  return json;
}

ordered_json PairsJson(const std::vector<PairAgreement>& pairs) {
  ordered_json json = ordered_json::array();
  for (const PairAgreement& pair : pairs) json.push_back(PairJson(pair));
  return json;
}

}  // namespace

std::string FormatAgreement(const AgreementReport& report) {
  std::string text =
      fmt::format("{} grades by {} graders of {} coupons, {} of them graded by all\n",
                  report.judgements, report.graders.size(), report.coupons, report.coupons_of_all);
  if (report.intraclass) {
    text += "\nIntraclass correlations (95 % confidence)\n";
    for (const IntraclassCorrelation& form : report.intraclass->forms) {
      text += fmt::format("  {:<10}{:>6.2f}  ({:.2f} to {:.2f})\n", form.name, form.value, form.low,
                          form.high);
    }
  }
  if (report.concordance) {
    text +=
        fmt::format("\nKendall's W {:.2f} (chi-square {:.1f}, {} degrees of freedom, p {:.2g})\n",
                    report.concordance->w, report.concordance->chi_square,
                    report.concordance->degrees_of_freedom, report.concordance->p_value);
  }
  text += PairTable("Between graders", report.between_graders);
  text += PairTable("Each grader with himself", report.of_each_grader_with_himself);
  text += PairTable("With the scores", report.with_scores);
  if (!report.notes.empty()) text += "\n";
  for (const std::string& note : report.notes) text += fmt::format("Note: {}\n", note);
  return text;
}

std::string FormatAgreementJson(const AgreementReport& report) {
  ordered_json json{{"graders", report.graders},
                    {"judgements", report.judgements},
                    {"coupons", report.coupons},
                    {"coupons_of_all", report.coupons_of_all}};
  json["intraclass"] = ordered_json::array();
  if (report.intraclass) {
    for (const IntraclassCorrelation& form : report.intraclass->forms) {
      json["intraclass"].push_back(
          {{"form", form.name}, {"value", form.value}, {"low", form.low}, {"high", form.high}});
    }
  }
  json["kendall_w"] = nullptr;
  if (report.concordance) {
    json["kendall_w"] = {{"w", report.concordance->w},
                         {"chi_square", report.concordance->chi_square},
                         {"degrees_of_freedom", report.concordance->degrees_of_freedom},
                         {"p", report.concordance->p_value}};
  }
  json["between_graders"] = PairsJson(report.between_graders);
  json["each_with_himself"] = PairsJson(report.of_each_grader_with_himself);
  json["with_scores"] = PairsJson(report.with_scores);
  json["notes"] = report.notes;
  return json.dump(1) + "\n";
}

}  // namespace laygauge
