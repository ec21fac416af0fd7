#include "texture/roughness.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "base/error.h"
#include "support/render_lines.h"

namespace laygauge {
namespace {

struct Measured {
  Roughness roughness;
  bool lines = false;
};

Measured Measure(const Patch& patch) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(patch);
  const Expected<Lines> lines = FindLines(spectrum);
  const std::optional<Lines> found = lines ? std::optional<Lines>(*lines) : std::nullopt;
  return {MeasureRoughness(spectrum, found, patch.noise_sd).value(), lines.has_value()};
}

// ISO 25178-2: the root mean square of a sine of amplitude A is A / sqrt 2, of two waves of
// different frequency the root of the sum of squares. All of it is periodic.
TEST(Roughness, OfAPureGratingIsAllLines) {
  const Measured m =
      Measure(RenderLines({.pitch_mm = 0.5, .lay_deg = 30, .first = 0.1, .second = 0.04}));
  ASSERT_TRUE(m.lines);
  const double want = std::hypot(0.1, 0.04) / std::numbers::sqrt2;
  EXPECT_NEAR(m.roughness.total, want, 0.01 * want);  // the masks' share, as for amplitudes
  // Sidelobes outside the spots: of windows that the mask cuts, below -24 dB of the amplitude.
  EXPECT_LT(m.roughness.aperiodic, 0.063 * want);
  const double floored = want * want / (want * want + 0.03 * 0.03);
  EXPECT_NEAR(m.roughness.line_share, floored, 0.063 * 0.063 + 0.02 * (1 - floored));
}

// The share sinks with the lines: a pure grating of amplitude A has (A^2 / 2) of (A^2 / 2 +
// 0.03^2). Without the floor it would be 1 down to the faintest that is found. The mask takes up to
// 1 % of the amplitude, 2 % of its square.
TEST(Roughness, ShareOfFaintLinesTendsToZero) {
  for (const double amplitude : {0.02, 0.006}) {
    const Measured m = Measure(RenderLines({.pitch_mm = 0.5, .lay_deg = 30, .first = amplitude}));
    ASSERT_TRUE(m.lines);
    const double power = amplitude * amplitude / 2;
    EXPECT_NEAR(m.roughness.line_share, power / (power + 9e-4), 0.02 * power / 9e-4);
  }
}

// White noise of s: the band holds the share of the frequency plane between 1/2 and 1/0.2 per mm,
// pi (25 - 0.25) / 400 of it at 20 px/mm.
TEST(Roughness, OfWhiteNoiseIsTheBandsShare) {
  Patch patch = RenderLines({.first = 0, .noise_sd = 0.1});
  patch.noise_sd = 0;  // as if it were the surface's
  const Measured m = Measure(patch);
  EXPECT_FALSE(m.lines);
  const double want = 0.1 * std::sqrt(std::numbers::pi * (25 - 0.25) / 400);
  // 50000 independent values in the band: 0.3 % of the root mean square; and whole bins.
  EXPECT_NEAR(m.roughness.aperiodic, want, 0.015 * want);
  EXPECT_NEAR(m.roughness.total, m.roughness.aperiodic, 1e-12);
  EXPECT_NEAR(m.roughness.aperiodic_sd, want * std::sqrt(1.0 / 50000) / 2, want * 0.003);
}

// Noise that the photograph is known to add is taken off: a sixth of it is left at most.
TEST(Roughness, KnownNoiseIsTakenOff) {
  const Measured m = Measure(RenderLines({.first = 0, .noise_sd = 0.1}));
  EXPECT_LT(m.roughness.aperiodic, 0.1 * std::sqrt(std::numbers::pi * (25 - 0.25) / 400) / 6);
}

// Lines off their places are aperiodic: the more wander, the more of it.
TEST(Roughness, GrowsWithTheLinesWander) {
  double last = 0;
  for (const double wander : {0.0, 0.005, 0.01, 0.02, 0.03}) {
    const Measured m = Measure(RenderLines({.pitch_mm = 0.4, .first = 0.1, .wander_mm = wander}));
    ASSERT_TRUE(m.lines);
    EXPECT_GT(m.roughness.aperiodic, last);
    last = m.roughness.aperiodic;
  }
}

TEST(Roughness, NeedsTiles) {
  EXPECT_FALSE(MeasureRoughness(FieldSpectrum{}, std::nullopt, 0).has_value());
  EXPECT_THROW((RoughnessOptions{.min_wavelength_mm = 3}.Check()), BadOption);
  EXPECT_THROW((RoughnessOptions{.line_halfwidth_bins = 1}.Check()), BadOption);
  EXPECT_THROW((RoughnessOptions{.share_floor = 0}.Check()), BadOption);
}

}  // namespace
}  // namespace laygauge
