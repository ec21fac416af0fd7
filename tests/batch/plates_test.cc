// The whole chain on the sample plates, against what they were rendered from. The tolerances are
// the figures that the instrument promises (docs/validation.md).

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <string>
#include <vector>

#include "base/statistics.h"
#include "batch/measured_plates.h"
#include "texture/metric.h"

namespace laygauge {
namespace {

TEST(SamplePlates, EveryCouponIsFoundAndMeasured) {
  ASSERT_EQ(MeasuredPlates().size(), 7U);
  EXPECT_EQ(MeasuredCoupons().size(), 15U + 6 * 6);
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    EXPECT_EQ(coupon.record->status, CouponStatus::kOk)
        << coupon.Name() << ": " << coupon.record->note;
  }
}

TEST(SamplePlates, ReprojectionIsWithinThreeTenthsOfAPixel) {
  for (const PhotoRecord& record : MeasuredPlates()) {
    EXPECT_LE(record.camera.rms_px, 0.3) << record.file;
  }
}

TEST(SamplePlates, CentreAndTurnAreTrue) {
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    ASSERT_TRUE(coupon.record->placement) << coupon.Name();
    const Placement& place = *coupon.record->placement;
    EXPECT_LE(std::hypot(place.center_x_mm - coupon.truth.center_x_mm,
                         place.center_y_mm - coupon.truth.center_y_mm),
              0.10)
        << coupon.Name();
    EXPECT_LE(std::abs(place.turn_deg - coupon.truth.turn_deg), 0.2) << coupon.Name();
  }
}

// Errors of the pitch in per cent and of the lay in degrees, raster coupons.
TEST(SamplePlates, PitchAndLayAreTrue) {
  std::vector<double> pitch_errors_pct;
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    if (coupon.truth.kind != "raster") continue;
    const auto pitch_mm = coupon.Value("pitch_mm");
    const auto lay_deg = coupon.Value("lay_deg");
    ASSERT_TRUE(pitch_mm && lay_deg) << coupon.Name();
    const double true_pitch_mm = coupon.truth.numbers.at("pitch_mm");
    pitch_errors_pct.push_back(100 * std::abs(*pitch_mm / true_pitch_mm - 1));
    EXPECT_LE(pitch_errors_pct.back(), 0.4) << coupon.Name();
    const double off_deg = std::remainder(*lay_deg - coupon.truth.numbers.at("lay_deg"), 180);
    EXPECT_LE(std::abs(off_deg), 0.3) << coupon.Name();
  }
  ASSERT_FALSE(pitch_errors_pct.empty());
  EXPECT_LE(Median(pitch_errors_pct), 0.15);
}

// Measured and true values of the coupons that did not fail; where the metric has a value.
struct Compared {
  std::vector<double> measured;
  std::vector<double> told;
};

Compared Compare(const std::string& feature, const std::string& truth) {
  Compared compared;
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    const auto value = coupon.Value(feature);
    if (coupon.truth.kind == "delaminated" || !value) continue;
    compared.measured.push_back(*value);
    compared.told.push_back(coupon.truth.numbers.at(truth));
  }
  return compared;
}

// Promised: within 0.5 percentage points or 25 %, whichever is larger, on 9 of 10 coupons.
TEST(SamplePlates, GapAreaIsWithinItsTolerance) {
  const Compared gaps = Compare("gap_area_pct", "gap_area_pct");
  ASSERT_EQ(gaps.told.size(), 47U);
  double within = 0;
  for (size_t i = 0; i < gaps.told.size(); ++i) {
    const double allowed_pct = std::max(0.5, 0.25 * gaps.told[i]);
    within += std::abs(gaps.measured[i] - gaps.told[i]) <= allowed_pct ? 1 : 0;
  }
  EXPECT_GE(within, 0.9 * static_cast<double>(gaps.told.size()));
}

