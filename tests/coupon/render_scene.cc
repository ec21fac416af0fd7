#include "coupon/render_scene.h"

#include <algorithm>
#include <cmath>

#include "coupon/outline.h"
#include "photo/srgb.h"

namespace laygauge {
namespace {

bool IsInPolygon(const cv::Point2d& p, const std::vector<cv::Point2d>& polygon) {
  bool inside = false;
  for (size_t i = 0, j = polygon.size() - 1; i < polygon.size(); j = i++) {
    const cv::Point2d& a = polygon[i];
    const cv::Point2d& b = polygon[j];
    if ((a.y > p.y) != (b.y > p.y) && p.x < a.x + (b.x - a.x) * (p.y - a.y) / (b.y - a.y)) {
      inside = !inside;
    }
  }
  return inside;
}

bool IsMaterial(const cv::Point2d& p, const CouponDescription& coupon) {
  if (!IsInPolygon(p, coupon.outline_mm)) return false;
  return std::none_of(coupon.holes.begin(), coupon.holes.end(), [&](const Hole& hole) {
    return std::hypot(p.x - hole.x_mm, p.y - hole.y_mm) < hole.diameter_mm / 2;
  });
}

// Whether the point lies on the wall loops, which have no lines.
bool IsWall(const cv::Point2d& p, const CouponDescription& coupon) {
  for (const Hole& hole : coupon.holes) {
    if (std::hypot(p.x - hole.x_mm, p.y - hole.y_mm) < hole.diameter_mm / 2 + coupon.wall_mm) {
      return true;
    }
  }
  const auto& outline = coupon.outline_mm;
  for (size_t i = 0; i < outline.size(); ++i) {
    const cv::Point2d side = outline[(i + 1) % outline.size()] - outline[i];
    const double across = side.cross(p - outline[i]) / cv::norm(side);
    const double along = side.dot(p - outline[i]) / side.dot(side);
    if (std::abs(across) < coupon.wall_mm && along >= 0 && along <= 1) return true;
  }
  return false;
}

// A ray towards the sheet: where it meets the planes at the coupon's top and on the paper.
struct Ray {
  cv::Point2d top_mm;
  cv::Point2d paper_mm;
  [[nodiscard]] cv::Point2d At(double share_down) const {
    return top_mm + (paper_mm - top_mm) * share_down;
  }
};

// Rays of pixels, exact every 16 pixels and bilinear between: over 1 mm the mapping bends by less
// than 1e-4 mm.
class PixelRays {
 public:
  PixelRays(const View& view, double height_mm)
      : columns_(view.camera.image_size_px.width / kStep + 3),
        rows_(view.camera.image_size_px.height / kStep + 3) {
    for (int r = 0; r < rows_; ++r) {
      for (int c = 0; c < columns_; ++c) {
        const Eigen::Vector2d pixel((c - 1) * kStep, (r - 1) * kStep);
        const auto top = view.SheetFromPixel(pixel, height_mm);
        const auto paper = view.SheetFromPixel(pixel, 0);
        nodes_.push_back({{top.x(), top.y()}, {paper.x(), paper.y()}});
      }
    }
  }

  [[nodiscard]] Ray At(double x, double y) const {
    const int c = static_cast<int>(std::floor(x / kStep)) + 1;
    const int r = static_cast<int>(std::floor(y / kStep)) + 1;
    const double right = x / kStep + 1 - c;
    const double down = y / kStep + 1 - r;
    const Ray* n = &nodes_[static_cast<size_t>(r) * columns_ + c];
    const auto blend = [&](const cv::Point2d& a, const cv::Point2d& b, const cv::Point2d& d,
                           const cv::Point2d& e) {
      return (a * (1 - right) + b * right) * (1 - down) + (d * (1 - right) + e * right) * down;
    };
    return {blend(n[0].top_mm, n[1].top_mm, n[columns_].top_mm, n[columns_ + 1].top_mm),
            blend(n[0].paper_mm, n[1].paper_mm, n[columns_].paper_mm, n[columns_ + 1].paper_mm)};
  }

