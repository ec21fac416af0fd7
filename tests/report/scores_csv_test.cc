#include "report/scores_csv.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <nlohmann/json.hpp>

#include "base/csv.h"
#include "report/result_example.h"

namespace laygauge {
namespace {

CsvTable Parsed(const ResultTable& table) {
  auto parsed = ParseCsv(FormatScoresCsv(table), "scores.csv");
  EXPECT_TRUE(parsed) << parsed.error().message;
  return *parsed;
}

std::string Field(const CsvTable& table, size_t row, const std::string& column) {
  return table.rows.at(row).at(table.NeedColumn(column).value());
}

TEST(ScoresCsv, HasARowACouponAndTheSettingsUnchanged) {
  const CsvTable table = Parsed(ExampleTable());
  ASSERT_EQ(table.rows.size(), 3U);
  const std::vector<std::string> first(table.columns.begin(), table.columns.begin() + 8);
  EXPECT_EQ(first, (std::vector<std::string>{"batch", "well", "flow_pct", "remark", "status",
                                             "note", "takes", "score"}));
  EXPECT_EQ(Field(table, 0, "flow_pct"), "97.50");
  EXPECT_EQ(Field(table, 0, "remark"), "first layer, \"reprinted\"");
  EXPECT_EQ(Field(table, 0, "status"), "ok");
  EXPECT_EQ(Field(table, 0, "takes"), "2");
  EXPECT_EQ(Field(table, 0, "score"), "7.346");
  EXPECT_EQ(Field(table, 0, "score_sd"), "0.322");
  EXPECT_EQ(Field(table, 0, "why"), "gaps -2.1, ridges -0.5");  // less than 0.05 is left out
  EXPECT_EQ(Field(table, 0, "pitch_mm"), "0.41235");
  EXPECT_EQ(Field(table, 1, "note"), "12 % of the field is blown out; expose it less");
}

TEST(ScoresCsv, LeavesEmptyWhatIsNotKnown) {
  const CsvTable table = Parsed(ExampleTable());
  EXPECT_EQ(Field(table, 0, "gap_area_pct"), "");
  for (const size_t row : {1U, 2U}) {
    for (const char* column : {"score", "score_sd", "why", "pitch_mm", "center_x_mm"}) {
      EXPECT_EQ(Field(table, row, column), "") << column;
    }
  }
  EXPECT_EQ(Field(table, 1, "status"), "retake");
  EXPECT_EQ(Field(table, 2, "status"), "empty");
}

TEST(ScoresCsv, AddsLossAndPhotoWhereAsked) {
  ResultTable asked = ExampleTable();
  EXPECT_FALSE(Parsed(asked).FindColumn("loss"));
  EXPECT_FALSE(Parsed(asked).FindColumn("photo"));
  asked.with_loss = true;
  asked.each_take = true;
  asked.rows[0].photo = "d1.jpg";
  const CsvTable table = Parsed(asked);
  EXPECT_EQ(Field(table, 0, "photo"), "d1.jpg");
  // 10 - score, each to four digits: off by half of the last digits, 0.0005 each.
  EXPECT_NEAR(std::stod(Field(table, 0, "loss")), 10 - std::stod(Field(table, 0, "score")), 1e-3);
  EXPECT_EQ(Field(table, 1, "loss"), "");
}

TEST(ScoresCsv, NamesNoColumnThatARunSheetMayUse) {
  ResultTable all = ExampleTable();
  all.with_loss = true;
  all.each_take = true;
  const auto& fixed = FixedResultColumns();
  for (const std::string& column : Parsed(all).columns) {
    const bool other = column == "flow_pct" || column == "remark" || column == "pitch_mm" ||
                       column == "gap_area_pct";
    EXPECT_TRUE(other || std::find(fixed.begin(), fixed.end(), column) != fixed.end()) << column;
  }
}

TEST(ScoresJson, SaysTheSameWithNull) {
  ResultTable table = ExampleTable();
  table.scale_remark = "a start";
  const auto json = nlohmann::json::parse(FormatScoresJson(table));
  EXPECT_EQ(json.at("scale"), "example");
  EXPECT_EQ(json.at("remark"), "a start");
  ASSERT_EQ(json.at("coupons").size(), 3U);
  const auto& scored = json.at("coupons")[0];
  EXPECT_DOUBLE_EQ(scored.at("score").get<double>(), 7.3456);
  EXPECT_EQ(scored.at("remark"), "first layer, \"reprinted\"");
  EXPECT_TRUE(scored.at("gap_area_pct").is_null());
  EXPECT_TRUE(json.at("coupons")[1].at("score").is_null());
  const CsvTable csv = Parsed(table);
  EXPECT_EQ(scored.size(), csv.columns.size());
  for (const std::string& column : csv.columns) EXPECT_TRUE(scored.contains(column)) << column;
}

}  // namespace
}  // namespace laygauge