// Promised: a rank correlation of 0.85 with the truth, of gap areas 0.95.
TEST(SamplePlates, DefectsAreInTheirTrueOrder) {
  const auto rank = [](const char* feature, const char* truth) {
    const Compared compared = Compare(feature, truth);
    return RankCorrelation(compared.measured, compared.told);
  };
  EXPECT_GE(rank("gap_area_pct", "gap_area_pct"), 0.95);
  EXPECT_GE(rank("scar_length_mm", "scar_length_mm"), 0.85);
  EXPECT_GE(rank("blob_count_per_cm2", "blobs"), 0.85);
  EXPECT_GE(rank("wall_gap_mean_mm", "ring_gap_mm"), 0.85);
  EXPECT_GE(rank("ridge_um", "ridge_um"), 0.85);
}

// Promised: scars of 10 mm found, 9 of 10; at most one false scar on 10 coupons. A doubtful one
// counts by its chance: found is a half.
TEST(SamplePlates, ScarsAreFoundAndNotInvented) {
  const Compared scars = Compare("scar_count", "scar_length_mm");
  double scarred = 0;
  double found = 0;
  double clean = 0;
  double invented = 0;
  for (size_t i = 0; i < scars.told.size(); ++i) {
    if (scars.told[i] >= 10) {
      scarred += 1;
      found += scars.measured[i] >= 0.5 ? 1 : 0;
    } else if (scars.told[i] == 0) {
      clean += 1;
      invented += scars.measured[i];
    }
  }
  ASSERT_GE(scarred, 20);
  ASSERT_GE(clean, 20);
  EXPECT_GE(found, 0.9 * scarred);
  EXPECT_LE(invented, 0.1 * clean);
}

// Promised: all failed coupons found, no other called failed.
TEST(SamplePlates, ThoseThatFailedAndNoOthersAreCalledFailed) {
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    EXPECT_EQ(coupon.record->fault == "failed", coupon.truth.kind == "delaminated")
        << coupon.Name() << " is " << coupon.truth.kind << ", its fault is \""
        << coupon.record->fault << "\"";
  }
}

// Standard deviation of one score, points: root of half the mean square difference of two photos
// of the same coupons.
double ScoreDeviation(const std::string& plate, const std::string& other_plate) {
  std::map<std::string, double> scores;
  std::vector<double> squares;
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    if (coupon.plate == plate) scores[coupon.record->well] = coupon.record->score->value;
  }
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    if (coupon.plate != other_plate) continue;
    const double step = coupon.record->score->value - scores.at(coupon.record->well);
    squares.push_back(step * step);
  }
  return std::sqrt(Mean(squares) / 2);
}

// The largest difference of a feature between two photos of the same coupons, in units of its
// standard deviation over all coupons.
double LargestDifference(const std::string& feature, const std::string& plate,
                         const std::string& other_plate) {
  std::vector<double> all;
  std::map<std::string, double> values;
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    const auto value = coupon.Value(feature);
    if (!value) continue;
    all.push_back(*value);
    if (coupon.plate == plate) values[coupon.record->well] = *value;
  }
  double largest = 0;
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    const auto value = coupon.Value(feature);
    if (coupon.plate != other_plate || !value) continue;
    largest = std::max(largest, std::abs(*value - values.at(coupon.record->well)));
  }
  double squares = 0;
  for (const double value : all) squares += (value - Mean(all)) * (value - Mean(all));
  return largest / std::sqrt(squares / static_cast<double>(all.size() - 1));
}

// Promised: a tenth of the spread laid anew, a fifth with another camera, distance and light. Area
// and lengths of gaps fall short of the first (0.12 to 0.16, docs/validation.md).
TEST(SamplePlates, TheSameCouponsHaveTheSameGaps) {
  for (const char* feature :
       {"gaps_per_cm2", "gap_wide_mm", "wall_gap_pct", "wall_gap_mm", "wall_gap_mean_mm"}) {
    EXPECT_LE(LargestDifference(feature, "d2", "d7"), 0.1) << feature;
  }
  for (const char* feature :
       {"gap_area_pct", "gaps_per_cm2", "gap_length_mm_per_cm2", "gap_wide_mm",
        "gap_long_mm_per_cm2", "wall_gap_pct", "wall_gap_mm", "wall_gap_mean_mm"}) {
    EXPECT_LE(LargestDifference(feature, "d2", "d3"), 0.2) << feature;
  }
}

