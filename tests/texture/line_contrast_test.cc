#include "texture/line_contrast.h"

#include <gtest/gtest.h>

#include <algorithm>
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
  // All tiles alike but for the mask at borders and holes, which moves a lobe's centre by a few
  // thousandths of its width, two bins of 1/6.4 mm: 0.3 % of 2 cycles/mm for a hundredth.
  EXPECT_LT(scatter.pitch_pct, 0.15);
  EXPECT_LT(scatter.lay_deg, 0.1);
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

// Two fields as one, with pitches 1 % apart and lays 0.6 degrees: tiles deviate by half of that
// from their mean. The centre of nine bins follows a wave's shift by 0.75 to 1 (from the Hann
// window's amplitudes at one bin's distance, (1 + d) / (2 - d) of the middle's), half a bin off to
// right on.
TEST(LineScatter, OfTwoHalves) {
  FieldSpectrum both =
      MeasureFieldSpectrum(RenderLines({.pitch_mm = 0.402, .lay_deg = 30.3, .first = 0.1}));
  const FieldSpectrum other =
      MeasureFieldSpectrum(RenderLines({.pitch_mm = 0.398, .lay_deg = 29.7, .first = 0.1}));
  both.tiles.insert(both.tiles.end(), other.tiles.begin(), other.tiles.end());
  Lines lines;
  lines.frequency_per_mm = cv::Point2d(0.5, std::sqrt(0.75)) / 0.4;  // of a lay of 30 degrees
  const LineScatter scatter = MeasureLineScatter(both, lines);
  EXPECT_GT(scatter.pitch_pct, 0.75 * 0.5);
  EXPECT_LT(scatter.pitch_pct, 1.05 * 0.5);
  EXPECT_GT(scatter.lay_deg, 0.75 * 0.3);
  EXPECT_LT(scatter.lay_deg, 1.05 * 0.3);
}

// What is no wave of the lines, another wave three bins beside, moves a tile by a bin at most, and
// there counts by the little power that it has so far off: a fifth of the tiles makes less than
// 0.1 bins of 0.156 cycles/mm in 2.5 of scatter. The strongest of the bins would be 1.5 off.
TEST(LineScatter, OtherWavesCountLittle) {
  FieldSpectrum spectrum =
      MeasureFieldSpectrum(RenderLines({.pitch_mm = 0.4, .lay_deg = 90, .first = 0.1}));
  const FieldSpectrum other =
      MeasureFieldSpectrum(RenderLines({.pitch_mm = 0.3368, .lay_deg = 90, .first = 0.1}));
  const std::size_t fifth = spectrum.tiles.size() / 5;
  std::copy_n(other.tiles.begin(), fifth, spectrum.tiles.begin());
  Lines lines;
  lines.frequency_per_mm = {2.5, 0};
  EXPECT_LT(MeasureLineScatter(spectrum, lines).pitch_pct, 100 * 0.1 * 0.156 / 2.5);
}

}  // namespace
}  // namespace laygauge
