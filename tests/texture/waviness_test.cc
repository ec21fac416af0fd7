#include "texture/waviness.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "support/render_lines.h"

namespace laygauge {
namespace {

Patch Wave(double wavelength_mm, double amplitude, double lay_deg = 30) {
  return RenderLines({.pitch_mm = wavelength_mm, .lay_deg = lay_deg, .first = amplitude});
}

// ISO 16610-21: a Gaussian filter of cut-off c passes exp(-pi a^2 (c / w)^2) of a wave of length w,
// pi a^2 = ln 2. The band passes low(2 mm) less low(10 mm); rms of a sine: A / sqrt 2.
TEST(Waviness, TransmissionOfWaves) {
  for (const double w : {1.5, 2.0, 4.0, 6.0}) {
    const auto passed = [w](double cutoff) {
      return std::exp(-std::numbers::ln2 * cutoff * cutoff / (w * w));
    };
    const double want = 0.05 / std::numbers::sqrt2 * (passed(2) - passed(10));
    const Expected<Waviness> waviness = MeasureWaviness(Wave(w, 0.05));
    ASSERT_TRUE(waviness);
    // The filters lack a side at the field's border, on 2 mm of 34 mm; and a field of 34 mm holds
    // no whole number of waves.
    EXPECT_NEAR(waviness->rms, want, 0.06 * want) << w;
  }
}

// What coding leaves on a smooth top, 0.0024 at most, is no waviness: waves of that strength shrink
// by 0.0024^2 / (0.0024^2 + 0.002^2) = 0.59, of half of it by 0.26; strong ones keep all of it. The
// ratio of two waves of one length is free of what the filters pass.
TEST(Waviness, ShrinksWhatIsNoMoreThanItsFloor) {
  const double strong = MeasureWaviness(Wave(4, 0.2))->rms;
  for (const double rms : {0.0024, 0.0012}) {
    const Expected<Waviness> faint = MeasureWaviness(Wave(4, 0.2 * rms / strong));
    const double want = rms * rms * rms / (rms * rms + 0.002 * 0.002);
    EXPECT_NEAR(faint->rms, want, 0.01 * want) << rms;
    EXPECT_GT(faint->sd, 0);
  }
}

// Uneven light is no waviness: a polynomial of second order is taken off whole.
TEST(Waviness, IgnoresForm) {
  Patch patch = RenderLines({.first = 0});
  for (int y = 0; y < patch.relative.rows; ++y) {
    for (int x = 0; x < patch.relative.cols; ++x) {
      const double u = (x - 440) / 440.0;
      const double v = (y - 440) / 440.0;
      patch.relative.at<float>(y, x) =
          static_cast<float>(1 + 0.2 * u - 0.1 * v + 0.1 * u * v + 0.1 * v * v);
    }
  }
  EXPECT_LT(MeasureWaviness(patch)->rms, 1e-4);
}

TEST(Waviness, IgnoresTheLines) { EXPECT_LT(MeasureWaviness(Wave(0.45, 0.2))->rms, 0.002); }

TEST(Waviness, NeedsAFieldAsWideAsItsWaves) {
  Patch patch = RenderLines({});
  patch.regions.setTo(0);
  patch.regions(cv::Rect(300, 300, 100, 100)).setTo(static_cast<int>(Region::kField));
  const Expected<Waviness> waviness = MeasureWaviness(patch);
  ASSERT_FALSE(waviness);
  EXPECT_NE(waviness.error().message.find("5.0 mm wide"), std::string::npos);
  patch.regions.setTo(0);
  EXPECT_FALSE(MeasureWaviness(patch));
  EXPECT_THROW((WavinessOptions{.min_wavelength_mm = 11}.Check()), BadOption);
  EXPECT_THROW((WavinessOptions{.cell_mm = 1}.Check()), BadOption);
  EXPECT_THROW((WavinessOptions{.floor = 0}.Check()), BadOption);
}

}  // namespace
}  // namespace laygauge
