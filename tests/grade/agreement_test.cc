#include "grade/agreement.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <nlohmann/json.hpp>

namespace laygauge {
namespace {

using ::testing::HasSubstr;
using ::testing::SizeIs;

// Shrout & Fleiss's six targets and four judges, as grades.
std::vector<Judgement> ShroutFleiss() {
  const std::vector<std::vector<double>> table{{9, 2, 5, 8}, {6, 1, 3, 2},  {8, 4, 6, 8},
                                               {7, 1, 2, 6}, {10, 5, 6, 9}, {6, 2, 4, 7}};
  std::vector<Judgement> judgements;
  for (size_t target = 0; target < table.size(); ++target) {
    for (size_t judge = 0; judge < 4; ++judge) {
      judgements.push_back({fmt::format("judge{}", judge + 1),
                            {"b", fmt::format("A{}", target)},
                            table[target][judge]});
    }
  }
  return judgements;
}

TEST(Agreement, OfThePublishedTable) {
  const AgreementReport report = CompareGraders(ShroutFleiss(), {});
  EXPECT_EQ(report.coupons_of_all, 6);
  ASSERT_TRUE(report.intraclass);
  EXPECT_NEAR(report.intraclass->forms[2].value, 0.71, 0.005);  // two published decimals
  EXPECT_THAT(report.between_graders, SizeIs(6));
  // Judge 1 - judge 2 by hand: 7 5 4 6 5 4, mean 31/6.
  ASSERT_TRUE(report.between_graders[0].difference);
  EXPECT_NEAR(report.between_graders[0].difference->mean, 31.0 / 6, 1e-12);
  EXPECT_NEAR(*report.between_graders[0].mean_absolute_difference, 31.0 / 6, 1e-12);
  const std::string text = FormatAgreement(report);
  EXPECT_THAT(text, HasSubstr("ICC(3,1)    0.71  (0.34 to 0.95)"));
  const auto json = nlohmann::json::parse(FormatAgreementJson(report));
  EXPECT_NEAR(json["intraclass"][1]["value"].get<double>(), 0.2897637795, 5e-10);
}

TEST(Agreement, WithScoresAndRepeats) {
  std::vector<Judgement> judgements = ShroutFleiss();
  judgements.push_back({"judge1", {"b", "A0"}, 8});
  judgements.push_back({"judge1", {"b", "A1"}, 6});
  judgements.push_back({"judge1", {"b", "A2"}, 7.5});
  std::map<CouponName, double> scores;
  for (const Judgement& judgement : ShroutFleiss()) {
    if (judgement.grader == "judge1") scores[judgement.coupon] = judgement.grade + 0.25;
  }
  scores.erase({"b", "A5"});
  const AgreementReport report = CompareGraders(judgements, scores);
  ASSERT_THAT(report.with_scores, SizeIs(5));
  EXPECT_EQ(report.with_scores[1].coupons, 5);
  EXPECT_EQ(report.with_scores[4].first, "mean of graders");
  ASSERT_THAT(report.of_each_grader_with_himself, SizeIs(1));
  EXPECT_NEAR(*report.of_each_grader_with_himself[0].mean_absolute_difference, 0.5, 1e-12);
  EXPECT_THAT(report.notes, ::testing::ElementsAre("1 graded coupons have no score"));
}

// One grader alone: no agreement between graders, and a reason instead of numbers.
TEST(Agreement, OfOneGrader) {
  std::vector<Judgement> judgements = ShroutFleiss();
  std::erase_if(judgements, [](const Judgement& j) { return j.grader != "judge1"; });
  const AgreementReport report = CompareGraders(judgements, {});
  EXPECT_FALSE(report.intraclass);
  EXPECT_THAT(report.between_graders, SizeIs(0));
  EXPECT_THAT(FormatAgreement(report), HasSubstr("needs two coupons that two graders graded"));
}

}  // namespace
}  // namespace laygauge
