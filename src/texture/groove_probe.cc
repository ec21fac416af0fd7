#include "texture/groove_probe.h"

#include <array>
#include <cmath>
#include <numbers>

#include "texture/channel_kernel.h"
#include "texture/contour.h"

namespace laygauge {
namespace {

constexpr double kStepMm = 0.1;      // along the contour
constexpr double kSampleMm = 0.025;  // across the groove
constexpr int kReach = 12;           // samples on either side: 0.3 mm, to beyond the loops' crests
constexpr int kSamples = 2 * kReach + 1;
constexpr double kCornerMm = 2;
constexpr double kWidthDeg = 12;  // of the weight's bell around the lay
constexpr double kEnough = 10;    // points, else the bell is widened

using Profile = std::array<double, kSamples>;

// Mean profile across the groove, from one side of the lay to the other; weights sum to `weight`.
Profile MeanProfile(const Patch& patch, const std::vector<Contour>& contours, double depth_mm,
                    cv::Point2d across, double width_deg, double* weight) {
  Profile mean{};
  *weight = 0;
  for (const Contour& contour : contours) {
    for (const ContourPoint& at : contour.points) {
      const double cosine = at.inward.dot(across);
      const double angle_deg =
          std::acos(std::min(1.0, std::abs(cosine))) * 180 / std::numbers::pi / width_deg;
      if (angle_deg > 2.6) {
        continue;
      }
      const cv::Point2d side = cosine > 0 ? at.inward : -at.inward;
      const cv::Point2d centre = at.point_mm + depth_mm * at.inward;
      Profile profile;
      bool whole = true;
      for (int i = 0; i < kSamples; ++i) {
        const cv::Point2d point = centre + (i - kReach) * kSampleMm * side;
        const double value = SampleBilinear(patch.relative, patch.PixelFromCoupon(point));
        profile[static_cast<std::size_t>(i)] = value;
        whole &= std::isfinite(value);
      }
      if (!whole) {
        continue;
      }
      const double w = std::exp(-angle_deg * angle_deg);
      for (std::size_t i = 0; i < kSamples; ++i) {
        mean[i] += w * profile[i];
      }
      *weight += w;
    }
  }
  for (double& value : mean) {
    value /= std::max(*weight, 1e-9);
  }
  return mean;
}

// ChannelKernel's model over the whole profile, with a slope and the second derivative of the
// kernel besides. The latter takes up what a tilt becomes where the groove lies off its place: t
// x/s g(x), displaced by d, has the part t d/s (x^2/s^2 - 1) g(x), which without a term of its own
// passes for a darkness of t d/s, 3 um for 0.01 mm.
GrooveShading FitGroove(const Profile& profile, double sd_mm) {
  cv::Matx<double, kSamples, 5> design;
  cv::Vec<double, kSamples> values;
  for (int i = 0; i < kSamples; ++i) {
    const double x = (i - kReach) * kSampleMm;
    const double z = x / sd_mm;
    const double g = std::exp(-0.5 * z * z) / (sd_mm * std::sqrt(2 * std::numbers::pi));
    design(i, 0) = 1;
    design(i, 1) = x;
    design(i, 2) = -g;
    design(i, 3) = g * z;
    design(i, 4) = g * (z * z - 1);
    values[i] = profile[static_cast<std::size_t>(i)];
  }
  const cv::Vec<double, 5> fit = (design.t() * design).inv() * (design.t() * values);
  constexpr double kUm = 1000;
  const double level = std::max(fit[0], 1e-6);
  return {fit[2] / level * kUm, std::abs(fit[3]) / level * kUm};
}

}  // namespace

GrooveShading MeasureGrooveShading(const Patch& patch, const CouponDescription& coupon,
                                   double lay_deg) {
  const double lay = lay_deg * std::numbers::pi / 180;
  const cv::Point2d across(std::sin(lay), std::cos(lay));
  const double depth_mm = coupon.wall_mm / 2;
  if (depth_mm < kReach * kSampleMm) {
    return {};  // no room for two loops
  }
  const std::vector<Contour> contours = SampleContours(coupon, kStepMm, depth_mm, kCornerMm);
  double width_deg = kWidthDeg;
  for (int attempt = 0; attempt < 4; ++attempt, width_deg *= 2) {
    double weight = 0;
    const Profile profile = MeanProfile(patch, contours, depth_mm, across, width_deg, &weight);
    if (weight >= kEnough) {
      return FitGroove(profile, ChannelSdMm(patch.blur_sd_mm));
    }
  }
  return {};
}

}  // namespace laygauge
