#include "grade/intraclass.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

namespace laygauge {
namespace {

// Shrout & Fleiss 1979, table 2: six targets, four judges.
Eigen::MatrixXd ShroutFleiss() {
  Eigen::MatrixXd ratings(6, 4);
  ratings << 9, 2, 5, 8, 6, 1, 3, 2, 8, 4, 6, 8, 7, 1, 2, 6, 10, 5, 6, 9, 6, 2, 4, 7;
  return ratings;
}

// Mean squares as printed there (table 3): 11.24, 32.49, 1.02, 6.26.
TEST(Intraclass, PublishedMeanSquares) {
  const IntraclassTable table = IntraclassCorrelations(ShroutFleiss()).value();
  EXPECT_NEAR(table.mean_square_targets, 11.24, 0.005);  // two printed decimals
  EXPECT_NEAR(table.mean_square_judges, 32.49, 0.005);
  EXPECT_NEAR(table.mean_square_residual, 1.02, 0.005);
  EXPECT_NEAR(table.mean_square_within, 6.26, 0.005);
}

// Published .17 .29 .71 .44 .62 .91; more digits and the limits by R's psych::ICC (lmer = FALSE).
TEST(Intraclass, SixFormsWithLimits) {
  const IntraclassTable table = IntraclassCorrelations(ShroutFleiss()).value();
  const std::vector<IntraclassCorrelation> expected{
      {"ICC(1,1)", 0.1657417684, -0.13293232, 0.72256006},
      {"ICC(2,1)", 0.2897637795, 0.01878651, 0.76108437},
      {"ICC(3,1)", 0.7148407148, 0.34246477, 0.94585826},
      {"ICC(1,4)", 0.4427971337, -0.88444216, 0.91241542},
      {"ICC(2,4)", 0.6200505476, 0.07113682, 0.92723204},
      {"ICC(3,4)", 0.9093155424, 0.67567471, 0.98589168}};
  for (size_t i = 0; i < 6; ++i) {
    EXPECT_EQ(table.forms.at(i).name, expected[i].name);
    EXPECT_NEAR(table.forms.at(i).value, expected[i].value, 5e-10) << expected[i].name;
    EXPECT_NEAR(table.forms.at(i).low, expected[i].low, 2e-8) << expected[i].name;
    EXPECT_NEAR(table.forms.at(i).high, expected[i].high, 2e-8) << expected[i].name;
  }
}

// Judges who differ by a constant are perfectly consistent, not perfectly agreed.
TEST(Intraclass, PerfectConsistency) {
  Eigen::MatrixXd ratings(3, 2);
  ratings << 1, 2, 4, 5, 7, 8;
  const IntraclassTable table = IntraclassCorrelations(ratings).value();
  EXPECT_DOUBLE_EQ(table.forms[2].value, 1);
  EXPECT_DOUBLE_EQ(table.forms[2].low, 1);
  EXPECT_LT(table.forms[1].value, 1);
}

TEST(Intraclass, RefusesWhatCannotCorrelate) {
  EXPECT_FALSE(IntraclassCorrelations(Eigen::MatrixXd::Constant(5, 3, 7)));
  EXPECT_FALSE(IntraclassCorrelations(Eigen::MatrixXd::Random(5, 1)));
  EXPECT_FALSE(IntraclassCorrelations(Eigen::MatrixXd::Random(1, 5)));
}

}  // namespace
}  // namespace laygauge
