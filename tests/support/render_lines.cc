#include "support/render_lines.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <random>
#include <vector>

namespace laygauge {
namespace {

constexpr double kTwoPi = 2 * std::numbers::pi;

}  // namespace

double AcrossLay(cv::Point2d point_mm, double lay_deg) {
  const double lay = lay_deg * std::numbers::pi / 180;
  return point_mm.dot({std::sin(lay), std::cos(lay)});
}

CouponDescription SquareCoupon() {
  CouponDescription coupon;
  coupon.name = "square-40";
  coupon.outline_mm = {{-20, -20}, {20, -20}, {20, 20}, {-20, 20}};
  coupon.thickness_mm = 2.5;
  coupon.layer_height_mm = 0.2;
  coupon.wall_mm = 0.9;
  coupon.holes = {{9, -9, 6}, {-10, 8, 3.2}};
  return coupon;
}

cv::Mat SquareCouponRegions(double px_per_mm, double side_mm) {
  const int side = static_cast<int>(std::lround(side_mm * px_per_mm));
  const CouponDescription coupon = SquareCoupon();
  cv::Mat regions(side, side, CV_8UC1);
  for (int y = 0; y < side; ++y) {
    for (int x = 0; x < side; ++x) {
      const cv::Point2d p((x - (side - 1) / 2.0) / px_per_mm, (y - (side - 1) / 2.0) / px_per_mm);
      const double edge = 20 - std::max(std::abs(p.x), std::abs(p.y));
      double hole = 1e9;
      for (const Hole& h : coupon.holes) {
        hole = std::min(hole, std::hypot(p.x - h.x_mm, p.y - h.y_mm) - h.diameter_mm / 2);
      }
      Region region = Region::kMargin;
      if (edge <= 0 || hole <= 0) {
        region = Region::kOff;
      } else if (edge < coupon.wall_mm || hole < coupon.wall_mm) {
        region = Region::kWall;
      } else if (edge > 3 && hole > 2) {
        region = Region::kField;
      }
      regions.at<std::uint8_t>(y, x) = static_cast<std::uint8_t>(region);
    }
  }
  return regions;
}

Patch RenderLines(const LinesToRender& lines) {
  std::mt19937_64 random(lines.seed);
  std::normal_distribution<double> normal;
  const int last = static_cast<int>(lines.side_mm / lines.pitch_mm) + 2;
  std::vector<double> offsets(2 * last + 1, 0);  // of lines -last..last
  if (lines.wander_mm > 0) {
    std::generate(offsets.begin(), offsets.end(), [&] { return lines.wander_mm * normal(random); });
  }
  Patch patch;
  patch.px_per_mm = lines.px_per_mm;
  patch.level = 0.4;
  patch.regions = SquareCouponRegions(lines.px_per_mm, lines.side_mm);
  patch.origin_px = {(patch.regions.cols - 1) / 2.0, (patch.regions.rows - 1) / 2.0};
  patch.relative.create(patch.regions.size(), CV_32FC1);
  for (int y = 0; y < patch.relative.rows; ++y) {
    for (int x = 0; x < patch.relative.cols; ++x) {
      const double across = AcrossLay(patch.CouponFromPixel(cv::Point2d(x, y)), lines.lay_deg);
      const int line = static_cast<int>(std::lround(across / lines.pitch_mm));
      const double phase = kTwoPi * (across - offsets[last + line]) / lines.pitch_mm;
      patch.relative.at<float>(y, x) = static_cast<float>(1 + lines.first * std::cos(phase) +
                                                          lines.second * std::cos(2 * phase));
    }
  }
  if (lines.blur_sd_mm > 0) {
    cv::GaussianBlur(patch.relative, patch.relative, {}, lines.blur_sd_mm * lines.px_per_mm);
    patch.blur_sd_mm = lines.blur_sd_mm;
  }
  if (lines.noise_sd > 0) {
    for (auto it = patch.relative.begin<float>(); it != patch.relative.end<float>(); ++it) {
      *it += static_cast<float>(lines.noise_sd * normal(random));
    }
    patch.noise_sd = lines.noise_sd;
  }
  return patch;
}

}  // namespace laygauge
