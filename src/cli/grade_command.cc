#include "cli/grade_command.h"

#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <memory>

#include "base/csv.h"
#include "base/file.h"
#include "report/grading_page.h"
#include "report/png.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

struct GradeOptions {
  fs::path folder;
  fs::path out;
  bool pairs = false;
  int count = 40;
  int repeats = 3;
  std::uint64_t seed = 1;
};

constexpr const char* kAfter =
    "\n"
    "Examples:\n"
    "  laygauge grade results                       results/grading.html: 1 to 10, one by one\n"
    "  laygauge grade results --pairs --count 40    which of two is better?\n"
    "\n"
    "Open the page in any browser; it works offline, keeps what was given when it is closed, and\n"
    "saves a CSV file for \"laygauge calibrate\". A few coupons come twice, to show how steady "
    "the\n"
    "grader is.\n";

// The coupons that have a score and a picture, in the result's order.
Expected<std::vector<GradingCoupon>> CouponsOf(const fs::path& folder) {
  const auto table = ReadCsv(folder / "scores.csv");
  if (!table) return tl::unexpected(table.error());
  std::vector<size_t> columns;
  for (const char* name : {"batch", "well", "status"}) {
    const auto column = table->NeedColumn(name);
    if (!column) return tl::unexpected(column.error());
    columns.push_back(*column);
  }
  std::vector<GradingCoupon> coupons;
  for (const auto& row : table->rows) {
    if (row[columns[2]] != "ok") continue;
    GradingCoupon coupon{row[columns[0]], row[columns[1]], "", 0};
    const bool there = std::any_of(coupons.begin(), coupons.end(), [&](const GradingCoupon& other) {
      return other.batch == coupon.batch && other.well == coupon.well;
    });
    if (there) continue;  // another take of it
    const fs::path picture = folder / "pictures" / PictureName(coupon.batch, coupon.well);
    auto png = ReadFile(picture);
    if (!png) {
      return BadInput(
          fmt::format("{}: the picture of batch {}, well {} is missing; score again "
                      "with --pictures all",
                      picture.string(), coupon.batch, coupon.well));
    }
    const auto width_mm = WidthMmOfPng(*png);
    if (!width_mm) {
      return BadInput(
          fmt::format("{}: is not a picture that laygauge wrote; score again", picture.string()));
    }
    coupon.png = std::move(*png);
    coupon.width_mm = *width_mm;
    coupons.push_back(std::move(coupon));
  }
  if (coupons.size() < 2) {
    return BadInput(fmt::format("{}: {} coupon{} with status ok; grading needs two or more",
                                table->file, coupons.size(), coupons.size() == 1 ? "" : "s"));
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
  const auto coupons = CouponsOf(options.folder);
  if (!coupons) return Report(terminal, coupons.error());
  const fs::path out = options.out.empty() ? options.folder / "grading.html" : options.out;
  if (auto done = WriteFileWhole(out, FormatGradingPage(*coupons, page)); !done) {
    return Report(terminal, done.error());
  }
  const size_t items = GradingOrder(static_cast<int>(coupons->size()), page).size();
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
  app->add_option("--repeats", options->repeats, "coupons that come twice, unannounced")
      ->capture_default_str();
  app->add_option("--seed", options->seed, "of the random order")->capture_default_str();
  app->footer(kAfter);
  return {app, [options](const Terminal& terminal) { return Run(*options, terminal); }};
}

}  // namespace laygauge
