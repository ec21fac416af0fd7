#include "report/scores_csv.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <nlohmann/json.hpp>
#include <variant>

#include "base/csv.h"

namespace laygauge {
namespace {

// A cell as both formats need it: nothing, a text, or a number with the digits that are shown.
struct Cell {
  std::variant<std::monostate, std::string, double> value;
  int digits = 6;  // significant
};

Cell Number(std::optional<double> number, int digits = 6) {
  if (!number) return {};
  return {*number, digits};
}

struct NamedCell {
  std::string column;
  Cell cell;
};

std::vector<NamedCell> Cells(const ResultTable& table, const ResultRow& row) {
  std::vector<NamedCell> cells{{"batch", {row.batch}}, {"well", {row.well}}};
  if (table.each_take) cells.push_back({"photo", {row.photo}});
  for (size_t i = 0; i < table.setting_columns.size(); ++i) {
    cells.push_back({table.setting_columns[i], {row.settings[i]}});
  }
  const auto score = row.score ? std::optional(row.score->value) : std::nullopt;
  const auto score_sd = row.score ? std::optional(row.score->sd) : std::nullopt;
  cells.push_back({"status", {std::string(StatusName(row.status))}});
  cells.push_back({"note", {row.note}});
  cells.push_back({"takes", Number(row.takes)});
  cells.push_back({"score", Number(score, 4)});
  cells.push_back({"score_sd", Number(score_sd, 3)});
  if (table.with_loss) {
    cells.push_back({"loss", Number(score ? std::optional(10 - *score) : std::nullopt, 4)});
  }
  cells.push_back({"why", {row.score ? WhyText(*row.score) : ""}});
  cells.push_back({"fault", {row.fault}});
  cells.push_back(
      {"unfamiliar",
       {row.score ? fmt::format("{}", fmt::join(row.score->unfamiliar, "; ")) : std::string()}});
  for (size_t i = 0; i < table.feature_columns.size(); ++i) {
    cells.push_back({table.feature_columns[i], Number(row.features[i], 5)});
  }
  cells.push_back({"center_x_mm", Number(row.center_x_mm, 6)});
  cells.push_back({"center_y_mm", Number(row.center_y_mm, 6)});
  cells.push_back({"turn_deg", Number(row.turn_deg, 4)});
  return cells;
}

std::string CsvText(const Cell& cell) {
  if (const auto* text = std::get_if<std::string>(&cell.value)) return *text;
  if (const auto* number = std::get_if<double>(&cell.value)) {
    return fmt::format("{:.{}g}", *number + 0.0, cell.digits);  // + 0.0: no "-0"
  }
  return "";
}

nlohmann::ordered_json JsonValue(const Cell& cell) {
  if (const auto* text = std::get_if<std::string>(&cell.value)) return *text;
  if (const auto* number = std::get_if<double>(&cell.value)) return *number;
  return nullptr;
}

}  // namespace

std::string FormatScoresCsv(const ResultTable& table) {
  ResultRow blank;
  blank.settings.resize(table.setting_columns.size());
  blank.features.resize(table.feature_columns.size());
  std::vector<std::string> columns;
  for (const NamedCell& cell : Cells(table, blank)) columns.push_back(cell.column);
  std::vector<std::vector<std::string>> rows;
  for (const ResultRow& row : table.rows) {
    std::vector<std::string>& fields = rows.emplace_back();
    for (const NamedCell& cell : Cells(table, row)) fields.push_back(CsvText(cell.cell));
  }
  return FormatCsv(columns, rows);
}

std::string FormatScoresJson(const ResultTable& table) {
  nlohmann::ordered_json document;
  document["scale"] = table.scale_name;
  if (!table.scale_remark.empty()) document["remark"] = table.scale_remark;
  document["coupons"] = nlohmann::ordered_json::array();
  for (const ResultRow& row : table.rows) {
    nlohmann::ordered_json coupon;
    for (const NamedCell& cell : Cells(table, row)) coupon[cell.column] = JsonValue(cell.cell);
    document["coupons"].push_back(std::move(coupon));
  }
  return document.dump(1, ' ', false, nlohmann::json::error_handler_t::replace) + "\n";
}

}  // namespace laygauge
