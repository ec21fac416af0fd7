#include "texture/line_spectrum.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "support/render_lines.h"

namespace laygauge {
namespace {

double LayError(double a_deg, double b_deg) {
  const double difference = std::fmod(std::abs(a_deg - b_deg), 180);
  return std::min(difference, 180 - difference);
}

Expected<Lines> FindIn(const Patch& patch, const LineSpectrumOptions& options = {}) {
  return FindLines(MeasureFieldSpectrum(patch), options);
}

// Analytic gratings. One bin is 1 / 6.4 mm = 0.156 cycles/mm. The phases of tiles over 34 mm give
// a thousandth of it: at 2.4 cycles/mm that is 0.007 % of the pitch and 0.004 degrees.
TEST(FindLines, PitchAndLayToAThousandthOfABin) {
  for (const double lay : {0.0, 15.0, 30.0, 45.0, 60.0, 90.0, 120.0, 165.0}) {
    for (const double pitch : {0.31, 0.78}) {
      const Expected<Lines> lines =
          FindIn(RenderLines({.pitch_mm = pitch, .lay_deg = lay, .first = 0.1, .second = 0.03}));
      ASSERT_TRUE(lines) << lay << " " << pitch << ": " << lines.error().message;
      const double thousandth_bin_per_mm = 0.156 / 1000;
      EXPECT_NEAR(1 / lines->pitch_mm, 1 / pitch, thousandth_bin_per_mm) << lay;
      EXPECT_LT(LayError(lines->lay_deg, lay),
                thousandth_bin_per_mm * pitch * 180 / std::numbers::pi)
          << pitch;
      EXPECT_GT(lines->phase_agreement, 0.999);
      EXPECT_FALSE(lines->second_lay.has_value());
    }
  }
}

// Lines of a bead whose second harmonic outweighs the first, as under light along the lay.
TEST(FindLines, ReportsTheFundamentalBehindAStrongerHarmonic) {
  for (const double pitch : {0.34, 0.5, 0.7}) {
    const Expected<Lines> lines = FindIn(RenderLines(
        {.pitch_mm = pitch, .first = 0.04, .second = 0.1, .wander_mm = 0.008, .noise_sd = 0.02}));
    ASSERT_TRUE(lines) << pitch;
    EXPECT_NEAR(lines->pitch_mm, pitch, 0.004 * pitch);
  }
}

// Ridges whose places scatter blur the lines' own wave over the spectrum; a sharp second harmonic,
// finer than any pitch searched, still tells it. Tolerance: a fifth of the promised 0.4 %.
TEST(FindLines, FollowsASharpSecondHarmonicWhereTheFundamentalIsBlurred) {
  for (const std::uint64_t seed : {1, 2, 3, 4}) {
    Patch patch = RenderLines(
        {.pitch_mm = 0.365, .lay_deg = 45, .first = 0.03, .wander_mm = 0.1, .seed = seed});
    const Patch harmonic =
        RenderLines({.pitch_mm = 0.1825, .lay_deg = 45, .first = 0.01, .noise_sd = 0.005});
    patch.relative += harmonic.relative - 1;
    const Expected<Lines> lines = FindIn(patch);
    ASSERT_TRUE(lines) << seed << ": " << lines.error().message;
    EXPECT_NEAR(lines->pitch_mm, 0.365, 0.0008 * 0.365) << seed;
  }
}

// Neighbouring lines laid to and fro differ slightly: a faint wave at twice the pitch is no line.
TEST(FindLines, IgnoresTheAlternationOfLines) {
  Patch patch = RenderLines({.pitch_mm = 0.4, .lay_deg = 45, .first = 0.1, .second = 0.03});
  const Patch slow = RenderLines({.pitch_mm = 0.8, .lay_deg = 45, .first = 0.02});
  patch.relative += slow.relative - 1;
  const Expected<Lines> lines = FindIn(patch);
  ASSERT_TRUE(lines);
  EXPECT_NEAR(lines->pitch_mm, 0.4, 0.0004);
}

// Each line off its place by 20 um: over N lines the pitch of a straight-line fit has the standard
// deviation s sqrt(12 / N^3), here (N = 76 in 34 mm) 0.1 um, 0.024 %; four of these are allowed,
// since the field is no rectangle across the lay.
TEST(FindLines, AveragesTheLinesWander) {
  for (const std::uint64_t seed : {1, 2, 3, 4, 5}) {
    const Expected<Lines> lines = FindIn(RenderLines({.pitch_mm = 0.45,
                                                      .lay_deg = 30,
                                                      .first = 0.1,
                                                      .wander_mm = 0.02,
                                                      .noise_sd = 0.03,
                                                      .seed = seed}));
    ASSERT_TRUE(lines);
    EXPECT_NEAR(lines->pitch_mm, 0.45, 4 * 0.0001) << seed;
    EXPECT_LT(LayError(lines->lay_deg, 30), 0.1);
    EXPECT_LT(std::abs(lines->pitch_mm - 0.45), 5 * lines->pitch_sd_mm) << "its own sd";
  }
}

TEST(FindLines, NoLinesNoPitch) {
  const Expected<Lines> noise = FindIn(RenderLines({.first = 0, .noise_sd = 0.05}));
  ASSERT_FALSE(noise);
  EXPECT_NE(noise.error().message.find("no lines show"), std::string::npos);
  // Ironed: 0.12 mm is finer than any pitch searched, and no harmonic of one.
  EXPECT_FALSE(FindIn(RenderLines({.pitch_mm = 0.12, .first = 0.05, .noise_sd = 0.01})));
  // What a camera's grid leaves of it is faint.
  EXPECT_FALSE(FindIn(RenderLines({.pitch_mm = 0.27, .first = 0.002, .noise_sd = 0.001})));
  EXPECT_FALSE(FindIn(RenderLines({.first = 0})));  // constant
  Patch empty = RenderLines({});
  empty.regions.setTo(0);
  const Expected<Lines> none = FindIn(empty);
  ASSERT_FALSE(none);
  EXPECT_NE(none.error().message.find("no whole tile"), std::string::npos);
}

// The layer below shows in a band of 10 mm: of a field of 34 mm, 0.29.
TEST(FindLines, TellsTheLayerBelow) {
  const Patch below = RenderLines({.pitch_mm = 0.42, .lay_deg = 135, .first = 0.12});
  Patch patch = RenderLines({.pitch_mm = 0.42, .lay_deg = 45, .first = 0.1});
  const cv::Rect band(0, 600, patch.relative.cols, 200);  // rows: to 17 mm below the centre
  below.relative(band).copyTo(patch.relative(band));
  Expected<Lines> lines = FindIn(patch);
  ASSERT_TRUE(lines);
  EXPECT_LT(LayError(lines->lay_deg, 45), 0.1);
  EXPECT_NEAR(lines->pitch_mm, 0.42, 0.001);
  ASSERT_TRUE(lines->second_lay.has_value());
  EXPECT_LT(LayError(lines->second_lay->lay_deg, 135), 0.5);
  // Tiles of 6.4 mm: half of one on either side.
  EXPECT_NEAR(lines->second_lay->share, 180.0 / 680, 3.2 / 34);
  // Most of the top torn away: the drawing tells.
  below.relative(cv::Rect(0, 380, 880, 500)).copyTo(patch.relative(cv::Rect(0, 380, 880, 500)));
  lines = FindIn(patch);
  ASSERT_TRUE(lines);
  EXPECT_LT(LayError(lines->lay_deg, 135), 0.1);
  lines = FindIn(patch, {.nominal_lay_deg = 45});
  ASSERT_TRUE(lines);
  EXPECT_LT(LayError(lines->lay_deg, 45), 0.1);
}

TEST(LineSpectrumOptions, DefaultsAreValidAndRulesAreKept) {
  EXPECT_NO_THROW(LineSpectrumOptions().Check());
  EXPECT_THROW((LineSpectrumOptions{.min_pitch_mm = 1.3}.Check()), BadOption);
  EXPECT_THROW((LineSpectrumOptions{.min_peak_ratio = 1}.Check()), BadOption);
  EXPECT_THROW((LineSpectrumOptions{.min_contrast = -1}.Check()), BadOption);
  EXPECT_THROW((LineSpectrumOptions{.min_second_lay_deg = 0}.Check()), BadOption);
}

}  // namespace
}  // namespace laygauge
