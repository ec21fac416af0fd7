#include "texture/line_contrast.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "support/render_lines.h"

namespace laygauge {
namespace {

// A wave A cos(2 pi f x + phi) in a tile gives A exp(i phi); what the mask takes away of tiles at
// the border and the holes changes the amplitude by the window's sidelobes: under 1 %.
TEST(LineContrast, AmplitudesOfHarmonics) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(
      RenderLines({.pitch_mm = 0.5, .lay_deg = 20, .first = 0.1, .second = 0.04}));
  const Expected<Lines> lines = FindLines(spectrum);
  ASSERT_TRUE(lines);
  const LineContrast contrast = MeasureLineContrast(spectrum, *lines);
  EXPECT_NEAR(contrast.fundamental, 0.1, 0.001);
  EXPECT_NEAR(contrast.second, 0.04, 0.001);
  EXPECT_NEAR(contrast.third, 0, 0.001);
  EXPECT_NEAR(contrast.total, std::hypot(0.1, 0.04), 0.001);
  const LineScatter scatter = MeasureLineScatter(spectrum, *lines);
  // A parabola through three logarithms of a Hann window's lobe errs by at most 0.016 bins
  // (published bound): 0.0025 of 2 cycles/mm; the mask may double it.
  EXPECT_LT(scatter.pitch_pct, 0.25);
  EXPECT_LT(scatter.lay_deg, 0.15);
}

// A Gaussian point spread of standard deviation s dims a wave of f by exp(-2 pi^2 s^2 f^2).
TEST(LineContrast, FollowsTheBlur) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(
      RenderLines({.pitch_mm = 0.4, .lay_deg = 45, .first = 0.2, .blur_sd_mm = 0.06}));
  const Expected<Lines> lines = FindLines(spectrum);
  ASSERT_TRUE(lines);
  const double want =
      0.2 * std::exp(-2 * std::numbers::pi * std::numbers::pi * 0.06 * 0.06 / (0.4 * 0.4));
  // 1 % for masks as above; the filter is cut at four deviations.
  EXPECT_NEAR(MeasureLineContrast(spectrum, *lines).fundamental, want, 0.015 * want);
}

}  // namespace
}  // namespace laygauge
