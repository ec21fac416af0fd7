#include "cli/calibrate_command.h"

#include <fmt/format.h>

#include <filesystem>
#include <memory>
#include <sstream>

#include "base/file.h"
#include "cli/inputs.h"
#include "grade/calibration_report.h"
#include "grade/fit_scale.h"
#include "grade/scale_file.h"
#include "report/encode_png.h"
#include "texture/metric.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

struct CalibrateOptions {
  std::vector<fs::path> results;
  std::vector<fs::path> grades;
  std::vector<fs::path> pairs;
  fs::path out;
  std::string base;
  std::string name;
  std::string remark;
  std::string conditions;
  int panel = 3;
};

constexpr const char* kAfter =
    "\n"
    "Examples:\n"
    "  laygauge calibrate --results out --grades grades.csv --out mine.json\n"
    "  laygauge calibrate --results out --pairs pairs.csv --out mine.json\n"
    "  laygauge score photos --scale mine.json\n"
    "\n"
    "8 to 15 graded coupons, from bad to good, are enough: the scale starts from the shipped one\n"
    "and leaves it as far as the grades ask for. Several graders may be in one file or in many.\n";

Expected<Scale> BaseOf(const std::string& named) {
  const auto base = ScaleNamed(named);
  if (!base) return tl::unexpected(base.error());
  const Done fits = CheckMetricVersions(base->scale, MetricTable(), base->source);
  if (!fits) return tl::unexpected(fits.error());
  return base->scale;
}

FitOptions FitOptionsOf(const CalibrateOptions& options, const Scale& base) {
  FitOptions fit;
  fit.base = base;
  fit.name = options.name.empty() ? options.out.stem().string() : options.name;
  fit.remark = options.remark;
  fit.conditions = options.conditions;
  fit.panel = options.panel;
  return fit;
}

std::vector<std::string> LinesOf(const std::string& text) {
  std::vector<std::string> lines;
  std::istringstream stream(text);
  for (std::string line; std::getline(stream, line);) lines.push_back(line);
  return lines;
}

// The report's text; the scale in it gets the report too.
Expected<std::string> Calibrate(const CalibrateOptions& options, Scale& scale) {
  const auto base = BaseOf(options.base);
  if (!base) return tl::unexpected(base.error());
  const auto measurements = ReadResults(options.results, FeaturesOf(*base));
  if (!measurements) return tl::unexpected(measurements.error());
  const auto judgements = ReadGrades(options.grades);
  if (!judgements) return tl::unexpected(judgements.error());
  const auto preferences = ReadPreferences(options.pairs);
  if (!preferences) return tl::unexpected(preferences.error());
  const auto fit = FitScale(*measurements, *judgements, *preferences, FitOptionsOf(options, *base));
  if (!fit) return tl::unexpected(fit.error());
  const auto report = ReportCalibration(*fit, *measurements, *judgements);
  if (!report) return tl::unexpected(report.error());
  const std::string text = FormatCalibration(*report, [](const CouponName& coupon) {
    return fmt::format("pictures/{}", PictureName(coupon.batch, coupon.well));
  });
  scale = fit->scale;
  scale.report = LinesOf(text);
  return text;
}

int Run(const CalibrateOptions& options, const Terminal& terminal) {
  if (options.grades.empty() && options.pairs.empty()) {
    throw BadOption("--grades or --pairs is missing: a scale is fitted to what people say");
  }
  Scale scale;
  const auto text = Calibrate(options, scale);
  if (!text) return Report(terminal, text.error());
  const Done written = WriteFileWhole(options.out, FormatScale(scale));
  if (!written) return Report(terminal, written.error());
  terminal.out << *text << fmt::format("\nWritten to {}\n", options.out.string());
  return kExitDone;
}

}  // namespace

Command AddCalibrateCommand(CLI::App& program) {
  const auto options = std::make_shared<CalibrateOptions>();
  CLI::App* app =
      program.add_subcommand("calibrate", "Fit a scale of your own to hand grades or comparisons");
  app->add_option("--results", options->results, "result folders with the graded coupons")
      ->required();
  app->add_option("--grades", options->grades, "hand grades: grader,batch,well,grade");
  app->add_option("--pairs", options->pairs,
                  "comparisons: grader,better_batch,better_well,worse_batch,worse_well");
  app->add_option("--out", options->out, "the scale file to write")->required();
  app->add_option("--base", options->base, "the scale to start from; default: the shipped one");
  app->add_option("--name", options->name, "the scale's name; default: the output's name");
  app->add_option("--remark", options->remark, "what to say wherever a score of it shows");
  app->add_option("--conditions", options->conditions,
                  "what it was made with: filaments, lights, cameras");
  app->add_option("--panel", options->panel,
                  "how many graders' mean the score's deviation is meant for")
      ->capture_default_str();
  app->footer(kAfter);
  return {app, [options](const Terminal& terminal) { return Run(*options, terminal); }};
}

}  // namespace laygauge