 private:
  static constexpr int kStep = 16;
  int columns_;
  int rows_;
  std::vector<Ray> nodes_;
};

double Shade(const Scene& scene, const Ray& ray) {
  const auto in_coupon = [&](const cv::Point2d& sheet_mm) {
    return Turned(sheet_mm - scene.center_mm, -scene.turn_deg);
  };
  if (scene.coupon_lies_there) {
    const cv::Point2d top = in_coupon(ray.top_mm);
    if (IsMaterial(top, scene.coupon)) {
      if (IsWall(top, scene.coupon)) return scene.paper * scene.reflectance;
      const double across = Turned(top, -scene.line_lay_deg).y;
      const double line = std::cos(2 * CV_PI * across / scene.line_pitch_mm);
      return scene.paper * scene.reflectance * (1 + scene.line_depth * line);
    }
    constexpr int kSteps = 8;
    for (int i = 1; i <= kSteps; ++i) {
      if (IsMaterial(in_coupon(ray.At(static_cast<double>(i) / kSteps)), scene.coupon)) {
        return scene.paper * scene.wall_reflectance;
      }
    }
    const bool shaded =
        IsInPolygon(in_coupon(ray.paper_mm - scene.shadow_mm), scene.coupon.outline_mm);
    if (shaded) return scene.paper * scene.floor_reflectance * (1 - scene.shadow_depth);
  }
  return scene.paper * scene.floor_reflectance;
}

}  // namespace

View MakeView(const CameraSetup& setup) {
  View view;
  view.camera.image_size_px = setup.size_px;
  view.camera.focal_px = setup.px_per_mm * setup.height_mm;
  view.camera.center_x_px = (setup.size_px.width - 1) / 2.0;
  view.camera.center_y_px = (setup.size_px.height - 1) / 2.0;
  view.camera.k1 = -0.05;
  view.camera.p1 = 0.0003;
  const double tilt = std::atan2(setup.aside_mm, setup.height_mm);
  const Eigen::Matrix3d rotation =
      (Eigen::AngleAxisd(setup.turn_deg * CV_PI / 180, Eigen::Vector3d::UnitZ()) *
       Eigen::AngleAxisd(-tilt, Eigen::Vector3d::UnitY()))
          .toRotationMatrix();
  const Eigen::Vector3d eye(setup.looks_at_mm.x - setup.aside_mm, setup.looks_at_mm.y,
                            -setup.height_mm);
  view.pose.camera_from_sheet_rotation = rotation;
  view.pose.camera_from_sheet_translation_mm = -rotation * eye;
  return view;
}

Photo RenderScene(const Scene& scene, const View& view) {
  constexpr int kSamples = 2;
  Photo photo;
  photo.file = "scene";
  photo.encoded.create(view.camera.image_size_px, CV_8UC1);
  const PixelRays rays(view, scene.coupon.thickness_mm);
  cv::RNG random(7);
  for (int y = 0; y < photo.encoded.rows; ++y) {
    for (int x = 0; x < photo.encoded.cols; ++x) {
      double sum = 0;
      for (int k = 0; k < kSamples * kSamples; ++k) {
        sum += Shade(scene, rays.At(x + (k % kSamples + 0.5) / kSamples - 0.5,
                                    y + (k / kSamples + 0.5) / kSamples - 0.5));
      }
      const double encoded =
          SrgbFromLinear(sum / (kSamples * kSamples)) + random.gaussian(scene.noise_sd);
      photo.encoded.at<std::uint8_t>(y, x) = cv::saturate_cast<std::uint8_t>(255 * encoded);
    }
  }
  return photo;
}

Photo RenderPlane(const View& view, double height_mm,
                  const std::function<double(const cv::Point2d&)>& light) {
  Photo photo;
  photo.file = "plane";
  photo.encoded.create(view.camera.image_size_px, CV_16UC1);
  for (int y = 0; y < photo.encoded.rows; ++y) {
    for (int x = 0; x < photo.encoded.cols; ++x) {
      const auto point =
          view.SheetFromPixel({static_cast<double>(x), static_cast<double>(y)}, height_mm);
      photo.encoded.at<std::uint16_t>(y, x) =
          cv::saturate_cast<std::uint16_t>(65535 * SrgbFromLinear(light({point.x(), point.y()})));
    }
  }
  return photo;
}

Light EvenLight(double level) {
  Light light;
  light.page_mm = {210, 148};
  light.degree = 0;
  light.coefficients = {std::log(level)};
  return light;
}

}  // namespace laygauge
