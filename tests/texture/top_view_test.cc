#include "texture/top_view.h"

#include <gtest/gtest.h>

#include <numbers>

#include "support/render_lines.h"

namespace laygauge {
namespace {

// The same coupon, whatever the direction in which its lines run: coupons of one drawing that show
// as many blobs must have as many by area.
TEST(TopView, TheSearchedAreaIsTheDrawings) {
  const Patch patch = RenderLines({.pitch_mm = 0.42, .lay_deg = 45});
  const double area_cm2 = MakeTopView(ReducedPatch(patch), 0, {}).searched_cm2;
  // 40 mm less walls of 0.9 mm and their seam of 0.5 mm, less the two holes with theirs; a pixel of
  // 0.1 mm along 160 mm of border.
  EXPECT_NEAR(area_cm2, (37.2 * 37.2 - std::numbers::pi * (4.4 * 4.4 + 3.0 * 3.0)) / 100, 0.16);
  for (const double lay : {17.0, 30.0, 45.0, 110.0}) {
    EXPECT_EQ(MakeTopView(ReducedPatch(patch), lay, {}).searched_cm2, area_cm2) << lay;
  }
}

}  // namespace
}  // namespace laygauge
