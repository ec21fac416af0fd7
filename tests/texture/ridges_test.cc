#include "texture/ridges.h"

#include <gtest/gtest.h>

#include <array>
#include <cmath>
#include <numbers>
#include <random>

#include "support/render_channels.h"
#include "support/render_lines.h"

namespace laygauge {
namespace {

Finding Measure(const Patch& patch) {
  CouponDescription coupon = SquareCoupon();
  coupon.lay_deg = 45;
  return RidgesMetric().measure(MakeSurface(patch, coupon));
}

struct Lengths {
  double min_mm = 0;
  double max_mm = 0;
};
constexpr Lengths kLumps{2.5, 3.5};
constexpr Lengths kWander{12, 16};

// Random by line, a wave along it, standard deviation 1.
class LineWaves {
 public:
  LineWaves(unsigned seed, Lengths lengths) {
    std::mt19937 random(seed);
    std::uniform_real_distribution<double> phase(0, 2 * std::numbers::pi);
    std::uniform_real_distribution<double> length_mm(lengths.min_mm, lengths.max_mm);
    for (Wave& wave : waves_) {
      wave = {phase(random), 2 * std::numbers::pi / length_mm(random)};
    }
  }
  double operator()(int line, double along_mm) const {
    const Wave& wave = waves_[static_cast<std::size_t>(line + 100)];
    return std::numbers::sqrt2 * std::cos(wave.phase + wave.per_mm * along_mm);
  }

 private:
  struct Wave {
    double phase = 0;
    double per_mm = 0;
  };
  std::array<Wave, 200> waves_;
};

Patch Waved(double darkness_sd_mm, double top_sd, Lengths lengths) {
  const LineWaves valleys(1, lengths);
  const LineWaves tops(2, lengths);
  return RenderChannels(
      {.pitch_mm = 0.45,
       .level = 0.4,
       .blur_sd_mm = 0.06,
       .noise_sd = 0.01,
       .darkness_mm = [&](int line,
                          double along) { return 0.02 + darkness_sd_mm * valleys(line, along); },
       .top = [&](int line, double along) { return 1 + top_sd * tops(line, along); }});
}

// Covariance of a wave of variance 1 with itself 0.5 mm on, of means over 0.5 mm: analytic, the
// mean over the lengths. Such waves are gone, and more, 1 mm on: all of it counts as ridges'.
double CovarianceNear(Lengths lengths) {
  double sum = 0;
  constexpr int kSteps = 100;
  for (int i = 0; i < kSteps; ++i) {
    const double length_mm =
        lengths.min_mm + (i + 0.5) / kSteps * (lengths.max_mm - lengths.min_mm);
    const double turn = std::numbers::pi * 0.5 / length_mm;  // half of 0.5 mm
    const double kept = std::sin(turn) / turn;
    sum += kept * kept * std::cos(2 * turn);
  }
  return sum / kSteps;
}

// Height of ridges that make the bottoms of valleys vary by `bottom_pct`, in a gray coupon.
double WantUm(double bottom_pct) {
  return 9 / (1 - 0.35 * 0.4) * bottom_pct * std::sqrt(CovarianceNear(kLumps));
}

// A box much narrower than a Gaussian blur darkens its middle by width / (sd root 2 pi) (common
// fact); smoothing by 1 2 1 over samples of 0.05 mm keeps 0.5 + 0.5 exp(-0.05^2 / 2 sd^2).
double BottomPct(double darkness_sd_mm) {
  constexpr double kBlurMm = 0.06;
  return 100 * darkness_sd_mm / (kBlurMm * std::sqrt(2 * std::numbers::pi)) *
         (0.5 + 0.5 * std::exp(-0.5 * 0.05 * 0.05 / (kBlurMm * kBlurMm)));
}

TEST(Ridges, GrowWithTheirHeight) {
  // Bottoms are read at the nearest sample, up to half of one from the middle: a mean loss of 6 %.
  // 75 lines of 12 waves scatter by 1 / root(2 * 900), 2 %; a tile's mean takes less.
  for (const double sd_mm : {0.0025, 0.005}) {
    const double want_um = WantUm(BottomPct(sd_mm));
    EXPECT_NEAR(*Measure(Waved(sd_mm, 0, kLumps)).features[0].value, 0.95 * want_um,
                0.06 * want_um);
  }
}

// What light from one side does alike to bright and to dark places drops out: of tops that vary by
// t, valleys between two show half of the variance, tops all of it.
TEST(Ridges, WhatIsAsBrightAsDarkIsNotHeight) {
  const double bottom_pct = BottomPct(0.005);
  const double top_pct = 3;
  const double want_um = WantUm(std::sqrt(bottom_pct * bottom_pct - top_pct * top_pct / 2));
  EXPECT_NEAR(*Measure(Waved(0.005, top_pct / 100, kLumps)).features[0].value, 0.95 * want_um,
              0.1 * want_um);  // the loss at the bottoms (above) weighs more in the difference
}

TEST(Ridges, WanderingLinesAreNone) {
  // The same valleys, but over lengths over which the path wanders.
  EXPECT_EQ(*Measure(Waved(0.005, 0, kWander)).features[0].value, 0);
}

TEST(Ridges, EvenLinesAreNone) {
  const Finding ridges = Measure(Waved(0, 0, kLumps));
  EXPECT_EQ(*ridges.features[0].value, 0);
  EXPECT_TRUE(ridges.marks.empty());
}

TEST(Ridges, WithoutLinesThereIsAReason) {
  const Finding ridges =
      Measure(RenderChannels({.noise_sd = 0.01, .darkness_mm = [](int, double) { return 0.0; }}));
  EXPECT_FALSE(ridges.features[0].value.has_value());
  EXPECT_FALSE(ridges.features[0].reason.empty());
}

}  // namespace
}  // namespace laygauge
