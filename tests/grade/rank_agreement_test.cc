#include "grade/rank_agreement.h"

#include <gtest/gtest.h>

#include <vector>

namespace laygauge {
namespace {

// Siegel 1956, ch. 9: three executives rank six applicants; s 25.5, W 17/105 (published .16).
TEST(KendallConcordance, SiegelsExecutives) {
  Eigen::MatrixXd ratings(3, 6);
  ratings << 1, 6, 3, 2, 5, 4, 1, 5, 6, 4, 2, 3, 6, 3, 2, 5, 4, 1;
  const Concordance found = KendallConcordance(ratings.transpose()).value();
  EXPECT_NEAR(found.w, 17.0 / 105, 1e-12);
  EXPECT_EQ(found.degrees_of_freedom, 5);
  EXPECT_NEAR(found.chi_square, 2.428571, 5e-7);
  EXPECT_NEAR(found.p_value, 0.787212, 5e-7);
}

// Kendall 1948, with ties: corrected 591/714 (published .828); chi-square as
// scipy.stats.friedmanchisquare.
TEST(KendallConcordance, KendallsTies) {
  Eigen::MatrixXd ratings(3, 10);
  ratings << 1, 4.5, 2, 4.5, 3, 7.5, 6, 9, 7.5, 10, 2.5, 1, 2.5, 4.5, 4.5, 8, 9, 6.5, 10, 6.5, 2, 1,
      4.5, 4.5, 4.5, 4.5, 8, 8, 8, 10;
  const Concordance found = KendallConcordance(ratings.transpose()).value();
  EXPECT_NEAR(found.w, 591.0 / 714, 1e-12);
  EXPECT_NEAR(found.chi_square, 22.3487394958, 5e-11);
  EXPECT_NEAR(found.p_value, 0.00783704363, 5e-12);
}

TEST(KendallConcordance, RefusesAllAlike) {
  EXPECT_FALSE(KendallConcordance(Eigen::MatrixXd::Constant(6, 3, 5)));
  EXPECT_FALSE(KendallConcordance(Eigen::MatrixXd::Random(6, 1)));
}

// Siegel 1956 (published .67); NIST Dataplot KENDALL.DAT; the example of scipy's documentation.
TEST(KendallTau, PublishedPairs) {
  const std::vector<double> a{82, 98, 87, 40, 116, 113, 111, 83, 85, 126, 106, 117};
  const std::vector<double> b{42, 46, 39, 37, 65, 88, 86, 56, 62, 92, 54, 81};
  EXPECT_NEAR(KendallTau(a, b), 2.0 / 3, 1e-12);
  const std::vector<double> tests{530, 540, 545, 560, 560, 560, 570, 580, 610, 610, 640, 740};
  const std::vector<double> marks{3.5, 3.3, 3.7, 3.2, 3.5, 3.6, 3.2, 3.8, 3.5, 4.0, 3.9, 4.0};
  EXPECT_NEAR(KendallTau(tests, marks), 0.439038900329, 5e-13);
  const std::vector<double> x{12, 2, 1, 12, 2};
  const std::vector<double> y{1, 4, 7, 1, 0};
  EXPECT_NEAR(KendallTau(x, y), -0.471404520791, 5e-13);
}

}  // namespace
}  // namespace laygauge