// Promised: as above. The area of blobs falls short (docs/validation.md).
TEST(SamplePlates, TheSameCouponsHaveTheSameScarsAndBlobs) {
  for (const char* feature :
       {"scar_length_mm_per_cm2", "scar_length_mm", "scar_count", "blob_count_per_cm2"}) {
    EXPECT_LE(LargestDifference(feature, "d2", "d7"), 0.1) << feature;
    EXPECT_LE(LargestDifference(feature, "d2", "d3"), 0.2) << feature;
  }
}

// Promised: as above; 0.105 is a tenth as docs/validation.md prints it. Lines that ridges hide fall
// short of the first (phase agreement 0.19, scatter of the lay 0.38), homogeneity along on the torn
// coupon, too (0.12); of the second most columns do, on the torn and on one overfilled coupon.
TEST(SamplePlates, TheSameCouponsHaveTheSameTexture) {
  for (const Metric& metric : MetricTable()) {
    if (metric.name != "lines" && metric.name != "roughness" && metric.name != "waviness" &&
        metric.name != "cooccurrence" && metric.name != "gradient_energy") {
      continue;
    }
    for (const FeatureInfo& feature : metric.features) {
      const std::string name(feature.name);
      if (name == "line_phase_agreement" || name == "lay_scatter_deg" || name == "second_lay_deg" ||
          name == "cooccurrence_homogeneity_along") {
        continue;
      }
      EXPECT_LE(LargestDifference(name, "d2", "d7"), 0.105) << name;
    }
  }
  for (const char* feature : {"cooccurrence_contrast_along", "cooccurrence_dissimilarity_along",
                              "cooccurrence_homogeneity_along", "gradient_energy_along_per_mm2"}) {
    EXPECT_LE(LargestDifference(feature, "d2", "d3"), 0.2) << feature;
  }
}

// Smooth tops have no lines, but every column of gray levels has a value on them.
TEST(SamplePlates, NoCouponLacksACooccurrence) {
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    for (const Metric& metric : MetricTable()) {
      if (metric.name != "cooccurrence") continue;
      for (const FeatureInfo& feature : metric.features) {
        EXPECT_TRUE(coupon.Value(std::string(feature.name)).has_value())
            << coupon.plate << coupon.record->well << feature.name;
      }
    }
  }
}

// Promised: 0.08 points laid anew in the same lightbox, 0.25 with another camera, distance and
// light.
TEST(SamplePlates, TheSameCouponsScoreTheSame) {
  EXPECT_LE(ScoreDeviation("d2", "d7"), 0.08);
  EXPECT_LE(ScoreDeviation("d2", "d3"), 0.25);
}

// Common practice: grade 1 is a delaminated print, 10 is as good as ironed.
TEST(SamplePlates, TheDelaminatedCouponIsLowestAndTheIronedOneHighest) {
  for (const MeasuredCoupon& extreme : MeasuredCoupons()) {
    for (const MeasuredCoupon& other : MeasuredCoupons()) {
      if (other.plate != extreme.plate || other.record == extreme.record) continue;
      ASSERT_TRUE(extreme.record->score && other.record->score);
      if (extreme.truth.kind == "delaminated") {
        EXPECT_LT(extreme.record->score->value, other.record->score->value)
            << extreme.Name() << " is delaminated, " << other.Name() << " is not";
      }
      if (extreme.truth.kind == "ironed") {
        EXPECT_GT(extreme.record->score->value, other.record->score->value)
            << extreme.Name() << " is ironed, " << other.Name() << " is not";
      }
    }
  }
}

}  // namespace
}  // namespace laygauge
