#include "grade/results.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

namespace laygauge {
namespace {

using ::testing::AllOf;
using ::testing::HasSubstr;

CsvTable Scores(const std::string& rows) {
  return ParseCsv("batch,well,status,score,gap_area_pct,ridge_um\n" + rows, "scores.csv").value();
}

TEST(Results, TakesAreAveragedAndEmptyStaysEmpty) {
  const auto found = ParseResults({Scores("b,A1,ok,8,2,10\nb,A1,ok,7,,20\nb,A1,retake,,,\n"
                                          "b,A2,retake,,,\n")},
                                  {"gap_area_pct", "ridge_um"})
                         .value();
  const MeasuredCoupon& first = found.at({"b", "A1"});
  EXPECT_EQ(first.status, "ok");
  EXPECT_EQ(first.score, 7.5);
  EXPECT_EQ(first.features.at("gap_area_pct").value, 2);  // of the one take that has it
  EXPECT_EQ(first.features.at("ridge_um").value, 15);
  EXPECT_EQ(found.at({"b", "A2"}).status, "retake");
  EXPECT_TRUE(found.at({"b", "A2"}).features.empty());
}

TEST(Results, MissingColumnsAndWordsAreRefused) {
  const auto column = ParseResults({Scores("")}, {"blob_count"});
  ASSERT_FALSE(column);
  EXPECT_THAT(column.error().message, HasSubstr("blob_count"));
  const auto word = ParseResults({Scores("b,A1,ok,8,much,1\n")}, {"gap_area_pct"});
  ASSERT_FALSE(word);
  EXPECT_THAT(word.error().message, AllOf(HasSubstr("line 2"), HasSubstr("\"much\"")));
}

}  // namespace
}  // namespace laygauge
