#pragma once

#include <opencv2/core.hpp>

#include "texture/reduced_patch.h"
#include "texture/torn_area.h"

namespace laygauge {

// The coupon's top, reduced and turned so that the lines run along the rows: what scars and blobs
// are looked for in. Wider than the field: to half a millimetre from the walls.
struct TopView {
  cv::Mat relative;  // CV_32FC1; 0 where not searched
  cv::Mat searched;  // CV_8UC1: 255 where searched
  double px_per_mm = 0;
  double searched_cm2 = 0;
  cv::Matx23d coupon_from_view;  // pixel -> mm in the coupon's frame

  [[nodiscard]] cv::Point2d CouponPoint(cv::Point2d pixel) const {
    const cv::Vec2d p = coupon_from_view * cv::Vec3d(pixel.x, pixel.y, 1);
    return {p[0], p[1]};
  }
};

// 20/3 px/mm: a track's stripes are 0.2 mm wide, a blob 0.5 mm.
inline constexpr double kTopViewPxPerMm = 20.0 / 3;

// Torn areas, with a seam of 2 mm, are not searched.
[[nodiscard]] TopView MakeTopView(const ReducedPatch& patch, double lay_deg, const TornArea& torn);

// `image` minus its mean over `window_mm` along the row, of searched pixels only: lines that run
// along the rows go, what crosses them stays. 0 where not searched.
[[nodiscard]] cv::Mat RemoveAlongRows(const cv::Mat& image, const TopView& view, double window_mm);

// The quantile of |image| at `p` over searched pixels (every fourth along both axes), divided by
// that of a standard normal variable: a standard deviation that a few per cent of defects do not
// move. p is 0.5, 0.75 or 0.9.
[[nodiscard]] double SpreadOn(const cv::Mat& image, const cv::Mat& searched, double p);

}  // namespace laygauge
