#include "report/score_table.h"

#include <fmt/format.h>

#include <algorithm>

namespace laygauge {
namespace {

constexpr std::string_view kRed = "\x1b[31m";
constexpr std::string_view kYellow = "\x1b[33m";
constexpr std::string_view kGreen = "\x1b[32m";
constexpr std::string_view kDim = "\x1b[2m";
constexpr std::string_view kPlain = "\x1b[0m";

std::string Coloured(std::string text, std::string_view colour, const ScoreTableOptions& options) {
  if (!options.colour) return text;
  return fmt::format("{}{}{}", colour, text, kPlain);
}

std::string_view ScoreColour(double score) {
  if (score < 4) return kRed;
  if (score < 7) return kYellow;
  return kGreen;
}

std::string Reasons(const ResultRow& row) {
  std::string text = WhyText(*row.score);
  if (text.empty()) text = "nothing found";
  if (!row.fault.empty()) text += fmt::format("  [{}]", row.fault);
  if (!row.score->unfamiliar.empty()) text += "  (unfamiliar)";
  if (!row.note.empty()) text += fmt::format("  ({})", row.note);
  return text;
}

}  // namespace

std::string FormatScoreTable(const ResultTable& table, const ScoreTableOptions& options) {
  std::vector<const ResultRow*> scored;
  std::vector<const ResultRow*> unscored;
  size_t empty = 0;
  size_t batch_width = 5;
  size_t well_width = 4;
  for (const ResultRow& row : table.rows) {
    if (row.status == CouponStatus::kEmpty) {
      ++empty;
      continue;
    }
    (row.score ? scored : unscored).push_back(&row);
    batch_width = std::max(batch_width, row.batch.size());
    well_width = std::max(well_width, row.well.size());
  }
  std::stable_sort(scored.begin(), scored.end(), [](const ResultRow* a, const ResultRow* b) {
    return a->score->value < b->score->value;
  });

  std::string text = Coloured(
      fmt::format("{:<{}}  {:<{}}  score    sd  why", "batch", batch_width, "well", well_width),
      kDim, options);
  text += '\n';
  for (const ResultRow* row : scored) {
    text += fmt::format("{:<{}}  {:<{}}  {}  {:4.2f}  {}\n", row->batch, batch_width, row->well,
                        well_width,
                        Coloured(fmt::format("{:5.2f}", row->score->value),
                                 ScoreColour(row->score->value), options),
                        row->score->sd, Reasons(*row));
  }
  for (const ResultRow* row : unscored) {
    text += fmt::format("{:<{}}  {:<{}}  {}  {}\n", row->batch, batch_width, row->well, well_width,
                        Coloured("retake     ", kRed, options), row->note);
  }
  if (empty > 0) text += fmt::format("{} empty well{}\n", empty, empty == 1 ? "" : "s");
  if (!table.scale_remark.empty()) text += fmt::format("Scale: {}\n", table.scale_remark);
  return text;
}

}  // namespace laygauge
