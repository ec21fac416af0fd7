#include "texture/tile_wave.h"

#include <gtest/gtest.h>

#include <numbers>
#include <random>

#include "support/render_lines.h"

namespace laygauge {
namespace {

// A drift of the phase over the field is a shift of the frequency: a grating of 2.5 cycles/mm
// looked at a fifth of a bin beside (bins of 1 / 6.4 mm: one turn in 32 mm) all but cancels over 34
// mm, and agrees once the drift is off. The grid's step of a 48th of a bin leaves half of that,
// 0.11 rad at 17 mm on either axis: 1 - 0.11^2 / 2, at worst.
TEST(WithoutPhaseDrift, TakesOffALinearDrift) {
  const FieldSpectrum spectrum =
      MeasureFieldSpectrum(RenderLines({.pitch_mm = 0.4, .lay_deg = 90, .first = 0.1}));
  for (const double shift : {0.2, -0.07}) {
    const Amplitudes drifting =
        AmplitudesAt(spectrum, {2.5 + shift * spectrum.bin_per_mm, shift * spectrum.bin_per_mm});
    EXPECT_LT(Agreement(drifting), 0.95);
    EXPECT_GT(Agreement(WithoutPhaseDrift(spectrum, drifting)), 0.99);
  }
}

// Phases by chance stay in disagreement: the best of the planes within a third of a bin, some
// twelve independent ones of this field, lifts 1 / sqrt(n) to about sqrt(ln(12) / n) = 0.25 for 41
// tiles, with a spread of a quarter of it.
TEST(WithoutPhaseDrift, MakesNoAgreementOfChance) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(RenderLines({.first = 0.1}));
  std::mt19937 random(5);
  std::uniform_real_distribution<double> phase(0, 2 * std::numbers::pi);
  Amplitudes chance(spectrum.tiles.size());
  for (auto& a : chance) a = std::polar(0.1, phase(random));
  EXPECT_LT(Agreement(WithoutPhaseDrift(spectrum, chance)), 0.45);
}

// Tiles half of which lie a quarter of a pitch beside, in no order that a plane follows, agree to
// |1 + i| / 2.
TEST(WithoutPhaseDrift, KeepsWhatIsNoDrift) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(RenderLines({.first = 0.1}));
  Amplitudes jumping(spectrum.tiles.size());
  for (std::size_t t = 0; t < jumping.size(); ++t) {
    jumping[t] = std::polar(0.1, t % 2 == 0 ? 0 : std::numbers::pi / 2);
  }
  EXPECT_NEAR(Agreement(WithoutPhaseDrift(spectrum, jumping)), std::numbers::sqrt2 / 2, 0.03);
}

}  // namespace
}  // namespace laygauge
