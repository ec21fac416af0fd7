#include "texture/ridges.h"

#include <gtest/gtest.h>

#include <cmath>
#include <map>
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

// Random by line, smooth along it (a random wave of 4 mm), standard deviation 1.
double Random(int line, double along_mm, unsigned seed) {
  std::mt19937 random(static_cast<unsigned>(line + 1000) * 7919U + seed);
  const double phase = std::uniform_real_distribution<double>(0, 6.283185)(random);
  const double length_mm = std::uniform_real_distribution<double>(3, 5)(random);
  return std::sqrt(2.0) * std::cos(phase + 6.283185 * along_mm / length_mm);
}

// Ridges fill some valleys, deepen others and make line tops uneven.
Patch Ridged(double darkness_sd_mm, double top_sd) {
  return RenderChannels(
      {.pitch_mm = 0.45,
       .noise_sd = 0.01,
       .darkness_mm =
           [=](int line, double along) {
             return std::max(0.0, 0.02 + darkness_sd_mm * Random(line, along, 1));
           },
       .top = [=](int line, double along) { return 1 + top_sd * Random(line, along, 2); }});
}

TEST(Ridges, GrowWithTheirHeight) {
  const double low = *Measure(Ridged(0.005, 0.01)).features[0].value;
  const double high = *Measure(Ridged(0.010, 0.02)).features[0].value;
  // The mean of two neighbours' darkness varies by its sd over root 2; 7 um of height for each um
  // (docs/metrics.md). Averaging over 0.5 mm of a wave of 3 to 5 mm takes 2 to 5 %.
  EXPECT_NEAR(low, 7 * 5 / std::sqrt(2.0), 0.15 * low);
  EXPECT_NEAR(high / low, 2, 0.25);
}

TEST(Ridges, WanderingLinesAreNone) {
  // The same valleys, but even tops: lines that lie nearer and further apart.
  EXPECT_EQ(*Measure(Ridged(0.010, 0)).features[0].value, 0);
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
