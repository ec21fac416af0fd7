#include "coupon/locate.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/statistics.h"
#include "coupon/find_pose.h"
#include "coupon/rectify.h"
#include "photo/srgb.h"

namespace laygauge {
namespace {

WellPicture TakePicture(const Photo& photo, const View& view, const Light& light, const Well& well,
                        double height_mm, double half_side_mm) {
  PlaneFrame frame;
  const int side =
      kReduction * static_cast<int>(std::ceil(2 * half_side_mm * kFine_px_per_mm / kReduction));
  frame.size_px = {side, side};
  frame.px_per_mm = kFine_px_per_mm;
  frame.origin_px = {(side - 1) / 2.0, (side - 1) / 2.0};
  frame.center_mm = {well.x_mm, well.y_mm};
  frame.height_mm = height_mm;
  WellPicture picture;
  picture.origin_px = frame.origin_px;
  picture.brightness = RectifyEncoded(photo, view, frame);
  picture.brightness *= 1 / SrgbFromLinear(light.At(well.x_mm, well.y_mm));
  static_assert(kReduction == 4);  // OpenCV has fast code for halves only
  cv::Mat half;
  cv::resize(picture.brightness, half, {}, 0.5, 0.5, cv::INTER_AREA);
  cv::resize(half, picture.reduced, {}, 0.5, 0.5, cv::INTER_AREA);
  return picture;
}

WallView ViewOfWalls(const View& view, const Well& well, double height_mm) {
  const Eigen::Vector3d eye = -view.pose.camera_from_sheet_rotation.transpose() *
                              view.pose.camera_from_sheet_translation_mm;
  WallView wall;
  wall.per_mm = height_mm / -eye.z();  // the sheet's z points into the paper
  wall.offset_mm =
      (cv::Point2d(eye.x(), eye.y()) - cv::Point2d(well.x_mm, well.y_mm)) * wall.per_mm;
  return wall;
}

// Bare paper or an evenly printed floor: nothing within the well's frame stands out.
bool LooksBare(const cv::Mat& coarse, double px_per_mm, const Well& well, double floor,
               double tolerance, double share) {
  constexpr double kFrame_mm = 1.5;  // the printed frame, and neighbours' shadows
  const int half_x = static_cast<int>((well.width_mm / 2 - kFrame_mm) * px_per_mm);
  const int half_y = static_cast<int>((well.height_mm / 2 - kFrame_mm) * px_per_mm);
  const cv::Rect whole({0, 0}, coarse.size());
  const cv::Rect inside =
      cv::Rect(coarse.cols / 2 - half_x, coarse.rows / 2 - half_y, 2 * half_x, 2 * half_y) & whole;
  std::vector<double> values;
  for (int y = inside.y; y < inside.y + inside.height; ++y) {
    const float* row = coarse.ptr<float>(y);
    values.insert(values.end(), row + inside.x, row + inside.x + inside.width);
  }
  if (values.empty()) return false;
  const double middle = Median(values);
  const auto near = std::count_if(values.begin(), values.end(), [&](double value) {
    return std::abs(value / middle - 1) < tolerance;
  });
  return std::abs(middle / floor - 1) < 0.15 &&
         static_cast<double>(near) >= share * static_cast<double>(values.size());
}

bool IsWholeInPhoto(const Photo& photo, const View& view, const CouponDescription& coupon,
                    const Placement& placement) {
  return std::all_of(
      coupon.outline_mm.begin(), coupon.outline_mm.end(), [&](const cv::Point2d& corner) {
        const cv::Point2d at = cv::Point2d(placement.center_x_mm, placement.center_y_mm) +
                               Turned(corner, placement.turn_deg);
        return IsInPhoto(photo, view, at, coupon.thickness_mm, 2);
      });
}

WellFinding Unclear(std::string reason) {
  WellFinding finding;
  finding.reason = std::move(reason);
  return finding;
}

Placement PlacementOf(const EdgeFit& fit, const Well& well, const CouponDescription& coupon) {
  Placement placement;
  placement.center_x_mm = well.x_mm + fit.pose.center_mm.x;
  placement.center_y_mm = well.y_mm + fit.pose.center_mm.y;
  placement.turn_deg = std::remainder(fit.pose.turn_deg, 360);
  placement.center_sd_mm = fit.center_sd_mm;
  placement.turn_sd_deg = fit.turn_sd_deg;
  placement.outline_seen = fit.outline_seen;
  placement.holes_seen = fit.holes_seen;
  placement.quality =
      coupon.holes.empty() ? fit.outline_seen : std::min(fit.outline_seen, fit.holes_seen);
  return placement;
}

// Holes that are all there bear out an outline of which a side drowns in a shadow.
bool IsOutlineSeen(const EdgeFit& fit, const LocateOptions& options) {
  constexpr double kSurelyHoles = 0.9;
  constexpr double kLessOutline = 0.7;
  return fit.outline_seen >=
         options.fewest_outline * (fit.holes_seen >= kSurelyHoles ? kLessOutline : 1);
}

WellFinding Found(const Placement& placement, const CouponDescription& coupon) {
  WellFinding finding;
  finding.state = WellState::kCoupon;
  finding.placement = placement;
  const double quarters = std::round(placement.turn_deg / 90);
  if (quarters != 0 && !LooksTheSameTurned(coupon, 90 * quarters)) {
    finding.reason = fmt::format("lies turned by {:.0f} degrees in its well", 90 * quarters);
  }
  return finding;
}

}  // namespace

void LocateOptions::Check() const {
  const auto require = [](const char* field, double value, double low, double high) {
    if (!(value >= low && value <= high)) {
      throw BadOption(
          fmt::format("LocateOptions.{} is {}; {} to {} is allowed", field, value, low, high));
    }
  };
  require("reach_mm", reach_mm, 0.4, 20);
  require("turn_reach_deg", turn_reach_deg, 0, 45);
  require("fewest_outline", fewest_outline, 0, 1);
  require("fewest_holes", fewest_holes, 0, 1);
}

WellFinding LocateCoupon(const Photo& photo, const View& view, const Light& light,
                         const SheetDescription& sheet, const Well& well,
                         const CouponDescription& coupon, const LocateOptions& options) {
  options.Check();
  if (!IsInPhoto(photo, view, {well.x_mm, well.y_mm}, 0, 0)) {
    return Unclear(
        fmt::format("{}: this well is not in the photo; frame the whole sheet", well.name));
  }
  const WellPicture picture = TakePicture(photo, view, light, well, coupon.thickness_mm,
                                          HalfSideOfWell_mm(coupon, options));
  const double coarse_px_per_mm = kFine_px_per_mm / kReduction;
  const double floor = SrgbFromLinear(sheet.well_floor_reflectance);
  if (LooksBare(picture.reduced, coarse_px_per_mm, well, floor, 0.04, 0.99)) {
    return {WellState::kEmpty, std::nullopt, ""};
  }
  const FoundPose best =
      FindPose(picture, coupon, ViewOfWalls(view, well, coupon.thickness_mm), options);
  const Placement placement = PlacementOf(best.fit, well, coupon);
  const bool outline_seen = IsOutlineSeen(best.fit, options);
  if (!outline_seen && LooksBare(picture.reduced, coarse_px_per_mm, well, floor, 0.08, 0.85)) {
    return {WellState::kEmpty, std::nullopt, ""};
  }
  if (!IsWholeInPhoto(photo, view, coupon, placement)) {
    return Unclear(
        fmt::format("{}: the coupon is not wholly in the photo; frame the whole sheet", well.name));
  }
  if (!outline_seen) {
    return Unclear(fmt::format(
        "{}: something lies here, but only {:.0f} % of the outline of {} is to be seen in it; lay "
        "the coupon flat within the well's frame, with nothing on it",
        well.name, 100 * best.fit.outline_seen, coupon.name));
  }
  if (!coupon.holes.empty() && (best.fit.holes_seen < options.fewest_holes || best.upside_down)) {
    return Unclear(fmt::format(
        "{}: the outline of a coupon was found, but its holes are not where the drawing of {} has "
        "them; lay that coupon, top side up",
        well.name, coupon.name));
  }
  return Found(placement, coupon);
}

}  // namespace laygauge
