#include "cli/agree_command.h"

#include <filesystem>
#include <memory>

#include "base/file.h"
#include "grade/agreement.h"
#include "grade/grades.h"
#include "grade/results.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

struct AgreeOptions {
  std::vector<fs::path> grades;
  std::vector<fs::path> results;
  fs::path json;
};

constexpr const char* kAfter =
    "\n"
    "Examples:\n"
    "  laygauge agree grades.csv                     several graders in one file\n"
    "  laygauge agree ann.csv bob.csv --results out  and with the scores of out/scores.csv\n"
    "\n"
    "Prints the six intraclass correlations, Kendall's W, weighted kappa, rank correlations, and\n"
    "mean differences with limits of agreement (docs/scale.md).\n";

// Of the coupons that have a score.
Expected<std::map<CouponName, double>> ScoresOf(const std::vector<fs::path>& results) {
  const auto measurements = ReadResults(results, {});
  if (!measurements) return tl::unexpected(measurements.error());
  std::map<CouponName, double> scores;
  for (const auto& [name, coupon] : *measurements) {
    if (coupon.score) scores[name] = *coupon.score;
  }
  return scores;
}

int Run(const AgreeOptions& options, const Terminal& terminal) {
  const auto judgements = ReadGrades(options.grades);
  if (!judgements) return Report(terminal, judgements.error());
  const auto scores = ScoresOf(options.results);
  if (!scores) return Report(terminal, scores.error());
  const AgreementReport report = CompareGraders(*judgements, *scores);
  if (!options.json.empty()) {
    const Done written = WriteFileWhole(options.json, FormatAgreementJson(report));
    if (!written) return Report(terminal, written.error());
  }
  terminal.out << FormatAgreement(report);
  return kExitDone;
}

}  // namespace

Command AddAgreeCommand(CLI::App& program) {
  const auto options = std::make_shared<AgreeOptions>();
  CLI::App* app = program.add_subcommand(
      "agree", "Say how far graders agree with each other and with the scores");
  app->add_option("grades", options->grades, "files of hand grades: grader,batch,well,grade")
      ->required();
  app->add_option("--results", options->results,
                  "result folders, or scores.csv files, with the scores to compare");
  app->add_option("--json", options->json, "write the same figures into this file");
  app->footer(kAfter);
  return {app, [options](const Terminal& terminal) { return Run(*options, terminal); }};
}

}  // namespace laygauge
