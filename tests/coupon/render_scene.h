#pragma once

#include <functional>
#include <vector>

#include "coupon/coupon_description.h"
#include "coupon/light.h"
#include "photo/photo.h"
#include "sheet/camera.h"

namespace laygauge {

// A camera over a sheet that looks at one place of it, with a pixel scale and a tilt; its lens
// distorts. Good for rendering a part of a sheet cheaply.
struct CameraSetup {
  cv::Size size_px = {850, 850};
  cv::Point2d looks_at_mm = {53, 48};
  double px_per_mm = 14;
  double height_mm = 300;
  double aside_mm = 40;  // the camera stands this far to the left of what it looks at
  double turn_deg = 0;   // of the photo
};
[[nodiscard]] View MakeView(const CameraSetup& setup);

// One coupon in an empty world of white paper.
struct Scene {
  CouponDescription coupon;
  cv::Point2d center_mm = {53, 48};
  double turn_deg = 0;
  double reflectance = 0.4;
  double wall_reflectance = 0.4;   // of all side walls
  cv::Point2d shadow_mm = {0, 0};  // how far, and where to, the outline's shadow falls
  double shadow_depth = 0.5;       // share of light that it takes
  double line_pitch_mm = 0.4;
  double line_lay_deg = 45;
  double line_depth = 0.15;      // amplitude over reflectance
  double paper = 0.7;            // linear light of paper
  double floor_reflectance = 1;  // of what the well's floor is printed with
  bool coupon_lies_there = true;
  double noise_sd = 0.006;  // of encoded values, 0..1
};

// 8-bit, anti-aliased by 2 x 2 samples a pixel. Slow, plain and independent of the program's own
// rectification: each sample's ray is followed down through the coupon's height.
[[nodiscard]] Photo RenderScene(const Scene& scene, const View& view);

// A photo whose linear light at each pixel is `light(sheet point at height_mm)`; 16-bit.
[[nodiscard]] Photo RenderPlane(const View& view, double height_mm,
                                const std::function<double(const cv::Point2d&)>& light);

// Even light of that level on an A5 sheet.
[[nodiscard]] Light EvenLight(double level);

}  // namespace laygauge
