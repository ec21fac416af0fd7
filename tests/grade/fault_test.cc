#include "grade/fault.h"

#include <gtest/gtest.h>

#include "grade/indices.h"

namespace laygauge {
namespace {

FeatureTable Clean() {
  return {{"pitch_mm", {0.4, 0.001}},     {"gap_area_pct", {0.0, 0.1}},
          {"ridge_um", {2.0, 1.0}},       {"failure_area_pct", {0.0, 0.1}},
          {"wall_gap_mean_mm", {0.0, 0}}, {"scar_length_mm_per_cm2", {0.0, 0}}};
}

TEST(Indices, AddTheirPartsAndLeaveOutWhatIsMissing) {
  FeatureTable features = Clean();
  features["gap_area_pct"] = {2.0, 0.4};  // once the plain level of 2 %
  features["ridge_um"] = {20.0, 12.0};    // half the plain level of 40 um
  const FeatureValue index = IndexOf(DefectParts(), features);
  EXPECT_DOUBLE_EQ(index.value.value(), 1.5);
  // 0.4 / 2 and 12 / 40 in quadrature, with failure's 0.1 / 5.
  EXPECT_NEAR(index.sd.value(), std::sqrt(0.04 + 0.09 + 0.0004), 1e-12);
  features["gap_area_pct"] = {std::nullopt, std::nullopt};
  EXPECT_DOUBLE_EQ(IndexOf(DefectParts(), features).value.value(), 0.5);
  EXPECT_FALSE(IndexOf(RoughnessParts(), {}).value);
}

TEST(Fault, NamesWhatIsPlainAndTheSettingThatBelongsToIt) {
  EXPECT_EQ(ChiefFault(Clean(), {}).name, "");
  FeatureTable starved = Clean();
  starved["gap_area_pct"].value = 4;
  const Fault fault = ChiefFault(starved, {{"flow_pct", "88"}, {"note", "x"}});
  EXPECT_EQ(fault.name, "too little material");
  EXPECT_EQ(fault.evidence, "gap_area_pct 4, flow_pct 88");
  starved["ridge_um"].value = 90;
  EXPECT_EQ(ChiefFault(starved, {}).name, "too much material");
  starved["failure_area_pct"].value = 1.1;  // from 1 % of the field on
  EXPECT_EQ(ChiefFault(starved, {}).name, "failed");
}

TEST(Fault, FaintTracesAndScatterAreNotNamed) {
  FeatureTable faint = Clean();
  faint["gap_area_pct"].value = 0.4;       // 0.2 plain levels
  faint["wall_gap_mean_mm"].value = 0.05;  // 0.33
  faint["pitch_scatter_pct"] = {8, 1};     // as where ridges hide the lines
  EXPECT_EQ(ChiefFault(faint, {}).name, "");
  faint["waviness"] = {0.05, 0.001};
  EXPECT_EQ(ChiefFault(faint, {}).name, "uneven extrusion");
}

TEST(Fault, EvenTheGentlestRunsStarve) {
  std::vector<JudgedRun> runs;
  for (int i = 0; i < 6; ++i) {
    JudgedRun run{"A" + std::to_string(i), Clean(), {{"speed_mm_s", std::to_string(40 + 20 * i)}}};
    run.features["gap_area_pct"].value = i < 2 ? 1.5 : 5;  // the two slowest: 0.75 plain levels
    runs.push_back(run);
  }
  EXPECT_EQ(ExtrusionWarning("b1", runs),
            "batch b1: even the gentlest runs show too little material: check the extrusion "
            "calibration before tuning anything else");
  runs[5].features["ridge_um"].value = 50;  // another run overfills: not the calibration
  EXPECT_EQ(ExtrusionWarning("b1", runs), "");
  runs[5].features["ridge_um"].value = 2;
  runs[0].features["gap_area_pct"].value = 0.2;  // the slowest run is clean: speed is the cause
  EXPECT_EQ(ExtrusionWarning("b1", runs), "");
  runs.resize(2);
  EXPECT_EQ(ExtrusionWarning("b1", runs), "");
}

}  // namespace
}  // namespace laygauge
