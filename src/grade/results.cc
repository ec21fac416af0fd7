#include "grade/results.h"

#include <fmt/format.h>

#include <optional>
#include <utility>

#include "base/statistics.h"

namespace laygauge {
namespace {

// An empty field is no value; anything else must be a number.
Expected<std::optional<double>> ReadCell(const CsvTable& table, size_t row, size_t column) {
  const std::string& text = table.rows[row][column];
  if (text.empty()) return std::nullopt;
  const auto number = ParseNumber(text);
  if (number) return number;
  return BadInput(
      fmt::format("{}: {} is \"{}\", not a number", table.Where(row), table.columns[column], text));
}

// All values of one coupon, by column.
struct Readings {
  std::string file;
  std::string status;
  std::map<size_t, std::vector<double>> features;  // by place in the list of features
  std::vector<double> scores;
};

struct Columns {
  size_t batch = 0;
  size_t well = 0;
  size_t status = 0;
  std::optional<size_t> score;
  std::vector<size_t> features;
};

Expected<Columns> FindColumns(const CsvTable& table, const std::vector<std::string>& features) {
  Columns columns;
  for (auto& [name, place] : {std::pair<std::string, size_t*>{"batch", &columns.batch},
                              {"well", &columns.well},
                              {"status", &columns.status}}) {
    const auto column = table.NeedColumn(name);
    if (!column) return tl::unexpected(column.error());
    *place = *column;
  }
  columns.score = table.FindColumn("score");
  for (const std::string& feature : features) {
    const auto column = table.NeedColumn(feature);
    if (!column) return tl::unexpected(column.error());
    columns.features.push_back(*column);
  }
  return columns;
}

Done AddRow(const CsvTable& table, size_t row, const Columns& columns, Readings& readings) {
  readings.file = table.file;
  const std::string& status = table.rows[row][columns.status];
  if (readings.status != "ok") readings.status = status;
  if (status != "ok") return {};
  for (size_t i = 0; i < columns.features.size(); ++i) {
    const auto value = ReadCell(table, row, columns.features[i]);
    if (!value) return tl::unexpected(value.error());
    if (*value) readings.features[i].push_back(**value);
  }
  if (!columns.score) return {};
  const auto score = ReadCell(table, row, *columns.score);
  if (!score) return tl::unexpected(score.error());
  if (*score) readings.scores.push_back(**score);
  return {};
}

MeasuredCoupon Average(const Readings& readings, const std::vector<std::string>& features) {
  MeasuredCoupon coupon{readings.file, readings.status, {}, std::nullopt};
  if (readings.status != "ok") return coupon;
  for (size_t i = 0; i < features.size(); ++i) {
    const auto values = readings.features.find(i);
    FeatureValue& feature = coupon.features[features[i]];
    if (values != readings.features.end()) feature.value = Mean(values->second);
  }
  if (!readings.scores.empty()) coupon.score = Mean(readings.scores);
  return coupon;
}

}  // namespace

Expected<Measurements> ParseResults(const std::vector<CsvTable>& tables,
                                    const std::vector<std::string>& features) {
  std::map<CouponName, Readings> readings;
  for (const CsvTable& table : tables) {
    const auto columns = FindColumns(table, features);
    if (!columns) return tl::unexpected(columns.error());
    for (size_t row = 0; row < table.rows.size(); ++row) {
      const CouponName name{table.rows[row][columns->batch], table.rows[row][columns->well]};
      const Done added = AddRow(table, row, *columns, readings[name]);
      if (!added) return tl::unexpected(added.error());
    }
  }
  Measurements measurements;
  for (const auto& [name, values] : readings) measurements[name] = Average(values, features);
  return measurements;
}

Expected<Measurements> ReadResults(const std::vector<std::filesystem::path>& paths,
                                   const std::vector<std::string>& features) {
  std::vector<CsvTable> tables;
  for (const auto& path : paths) {
    auto table = ReadCsv(std::filesystem::is_directory(path) ? path / "scores.csv" : path);
    if (!table) return tl::unexpected(table.error());
    tables.push_back(*std::move(table));
  }
  return ParseResults(tables, features);
}

std::vector<std::string> FeaturesOf(const Scale& scale) {
  std::vector<std::string> features;
  for (const ScaleTerm& term : scale.terms) features.push_back(term.range.feature);
  for (const FeatureRange& range : scale.watched) features.push_back(range.feature);
  return features;
}

}  // namespace laygauge
