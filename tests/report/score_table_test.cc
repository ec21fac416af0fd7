#include "report/score_table.h"

#include <gtest/gtest.h>

#include <sstream>

#include "report/result_example.h"

namespace laygauge {
namespace {

std::vector<std::string> Lines(const std::string& text) {
  std::vector<std::string> lines;
  std::istringstream stream(text);
  for (std::string line; std::getline(stream, line);) lines.push_back(line);
  return lines;
}

TEST(ScoreTable, ShowsTheWorstFirstAndWhatHasNoScoreLast) {
  ResultTable table = ExampleTable();
  ResultRow worse = table.rows[0];
  worse.well = "B7";
  worse.score->value = 2;
  worse.score->unfamiliar = {"gap_area_pct 61 (graded: 0 to 51)"};
  table.rows.push_back(worse);
  const auto lines = Lines(FormatScoreTable(table, {}));
  ASSERT_EQ(lines.size(), 5U);  // heading, two scores, one to take again, the empty wells
  EXPECT_NE(lines[1].find("B7"), std::string::npos);
  EXPECT_NE(lines[1].find("2.00"), std::string::npos);
  EXPECT_NE(lines[1].find("(unfamiliar)"), std::string::npos);
  EXPECT_NE(lines[2].find("A1"), std::string::npos);
  EXPECT_NE(lines[2].find("7.35  0.32  gaps -2.1, ridges -0.5  [too little material]"),
            std::string::npos);
  EXPECT_NE(lines[3].find("retake"), std::string::npos);
  EXPECT_NE(lines[3].find("blown out"), std::string::npos);
  EXPECT_EQ(lines[4], "1 empty well");
}

TEST(ScoreTable, SaysWhatMustBeSaidOfTheScale) {
  ResultTable table = ExampleTable();
  EXPECT_EQ(FormatScoreTable(table, {}).find("Scale:"), std::string::npos);
  table.scale_remark = "a start";
  EXPECT_EQ(Lines(FormatScoreTable(table, {})).back(), "Scale: a start");
}

TEST(ScoreTable, KeepsColumnsUnderEachOtherWithLongNames) {
  ResultTable table = ExampleTable();
  table.rows[1].batch = "a-rather-long-name";
  const auto lines = Lines(FormatScoreTable(table, {}));
  EXPECT_EQ(lines[0].find("well"), lines[1].find("A1"));
  EXPECT_EQ(lines[0].find("well"), lines[2].find("A2"));
  EXPECT_EQ(lines[0].find("why"), lines[1].find("gaps"));
}

TEST(ScoreTable, IsColouredOnlyWhereAsked) {
  EXPECT_EQ(FormatScoreTable(ExampleTable(), {}).find('\x1b'), std::string::npos);
  const std::string coloured = FormatScoreTable(ExampleTable(), {.colour = true});
  // Each colour is switched off again (ECMA-48, select graphic rendition).
  size_t on = 0;
  size_t off = 0;
  for (size_t at = coloured.find("\x1b["); at != std::string::npos;
       at = coloured.find("\x1b[", at + 1)) {
    (coloured.substr(at, 4) == "\x1b[0m" ? off : on) += 1;
  }
  EXPECT_GE(on, 3U);
  EXPECT_EQ(on, off);
}

}  // namespace
}  // namespace laygauge
