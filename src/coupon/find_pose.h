#pragma once

#include <opencv2/core.hpp>

#include "coupon/coupon_description.h"
#include "coupon/edge_fit.h"
#include "coupon/edge_search.h"
#include "coupon/locate.h"

namespace laygauge {

constexpr double kFine_px_per_mm = 10;
constexpr int kReduction = 4;  // of the reduced picture: 2.5 px/mm

// A well in the plane of the coupon's top: encoded brightness over the paper's, CV_32FC1.
struct WellPicture {
  cv::Mat brightness;
  cv::Point2d origin_px;  // where the well's centre lies
  cv::Mat reduced;        // by averages of kReduction x kReduction pixels
};

// Half the side of the square round the well's centre in which the coupon's edges, their walls'
// feet and the profiles across them can lie.
[[nodiscard]] double HalfSideOfWell_mm(const CouponDescription& coupon,
                                       const LocateOptions& options);

struct FoundPose {
  EdgeFit fit;
  bool upside_down = false;  // the holes lie rather where they would with the top side down
};

// Coarse to fine: the few best of all turns and quarters on the reduced picture, then the best near
// these on the full one, then that to a fraction of a pixel. Always finds one: the fit says how
// much of the coupon is seen there.
[[nodiscard]] FoundPose FindPose(const WellPicture& picture, const CouponDescription& coupon,
                                 const WallView& wall, const LocateOptions& options);

}  // namespace laygauge
