#include "cli/grade_command.h"

#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <memory>
#include <optional>
#include <set>

#include "base/csv.h"
#include "base/file.h"
#include "cli/inputs.h"
#include "grade/suggest.h"
#include "report/encode_png.h"
#include "report/grading_page.h"
#include "texture/metric.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

struct GradeOptions {
  fs::path folder;
  fs::path out;
  bool pairs = false;
  int count = 40;
  int repeats = 3;
  std::optional<int> suggest;
  std::string scale;
  std::uint64_t seed = 1;
};

constexpr const char* kAfter =
    "\n"
    "Examples:\n"
    "  laygauge grade results                       results/grading.html: 1 to 10, one by one\n"
    "  laygauge grade results --suggest 10          the ten coupons whose grades teach most\n"
    "  laygauge grade results --pairs --count 40    which of two is better?\n"
    "\n"
    "Open the page in any browser; it works offline, keeps what was given when it is closed, and\n"
    "saves a CSV file for \"laygauge calibrate\". A few coupons come twice, to show how steady "
    "the\n"
    "grader is.\n";

// The coupon's picture, with its scale.
Expected<GradingCoupon> ReadPicture(const fs::path& folder, const CouponName& name) {
  const fs::path picture = folder / "pictures" / PictureName(name.batch, name.well);
  auto png = ReadFile(picture);
  if (!png) {
    return BadInput(
        fmt::format("{}: the picture of batch {}, well {} is missing; score again "
                    "with --pictures all",
                    picture.string(), name.batch, name.well));
  }
  const auto width_mm = WidthMmOfPng(*png);
  if (!width_mm) {
    return BadInput(
        fmt::format("{}: is not a picture that laygauge wrote; score again", picture.string()));
  }
  return GradingCoupon{name.batch, name.well, std::move(*png), *width_mm};
}

// The coupons that were measured, in the result's order; several takes of one are one.
Expected<std::vector<CouponName>> MeasuredCouponsOf(const fs::path& folder) {
  const auto table = ReadCsv(folder / "scores.csv");
  if (!table) return tl::unexpected(table.error());
  std::vector<size_t> columns;
  for (const char* name : {"batch", "well", "status"}) {
    const auto column = table->NeedColumn(name);
    if (!column) return tl::unexpected(column.error());
    columns.push_back(*column);
  }
  std::vector<CouponName> names;
  std::set<CouponName> seen;
  for (const auto& row : table->rows) {
    const CouponName name{row[columns[0]], row[columns[1]]};
    if (row[columns[2]] == "ok" && seen.insert(name).second) names.push_back(name);
  }
  if (names.size() < 2) {
    return BadInput(fmt::format("{}: {} coupon{} with status ok; grading needs two or more",
                                table->file, names.size(), names.size() == 1 ? "" : "s"));
  }
  return names;
}

// The coupons whose grades would teach the scale most; says what they would bring.
Expected<std::vector<CouponName>> SuggestedCouponsOf(const GradeOptions& options,
                                                     const Terminal& terminal) {
  auto named = ScaleNamed(options.scale);
  if (!named) return tl::unexpected(named.error());
  // The shipped scale learnt from other people's coupons, even if some are named like these.
  if (options.scale.empty()) named->scale.coupons.clear();
  if (auto same = CheckMetricVersions(named->scale, MetricTable(), named->source); !same) {
    return tl::unexpected(same.error());
  }
  const auto measured = ReadResults({options.folder}, FeaturesOf(named->scale));
  if (!measured) return tl::unexpected(measured.error());
  const auto suggested = SuggestGrades(named->scale, *measured, *options.suggest);
  if (!suggested) return tl::unexpected(suggested.error());
  if (suggested->coupons.size() < 2) {
    return BadInput(
        fmt::format("{}: nearly all its coupons went into the scale {}; grade others, or leave "
                    "--suggest out",
                    options.folder.string(), named->source));
  }
  std::vector<CouponName> names;
  for (const Suggestion& suggestion : suggested->coupons) names.push_back(suggestion.coupon);
  terminal.out << fmt::format(
      "What the scale's weights leave open of a score, on average: {:.2f} now, about {:.2f} with "
      "one grade of each of these {} coupons\n",
      suggested->sd_now, suggested->coupons.back().sd_after, names.size());
  return names;
}

Expected<std::vector<GradingCoupon>> ReadPictures(const fs::path& folder,
                                                  const std::vector<CouponName>& names) {
  std::vector<GradingCoupon> coupons;
  for (const CouponName& name : names) {
    auto coupon = ReadPicture(folder, name);
    if (!coupon) return tl::unexpected(coupon.error());
    coupons.push_back(std::move(*coupon));
  }
  return coupons;
}

int Run(const GradeOptions& options, const Terminal& terminal) {
  GradingPageOptions page;
  page.mode = options.pairs ? GradingMode::kPairs : GradingMode::kGrades;
  page.seed = options.seed;
  page.repeats = options.repeats;
  page.pairs = options.count;
  page.Check();
  if (options.suggest && *options.suggest < 2) {
    throw BadOption(fmt::format("--suggest {}: 2 or more is expected", *options.suggest));
  }
  const auto names =
      options.suggest ? SuggestedCouponsOf(options, terminal) : MeasuredCouponsOf(options.folder);
  if (!names) return Report(terminal, names.error());
  const auto coupons = ReadPictures(options.folder, *names);
  if (!coupons) return Report(terminal, coupons.error());
  const fs::path out = options.out.empty() ? options.folder / "grading.html" : options.out;
  if (auto done = WriteFileWhole(out, FormatGradingPage(*coupons, page)); !done) {
    return Report(terminal, done.error());
  }
  const size_t items = GradingOrder(static_cast<int>(coupons->size()), page).size();
  if (options.pairs && items + 1 < coupons->size()) {
    terminal.err << fmt::format(
        "note: {} pairs cannot tie {} coupons into one order; give --count {} or more\n", items,
        coupons->size(), 2 * coupons->size());
  }
  terminal.out << fmt::format(
      "{}: {} coupons, {} judgements, order by seed {}; open it in a browser\n", out.string(),
      coupons->size(), items, page.seed);
  return kExitDone;
}

}  // namespace

Command AddGradeCommand(CLI::App& program) {
  const auto options = std::make_shared<GradeOptions>();
  CLI::App* app = program.add_subcommand(
      "grade", "Make a page on which a person grades the coupons by eye, blind");
  app->add_option("results", options->folder, "a folder that score has written")
      ->required()
      ->type_name("DIR");
  app->add_option("--out", options->out, "the page to write; left out, DIR/grading.html");
  app->add_flag("--pairs", options->pairs, "ask which of two coupons is better");
  app->add_option("--count", options->count, "with --pairs: how many pairs")->capture_default_str();
  app->add_option("--repeats", options->repeats,
                  "coupons that come twice, unannounced; at most a third")
      ->capture_default_str();
  app->add_option("--suggest", options->suggest,
                  "show only the N coupons whose grades would teach the scale most")
      ->type_name("N");
  app->add_option("--scale", options->scale,
                  "with --suggest: the scale to teach; left out, the shipped one");
  app->add_option("--seed", options->seed, "of the random order")->capture_default_str();
  app->footer(kAfter);
  return {app, [options](const Terminal& terminal) { return Run(*options, terminal); }};
}

}  // namespace laygauge
