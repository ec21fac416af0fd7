#include "texture/reduced_patch.h"

#include <gtest/gtest.h>

#include "support/render_lines.h"

namespace laygauge {
namespace {

// 20 px/mm become 10: means of 2 x 2 pixels at their common centre, to single precision.
TEST(ReducedPatch, MeansOfSquares) {
  const Patch patch = RenderLines({.pitch_mm = 0.5, .lay_deg = 30, .first = 0.2});
  const ReducedPatch reduced(patch);
  EXPECT_EQ(reduced.px_per_mm, 10);
  const cv::Point at(101, 37);
  const cv::Rect four(2 * at.x, 2 * at.y, 2, 2);
  EXPECT_NEAR(reduced.relative.at<float>(at), cv::mean(patch.relative(four))[0], 1e-6);
  EXPECT_EQ(reduced.regions.at<std::uint8_t>(at), patch.regions.at<std::uint8_t>(four.tl()));
  const cv::Point2d of_reduced = (cv::Point2d(at) - reduced.origin_px) / reduced.px_per_mm;
  const cv::Point2d of_patch =
      patch.CouponFromPixel(cv::Point2d(four.tl()) + cv::Point2d(0.5, 0.5));
  EXPECT_NEAR(cv::norm(of_reduced - of_patch), 0, 1e-12);
}

}  // namespace
}  // namespace laygauge
