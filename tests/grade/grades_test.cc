#include "grade/grades.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <string>

namespace laygauge {
namespace {

using ::testing::AllOf;
using ::testing::HasSubstr;

CsvTable Table(const std::string& header, const std::string& rows) {
  return ParseCsv(header + "\n" + rows, "g.csv").value();
}
CsvTable Grades(const std::string& rows) { return Table("grader,batch,well,grade", rows); }
CsvTable Pairs(const std::string& rows) {
  return Table("grader,better_batch,better_well,worse_batch,worse_well", rows);
}

TEST(Grades, AreRead) {
  const auto judgements = ParseGrades(Grades("ash,b1,A1,7.5\nash,b1,A2,10\nash,b1,A1,7\n")).value();
  ASSERT_EQ(judgements.size(), 3U);
  EXPECT_EQ(judgements[0].coupon, (CouponName{"b1", "A1"}));
  EXPECT_EQ(MeanGrades(judgements, "ash").at({"b1", "A1"}), 7.25);
  const RepeatGrades repeats = RepeatsOf(judgements, "ash");
  ASSERT_EQ(repeats.first.size(), 1U);
  EXPECT_EQ(repeats.first[0], 7.5);
  EXPECT_EQ(repeats.second[0], 7);
}

struct Bad {
  std::string rows;
  std::string said;
};

// Each with file, line and what is wrong.
TEST(Grades, BadRowsAreRefused) {
  const std::vector<Bad> cases{
      {"ash,b1,A1,7.5\nash,b1,A2,good\n", "\"good\" is not a number"},
      {"ash,b1,A1,7.5\nash,b1,A2,11\n", "11 is outside 1 to 10"},
      {"ash,b1,A1,7.5\nash,b1,A2,0.5\n", "0.5 is outside 1 to 10"},
      {"ash,b1,A1,7.5\n,b1,A2,5\n", "grader is empty"},
      {"ash,b1,A1,2\nash,b1,A1,9\n", "but with 2 in line 2"},
      {"ash,b1,A1,7\nash,b1,A1,7\nash,b1,A1,7\n", "a third time"},
      {"ash,b1,A1,7\nash,b1,A2,nan\n", "not a number"},
  };
  for (const Bad& bad : cases) {
    const auto judgements = ParseGrades(Grades(bad.rows));
    ASSERT_FALSE(judgements) << bad.said;
    EXPECT_THAT(judgements.error().message,
                AllOf(HasSubstr("g.csv"), HasSubstr("line"), HasSubstr(bad.said)));
  }
  EXPECT_FALSE(ParseGrades(Grades("")));
  const auto column = ParseGrades(Table("grader,batch,well,mark", "ash,b1,A1,7\n"));
  ASSERT_FALSE(column);
  EXPECT_THAT(column.error().message, HasSubstr("grade"));
}

TEST(Grades, AFileJoinedWithItselfIsRefused) {
  std::string rows;
  for (int i = 0; i < 6; ++i)
    rows += "ash,b1,A" + std::to_string(i) + "," + std::to_string(i + 2) + "\n";
  EXPECT_TRUE(ParseGrades(Grades(rows)));
  const auto twice = ParseGrades(Grades(rows + rows));
  ASSERT_FALSE(twice);
  EXPECT_THAT(twice.error().message, HasSubstr("joined with itself"));
}

TEST(Preferences, BadRowsAreRefused) {
  EXPECT_EQ(ParsePreferences(Pairs("ash,b1,A1,b1,A2\n"))->at(0).worse, (CouponName{"b1", "A2"}));
  const std::vector<Bad> cases{
      {"ash,b1,A1,b1,A1\n", "compared with itself"},
      {"ash,b1,A1,b1,A2\nash,b1,A2,b1,A1\n", "the reverse in line 2"},
      {"ash,b1,A1,b1,A2\nash,b1,A1,b1,A2\n", "same answer as in line 2"},
      {"ash,b1,A1,,A2\n", "worse_batch is empty"},
  };
  for (const Bad& bad : cases) {
    const auto preferences = ParsePreferences(Pairs(bad.rows));
    ASSERT_FALSE(preferences) << bad.said;
    EXPECT_THAT(preferences.error().message, AllOf(HasSubstr("g.csv"), HasSubstr(bad.said)));
  }
}

TEST(Grades, ForeignCouponsAreAllListed) {
  const auto judgements = ParseGrades(Grades("ash,b1,A1,7\nash,b9,A1,7\nash,b1,Z9,7\n")).value();
  const Done done = CheckCouponsKnown(judgements, {}, {{"b1", "A1"}});
  ASSERT_FALSE(done);
  EXPECT_THAT(done.error().message, AllOf(HasSubstr("b1 Z9"), HasSubstr("b9 A1")));
}

TEST(Grades, TooFewOrAllAlikeTeachNothing) {
  std::string rows;
  for (int i = 0; i < 5; ++i)
    rows += "ash,b1,A" + std::to_string(i) + "," + std::to_string(i + 2) + "\n";
  const Done few = CheckGradesTeach(ParseGrades(Grades(rows)).value(), {});
  ASSERT_FALSE(few);
  EXPECT_THAT(few.error().message, HasSubstr("5 coupons are graded"));
  rows.clear();
  for (int i = 0; i < 9; ++i) rows += "ash,b1,A" + std::to_string(i) + ",7\n";
  const Done alike = CheckGradesTeach(ParseGrades(Grades(rows)).value(), {});
  ASSERT_FALSE(alike);
  EXPECT_THAT(alike.error().message, HasSubstr("all grades are 7"));
}

TEST(Grades, AGraderWhoContradictsHimselfThroughout) {
  const auto judgements = ParseGrades(Grades("ash,b,1,5\nash,b,1,8\nash,b,2,8\nash,b,2,5\n"
                                             "ash,b,3,5\nash,b,3,8\nash,b,4,6\nash,b,5,7\n"
                                             "ash,b,6,7\n"))
                              .value();
  const Done done = CheckGradesTeach(judgements, {});
  ASSERT_FALSE(done);
  EXPECT_THAT(done.error().message, HasSubstr("ash contradicts himself throughout"));
}

// Seven items, each beating the next three around a circle.
TEST(Preferences, ThatRunInCircles) {
  std::string rows;
  for (int i = 0; i < 7; ++i) {
    for (int step = 1; step <= 3; ++step) {
      rows += "ash,b," + std::to_string(i) + ",b," + std::to_string((i + step) % 7) + "\n";
    }
  }
  const Done done = CheckGradesTeach({}, ParsePreferences(Pairs(rows)).value());
  ASSERT_FALSE(done);
  // A regular tournament of 7: 14 of its 35 triads are circular (Kendall & Babington Smith 1940,
  // the most there can be: (n^3 - n) / 24).
  EXPECT_THAT(done.error().message, HasSubstr("14 of 35"));
}

TEST(Preferences, AnOrderIsAccepted) {
  std::string rows;
  for (int i = 0; i < 7; ++i) {
    for (int j = i + 1; j < 7; ++j) {
      rows += "ash,b," + std::to_string(i) + ",b," + std::to_string(j) + "\n";
    }
  }
  EXPECT_TRUE(CheckGradesTeach({}, ParsePreferences(Pairs(rows)).value()));
}

}  // namespace
}  // namespace laygauge
