#include "photo/upright.h"

#include <gtest/gtest.h>

#include <array>

namespace laygauge {
namespace {

// EXIF 2.3 (JEITA CP-3451B), tag Orientation: for each value, at which side of the picture as
// seen row 0 and column 0 of the stored pixels lie. Followed here pixel by pixel.
enum Side { kTop, kBottom, kLeft, kRight };
struct Rule {
  Side row_0;
  Side column_0;
};
constexpr std::array<Rule, 8> kRules{{{kTop, kLeft},
                                      {kTop, kRight},
                                      {kBottom, kRight},
                                      {kBottom, kLeft},
                                      {kLeft, kTop},
                                      {kRight, kTop},
                                      {kRight, kBottom},
                                      {kLeft, kBottom}}};

// Where the stored pixel (row, column) is seen.
cv::Point Seen(const Rule& rule, int row, int column, cv::Size seen) {
  cv::Point at;
  const auto place = [&](Side side, int distance) {
    if (side == kTop) at.y = distance;
    if (side == kBottom) at.y = seen.height - 1 - distance;
    if (side == kLeft) at.x = distance;
    if (side == kRight) at.x = seen.width - 1 - distance;
  };
  place(rule.row_0, row);
  place(rule.column_0, column);
  return at;
}

template <class Sample>
void CheckAll(int type) {
  for (int orientation = 1; orientation <= 8; ++orientation) {
    SCOPED_TRACE(orientation);
    cv::Mat stored(3, 5, type);
    for (int i = 0; i < 15; ++i) stored.at<Sample>(i / 5, i % 5) = static_cast<Sample>(i + 1);
    const cv::Mat upright = Upright(stored.clone(), orientation);
    const bool turned = orientation >= 5;
    ASSERT_EQ(upright.size(), turned ? cv::Size(3, 5) : cv::Size(5, 3));
    for (int i = 0; i < 15; ++i) {
      const cv::Point at =
          Seen(kRules[static_cast<size_t>(orientation - 1)], i / 5, i % 5, upright.size());
      EXPECT_EQ(upright.at<Sample>(at), i + 1);
    }
  }
}

TEST(Upright, FollowsTheDefinitionOfEachOrientation) {
  CheckAll<std::uint8_t>(CV_8UC1);
  CheckAll<std::uint16_t>(CV_16UC1);
}

}  // namespace
}  // namespace laygauge
