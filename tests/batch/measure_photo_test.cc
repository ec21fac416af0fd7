#include "batch/measure_photo.h"

#include <gtest/gtest.h>

#include <filesystem>

#include "batch/score_run.h"
#include "grade/scale_file.h"

namespace laygauge {
namespace {

PhotoMeasurement MeasureSample(bool keep_patches) {
  ScoreRunRequest request;
  request.photos = {std::filesystem::path(LAYGAUGE_SOURCE_DIR) / "sample-images/d2.jpg"};
  request.sheets = ShippedSheets();
  request.coupon = ShippedCoupons().front();
  request.scale = ShippedScale();
  request.measure.keep_patches = keep_patches;
  PhotoMeasurement kept;
  const auto run = RunScoring(request,
                              [&](const PhotoMeasurement& measured) -> Done {
                                kept = measured;
                                return {};
                              },
                              {});
  EXPECT_TRUE(run.has_value());
  return kept;
}

// The memory of fifteen coupons would be more than that of their photo.
TEST(MeasurePhoto, DropsPatchesThatNobodyDraws) {
  const PhotoMeasurement with = MeasureSample(true);
  const PhotoMeasurement without = MeasureSample(false);
  ASSERT_EQ(with.patches.size(), 6U);
  ASSERT_EQ(without.patches.size(), 6U);
  for (size_t i = 0; i < with.patches.size(); ++i) {
    EXPECT_TRUE(with.patches[i].has_value());
    EXPECT_FALSE(without.patches[i].has_value());
  }
  EXPECT_EQ(FormatRecord(with.record), FormatRecord(without.record));
}

}  // namespace
}  // namespace laygauge
