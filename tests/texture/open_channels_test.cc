#include "texture/open_channels.h"

#include <gtest/gtest.h>

#include <cmath>
#include <functional>
#include <numbers>

namespace laygauge {
namespace {

constexpr double kClosedUm = 30;
constexpr double kSdUm = 4;
constexpr double kLinkPx = 2;
constexpr double kStepMm = 0.25;
constexpr int kStations = 100;  // 25 mm
constexpr int kLines = 50;
constexpr double kSpacingPx = 8;
constexpr double kOpenDarkness = 0.9;  // docs/metrics.md, "Gaps"

// Valleys a fixed distance apart, of the darkness given by line and station.
LineValleys Valleys(const std::function<double(int line, int station)>& darkness_um) {
  LineValleys valleys;
  valleys.step_mm = kStepMm;
  valleys.stations.resize(kStations);
  for (int station = 0; station < kStations; ++station) {
    for (int line = 0; line < kLines; ++line) {
      valleys.stations[static_cast<std::size_t>(station)].push_back(
          {static_cast<float>(10 + kSpacingPx * line),
           static_cast<float>(darkness_um(line, station))});
    }
  }
  return valleys;
}

OpenChannels Find(const LineValleys& valleys) {
  return FindOpenChannels(valleys, kClosedUm, kSdUm, kLinkPx);
}

// Mean of the positive part of a normal variable (common fact): m Phi(m / s) + s phi(m / s).
double MeanPositive(double mean, double sd) {
  const double z = mean / sd;
  const double density = std::exp(-z * z / 2) / std::sqrt(2 * std::numbers::pi);
  return mean * 0.5 * (1 + std::erf(z / std::numbers::sqrt2)) + sd * density;
}

// Every valley alike: the mean over what a closed valley's darkness may be is known. Steps beyond
// two standard deviations are left out: 0.0085 standard deviations of the mean at most, and with
// their weight, 0.046, what lies within is counted by so much more; half a standard deviation a
// step, linear in between, adds 0.01.
TEST(OpenChannels, AreTheMeanOverWhatAClosedValleyMayBe) {
  constexpr double kToleranceUm = (0.0085 + 0.046 * 0.4 + 0.01) * kSdUm;
  for (const double above_um : {-20.0, -6.0, -3.0, 0.0, 3.0, 6.0, 30.0}) {
    const OpenChannels found = Find(Valleys([&](int, int) { return kClosedUm + above_um; }));
    const double length_mm = kLines * kStations * kStepMm;
    const double mean_um = found.area_mm2.mean / length_mm * 1000 * kOpenDarkness;
    EXPECT_NEAR(mean_um, MeanPositive(above_um, kSdUm), kToleranceUm) << above_um;
    EXPECT_NEAR(found.wide_mm.mean * 1000 * kOpenDarkness, MeanPositive(above_um, kSdUm),
                kToleranceUm)
        << above_um;
    // Open or closed as a whole, by the chance of it; a step's weight, 0.2, is not divided.
    const double chance = 0.5 * (1 + std::erf(above_um / kSdUm / std::numbers::sqrt2));
    EXPECT_NEAR(found.count.mean, kLines * chance, 0.5 * 0.205 * kLines) << above_um;
    EXPECT_NEAR(found.long_mm.mean, found.count.mean * kStations * kStepMm, 1e-6) << above_um;
  }
}

// What is not known of closed valleys is all that a plainly open area is uncertain by: its length
// times kSdUm, of which the steps up to two standard deviations hold 0.91 (a normal variable
// truncated there has 0.88; of half steps the outermost count whole, which is a little more).
TEST(OpenChannels, TellHowMuchTheClosedValleyMatters) {
  const OpenChannels found = Find(Valleys([](int, int) { return kClosedUm + 40; }));
  const double whole = kLines * kStations * kStepMm * kSdUm / 1000 / kOpenDarkness;
  EXPECT_NEAR(found.area_mm2.sd / whole, 0.91, 0.03);
  EXPECT_NEAR(found.count.sd, 0, 1e-6);
}

// One valley that grows darker little by little moves every column little by little: none by more
// than a step's weight, 0.2, of the channel that it makes.
TEST(OpenChannels, NoStepWhereAChannelOpens) {
  double largest = 0;
  double largest_area = 0;
  OpenChannels last = Find(Valleys([](int, int) { return 0; }));
  for (double darkness_um = 15; darkness_um < 50; darkness_um += 0.25) {
    const OpenChannels now =
        Find(Valleys([&](int line, int) { return line == 7 ? darkness_um : 0; }));
    largest = std::max(largest, now.count.mean - last.count.mean);
    largest_area = std::max(largest_area, now.area_mm2.mean - last.area_mm2.mean);
    last = now;
  }
  EXPECT_NEAR(last.count.mean, 1, 1e-9);
  EXPECT_LE(largest, 0.205);
  EXPECT_LE(largest_area, kStations * kStepMm * 0.25 / 1000 / kOpenDarkness + 1e-9);
}

TEST(OpenChannels, CountLengthsOfPiecesAlongTheLay) {
  // One of 1 mm is too short, one of 1.25 mm is none too short, 4.75 mm are not long, 5 mm are.
  const int stations[] = {4, 5, 19, 20};
  const LineValleys valleys = Valleys([&](int line, int station) {
    return line % 10 == 3 && line < 40 && station >= 20 && station < 20 + stations[line / 10]
               ? kClosedUm + 50
               : 0;
  });
  const OpenChannels found = Find(valleys);
  EXPECT_NEAR(found.count.mean, 3, 1e-9);
  EXPECT_NEAR(found.length_mm.mean, 1.25 + 4.75 + 5, 1e-9);
  EXPECT_NEAR(found.long_mm.mean, 5, 1e-9);
  ASSERT_EQ(found.plain.size(), 3U);
  EXPECT_EQ(found.plain[2].size(), 20U);
  EXPECT_EQ(found.plain[2].front().station, 20);
  EXPECT_EQ(found.plain[2].back().station, 39);
  EXPECT_NEAR(found.plain[2].front().width_mm, 0.05 / kOpenDarkness, 1e-6);
}

// A channel follows its valley by up to the link's length a station, and no further.
TEST(OpenChannels, FollowAValleyAcrossTheRows) {
  const auto count = [](double px_a_station) {
    LineValleys valleys = Valleys([](int line, int) { return line == 5 ? 80 : 0; });
    for (std::size_t station = 0; station < valleys.stations.size(); ++station) {
      for (LineValley& valley : valleys.stations[station]) {
        valley.row_px += static_cast<float>(px_a_station * static_cast<double>(station));
      }
    }
    return Find(valleys).count.mean;
  };
  EXPECT_NEAR(count(1.9), 1, 1e-9);
  EXPECT_EQ(count(2.1), 0);
}

TEST(OpenChannels, WithoutValleysThereAreNone) {
  const OpenChannels found = Find(LineValleys{});
  EXPECT_EQ(found.count.mean, 0);
  EXPECT_EQ(found.area_mm2.mean, 0);
  EXPECT_EQ(found.wide_mm.mean, 0);
  EXPECT_TRUE(found.plain.empty());
}

}  // namespace
}  // namespace laygauge
