#include "cli/sheet_command.h"

#include <fmt/format.h>

#include <charconv>
#include <filesystem>
#include <map>
#include <memory>
#include <optional>

#include "base/file.h"
#include "sheet/draw_sheet.h"
#include "sheet/plan_sheet.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

// As given; what was not given is the ready sheet's.
struct SheetOptions {
  std::string ready = "a5-6";
  std::optional<std::string> page;
  std::optional<int> rows;
  std::optional<int> columns;
  std::optional<double> well_mm;
  std::optional<int> first_marker;
  std::optional<double> floor;
  std::optional<std::string> name;
  fs::path out;

  // Whether another sheet than the ready one comes out.
  [[nodiscard]] bool IsOwn() const {
    return page || rows || columns || well_mm || first_marker || floor || name;
  }
};

constexpr const char* kAfter =
    "\n"
    "Examples:\n"
    "  laygauge sheet                              a5-6.pdf and a5-6.json, here\n"
    "  laygauge sheet a4-15 --out lab/a4-15.pdf    15 wells\n"
    "  laygauge sheet --floor 0.4 --out white.pdf  gray well floors, for white filaments\n"
    "  laygauge sheet --page a3 --rows 4 --columns 7 --first-marker 40 --out big.pdf\n"
    "\n"
    "Print at 100 % (\"actual size\"), then measure the bar at the lower edge: if it is not as\n"
    "long as it says, give its length to \"laygauge score --bar-mm\".\n";

struct PageSize {
  double width_mm;
  double height_mm;
};

// ISO 216 and ANSI/ASME Y14.1 sizes, on their long side.
const std::map<std::string, PageSize, std::less<>>& PageSizes() {
  static const std::map<std::string, PageSize, std::less<>> sizes{
      {"a5", {210, 148}}, {"a4", {297, 210}},         {"a3", {420, 297}},
      {"a2", {594, 420}}, {"letter", {279.4, 215.9}}, {"tabloid", {431.8, 279.4}}};
  return sizes;
}

std::optional<double> NumberIn(std::string_view text) {
  double value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc() || end != text.data() + text.size()) return std::nullopt;
  return value;
}

// "a4", or "WIDTHxHEIGHT" in mm.
PageSize ParsePage(std::string_view text) {
  if (const auto found = PageSizes().find(text); found != PageSizes().end()) return found->second;
  const size_t cross = text.find('x');
  if (cross != std::string_view::npos) {
    const auto width = NumberIn(text.substr(0, cross));
    const auto height = NumberIn(text.substr(cross + 1));
    if (width && height) return {*width, *height};
  }
  throw BadOption(fmt::format(
      "--page {}: a5, a4, a3, a2, letter, tabloid or WIDTHxHEIGHT in mm is expected", text));
}

SheetPlan PlanOf(const SheetOptions& options) {
  SheetPlan plan = options.ready == "a4-15" ? PlanOfA4With15() : PlanOfA5With6();
  if (options.page) {
    const PageSize size = ParsePage(*options.page);
    plan.page_width_mm = size.width_mm;
    plan.page_height_mm = size.height_mm;
  }
  plan.rows = options.rows.value_or(plan.rows);
  plan.columns = options.columns.value_or(plan.columns);
  plan.well_mm = options.well_mm.value_or(plan.well_mm);
  plan.first_marker = options.first_marker.value_or(plan.first_marker);
  plan.well_floor_reflectance = options.floor.value_or(plan.well_floor_reflectance);
  if (options.IsOwn()) plan.name = options.name.value_or(options.out.stem().string());
  return plan;
}

fs::path PdfPath(const SheetOptions& options) {
  if (!options.out.empty() && options.out.extension() != ".pdf") {
    throw BadOption(
        fmt::format("--out {}: a name that ends in .pdf is expected", options.out.string()));
  }
  if (options.out.empty() && options.IsOwn()) {
    throw BadOption("--out is missing: a sheet of one's own needs a file name");
  }
  return options.out.empty() ? fs::path(options.ready + ".pdf") : options.out;
}

int Run(const SheetOptions& options, const Terminal& terminal) {
  const fs::path pdf = PdfPath(options);
  fs::path json = pdf;
  json.replace_extension(".json");
  const SheetDescription sheet = PlanSheet(PlanOf(options));
  const auto written = WriteFilesWhole({{pdf, DrawSheet(sheet)}, {json, FormatSheet(sheet)}});
  if (!written) return Report(terminal, written.error());
  terminal.out << fmt::format("{}: {} wells, markers {} to {}; description in {}\n", pdf.string(),
                              sheet.wells.size(), sheet.markers.front().id, sheet.markers.back().id,
                              json.string());
  return kExitDone;
}

}  // namespace

Command AddSheetCommand(CLI::App& program) {
  const auto options = std::make_shared<SheetOptions>();
  CLI::App* app =
      program.add_subcommand("sheet", "Draw a capture sheet as a PDF, and write its description");
  app->add_option("ready", options->ready, "a ready sheet to start from: a5-6 or a4-15")
      ->check(CLI::IsMember({"a5-6", "a4-15"}))
      ->capture_default_str();
  app->add_option("--out", options->out,
                  "the PDF to write; the description gets the same name with .json");
  app->add_option("--page", options->page,
                  "page: a5, a4, a3, a2, letter, tabloid, or WIDTHxHEIGHT in mm");
  app->add_option("--rows", options->rows, "rows of wells");
  app->add_option("--columns", options->columns, "columns of wells, 2 or more");
  app->add_option("--well-mm", options->well_mm,
                  "side of a well, mm; a coupon needs 6 mm more than its own");
  app->add_option("--first-marker", options->first_marker,
                  "number of the first marker; no two of your sheets may share any");
  app->add_option("--floor", options->floor,
                  "gray well floors, for white filaments: 0.05 to 1, paper white");
  app->add_option("--name", options->name, "the sheet's name; default: the output's name");
  app->footer(kAfter);
  return {app, [options](const Terminal& terminal) { return Run(*options, terminal); }};
}

}  // namespace laygauge
