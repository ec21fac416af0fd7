#include "grade/calibration_report.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "grade/simulated_panel.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;

// Everything that a calibration must tell is there; the figures are tested where they are made.
TEST(CalibrationReport, TellsWhatACalibrationFound) {
  SimulatedPanel panel(9);
  Measurements measurements;
  std::vector<Judgement> judgements;
  for (int i = 0; i < 12; ++i) {
    const CouponName name{"b", fmt::format("A{}", i)};
    panel.Draw(name, measurements);
    if (i >= 10) continue;  // two stay ungraded
    judgements.push_back({"ash", name, panel.Grade(name, 0)});
    judgements.push_back({"birch", name, panel.Grade(name, -0.5)});
  }
  judgements.push_back({"ash", {"b", "A0"}, panel.Grade({"b", "A0"}, 0)});
  judgements.push_back({"ash", {"b", "A1"}, panel.Grade({"b", "A1"}, 0)});
  FitOptions options;
  options.name = "test-1";
  options.base = LooseBase();
  const CalibratedScale fit = FitScale(measurements, judgements, {}, options).value();
  const auto report = ReportCalibration(fit, measurements, judgements);
  ASSERT_TRUE(report);
  const std::string text = FormatCalibration(
      *report, [](const CouponName& coupon) { return "picture-of-" + coupon.well; });
  for (const char* part :
       {"Scale test-1: fitted to 10 coupons", "one coupon at a time", "Between graders",
        "Each grader with himself", "Strictness", "Largest disagreements", "picture-of-A",
        "What carries the scale", "gaps", "More grades"}) {
    EXPECT_THAT(text, HasSubstr(part));
  }
  // Both losses together explain all differences of the scores; only ungraded coupons are asked
  // for.
  ASSERT_EQ(report->losses.size(), 2U);
  EXPECT_NEAR(report->losses[0].share + report->losses[1].share, 1, 1e-9);
  ASSERT_EQ(report->suggested.coupons.size(), 2U);
}

}  // namespace
}  // namespace laygauge
