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

// Random by line, smooth along it (a wave of 3 to 5 mm), standard deviation 1.
class LineWaves {
 public:
  explicit LineWaves(unsigned seed) {
    std::mt19937 random(seed);
    std::uniform_real_distribution<double> phase(0, 2 * std::numbers::pi);
    std::uniform_real_distribution<double> length_mm(3, 5);
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

// Ridges fill some valleys, deepen others and make line tops uneven.
Patch Ridged(double darkness_sd_mm, double top_sd) {
  const LineWaves valleys(1);
  const LineWaves tops(2);
  return RenderChannels(
      {.pitch_mm = 0.45,
       .noise_sd = 0.01,
       .darkness_mm =
           [&](int line, double along) {
             return std::max(0.0, 0.01 + darkness_sd_mm * valleys(line, along));
           },
       .top = [&](int line, double along) { return 1 + top_sd * tops(line, along); }});
}

TEST(Ridges, GrowWithTheirHeight) {
  const double low = *Measure(Ridged(0.0025, 0.01)).features[0].value;
  const double high = *Measure(Ridged(0.005, 0.02)).features[0].value;
  // The mean of two neighbours' darkness varies by its sd over root 2; 10 um of height for each um
  // (docs/metrics.md). Of waves 3 to 5 mm long, means over 0.5 mm keep 0.97 and the covariance at
  // 0.5 mm, mean cos(2 pi 0.5 / length) = 0.70, keeps its root, 0.84.
  const double want = 10 * 2.5 / std::sqrt(2.0) * 0.97 * 0.84;
  // A tile of 3 mm takes off its mean (over six lines: 3 % of a wave's sd), and one of 1700 pieces
  // in a field of 80 independent waves scatters by 1 / sqrt(160), 8 %.
  EXPECT_NEAR(low, want, 0.12 * want);
  EXPECT_NEAR(high, 2 * want, 2 * 0.12 * want);
}

TEST(Ridges, WanderingLinesAreNone) {
  // The same valleys, but even tops: lines that lie nearer and further apart.
  EXPECT_EQ(*Measure(Ridged(0.005, 0)).features[0].value, 0);
}

TEST(Ridges, EvenLinesAreNone) {
  const Finding ridges = Measure(Ridged(0, 0));
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
