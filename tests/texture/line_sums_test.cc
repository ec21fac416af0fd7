#include "texture/line_sums.h"

#include <gtest/gtest.h>

#include <cmath>
#include <map>
#include <numbers>
#include <random>

namespace laygauge {
namespace {

// The slow obvious version: every piece summed pixel by pixel, on the sheared grid.
int SumOnePiece(const cv::Mat& image, cv::Point centre, double direction_deg, double length_px) {
  const double radians = direction_deg * std::numbers::pi / 180;
  const double dx = std::cos(radians);
  const double dy = -std::sin(radians);
  const bool steep = std::abs(dy) >= std::abs(dx);
  const double slope = steep ? dx / dy : dy / dx;
  const int half =
      static_cast<int>(std::lround(length_px / 2 * std::max(std::abs(dx), std::abs(dy))));
  const int from = steep ? centre.y : centre.x;
  int sum = 0;
  for (int k = from - half; k <= from + half; ++k) {
    const int aside = static_cast<int>(std::lround(slope * k) - std::lround(slope * from));
    const cv::Point p = steep ? cv::Point(centre.x + aside, k) : cv::Point(k, centre.y + aside);
    if (cv::Rect({0, 0}, image.size()).contains(p)) {
      sum += image.at<std::int16_t>(p);
    }
  }
  return sum;
}

TEST(LineSums, AgreeWithSummingPixelByPixel) {
  std::mt19937_64 random(1);
  std::uniform_int_distribution<int> value(-160, 160);
  cv::Mat image = cv::Mat::zeros(37, 53, CV_16SC1);
  cv::Mat searched = cv::Mat::zeros(image.size(), CV_8UC1);
  for (int y = 2; y < image.rows - 1; ++y) {
    for (int x = 3 + y / 4; x < image.cols - 2; ++x) {
      searched.at<std::uint8_t>(y, x) = 255;
      image.at<std::int16_t>(y, x) = static_cast<std::int16_t>(value(random));
    }
  }
  const std::vector<double> directions{15, 40, 44.9, 45.1, 63, 90, 111, 134, 137, 165};
  const LineSums sums = SumAlongLines(image, searched, directions, 11, 0.0);
  ASSERT_EQ(sums.hits.size(), directions.size() * cv::countNonZero(searched));
  for (const LineHit& hit : sums.hits) {
    const double direction = directions[static_cast<size_t>(hit.direction)];
    const auto pixels = LineOffsets(direction, 11).size();
    // Whole numbers summed: nothing but the division's rounding differs.
    ASSERT_NEAR(hit.sigmas * sums.spread[static_cast<size_t>(hit.direction)] *
                    std::sqrt(static_cast<double>(pixels)),
                std::abs(SumOnePiece(image, hit.centre, direction, 11)), 1e-6)
        << direction << " " << hit.centre;
  }
}

// White noise of deviation s: a sum of n pixels has the deviation s sqrt(n) (common practice).
TEST(LineSums, SpreadOfWhiteNoiseIsItsDeviation) {
  std::mt19937_64 random(2);
  std::normal_distribution<double> normal(0, 50);
  cv::Mat image(300, 300, CV_16SC1);
  for (auto it = image.begin<std::int16_t>(); it != image.end<std::int16_t>(); ++it) {
    *it = static_cast<std::int16_t>(std::lround(normal(random)));
  }
  const cv::Mat searched(image.size(), CV_8UC1, cv::Scalar::all(255));
  const LineSums sums = SumAlongLines(image, searched, {30, 90, 120}, 33, 20);
  for (const double spread : sums.spread) {
    // The 90 % quantile of 5625 values, every tenth of them independent: 6 %, twice; sums near
    // the border are shorter, which lowers the spread by up to 4 %.
    EXPECT_NEAR(spread, 50, 0.12 * 50);
  }
  EXPECT_TRUE(sums.hits.empty());  // nobody is 20 deviations off
}

TEST(LineSums, SpreadIsInterpolatedBetweenDirections) {
  const LineSums sums{{20, 30, 50}, {1, 2, 4}, {}};
  EXPECT_DOUBLE_EQ(sums.SpreadAt(10), 1);
  EXPECT_DOUBLE_EQ(sums.SpreadAt(25), 1.5);
  EXPECT_DOUBLE_EQ(sums.SpreadAt(40), 3);
  EXPECT_DOUBLE_EQ(sums.SpreadAt(60), 4);
}

}  // namespace
}  // namespace laygauge
