#include "support/draw_defects.h"

#include <algorithm>
#include <cmath>
#include <functional>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <random>

namespace laygauge {
namespace {

double DistanceToPiece(cv::Point2d p, cv::Point2d a, cv::Point2d b) {
  const cv::Point2d along = b - a;
  const double share = std::clamp((p - a).dot(along) / along.dot(along), 0.0, 1.0);
  return cv::norm(p - a - share * along);
}

// Adds f(point in mm) to the pixels within `reach_mm` of the points' bounding box.
void AddNear(const std::vector<cv::Point2d>& points_mm, double reach_mm,
             const std::function<double(cv::Point2d)>& f, Patch& patch) {
  std::vector<cv::Point> pixels;
  for (const cv::Point2d& p : points_mm) {
    for (const double sign : {-1.0, 1.0}) {
      pixels.emplace_back(patch.PixelFromCoupon(p + sign * cv::Point2d(reach_mm, reach_mm)));
    }
  }
  const cv::Rect box = cv::boundingRect(pixels) & cv::Rect({0, 0}, patch.relative.size());
  for (int y = box.y; y < box.br().y; ++y) {
    for (int x = box.x; x < box.br().x; ++x) {
      patch.relative.at<float>(y, x) +=
          static_cast<float>(f(patch.CouponFromPixel(cv::Point2d(x, y))));
    }
  }
}

double Gaussian(double x, double sd) { return std::exp(-x * x / (2 * sd * sd)); }

}  // namespace

void DrawTrack(const TrackToDraw& track, Patch& patch) {
  const auto add = [&track](cv::Point2d p) {
    double distance = 1e9;
    for (size_t i = 1; i < track.path_mm.size(); ++i) {
      distance = std::min(distance, DistanceToPiece(p, track.path_mm[i - 1], track.path_mm[i]));
    }
    return track.edge * Gaussian(distance - 0.18, 0.1) + track.groove * Gaussian(distance, 0.1);
  };
  AddNear(track.path_mm, 0.8, add, patch);  // four deviations beyond the edges
}

void DrawChannel(const ChannelToDraw& channel, Patch& patch) {
  const double lay = channel.lay_deg * std::numbers::pi / 180;
  const cv::Point2d half(std::cos(lay) * channel.length_mm / 2,
                         -std::sin(lay) * channel.length_mm / 2);
  const cv::Point2d a = patch.PixelFromCoupon(channel.centre_mm - half);
  const cv::Point2d b = patch.PixelFromCoupon(channel.centre_mm + half);
  const double reach = 2 * channel.width_mm * patch.px_per_mm;
  const cv::Rect whole({0, 0}, patch.relative.size());
  const cv::Rect box =
      whole & cv::Rect(cv::Point2d(std::min(a.x, b.x) - reach, std::min(a.y, b.y) - reach),
                       cv::Point2d(std::max(a.x, b.x) + reach, std::max(a.y, b.y) + reach));
  for (int y = box.y; y < box.br().y; ++y) {
    for (int x = box.x; x < box.br().x; ++x) {
      const double distance = DistanceToPiece(cv::Point2d(x, y), a, b) / patch.px_per_mm;
      patch.relative.at<float>(y, x) -=
          static_cast<float>(channel.depth * Gaussian(distance, channel.width_mm / 2));
    }
  }
}

void DrawChannels(int count, double pitch_mm, double lay_deg, std::uint64_t seed, Patch& patch) {
  std::mt19937_64 random(seed);
  std::uniform_real_distribution<double> place(-19, 19);
  std::uniform_real_distribution<double> length(1, 6);
  for (int i = 0; i < count; ++i) {
    const double along = place(random);
    const double across = pitch_mm * (std::floor(place(random) / pitch_mm) + 0.5);
    const double lay = lay_deg * std::numbers::pi / 180;
    const cv::Point2d centre = along * cv::Point2d(std::cos(lay), -std::sin(lay)) +
                               across * cv::Point2d(std::sin(lay), std::cos(lay));
    DrawChannel({.centre_mm = centre, .length_mm = length(random), .lay_deg = lay_deg}, patch);
  }
}

void DrawBlob(const BlobToDraw& blob, Patch& patch) {
  const double light = blob.light_deg * std::numbers::pi / 180;
  const cv::Point2d to_light(std::cos(light), -std::sin(light));
  const double variance = blob.radius_mm * blob.radius_mm;
  const auto add = [&](cv::Point2d p) {
    const cv::Point2d from_centre = p - blob.centre_mm;
    const double height = std::exp(-from_centre.dot(from_centre) / (2 * variance));
    // A surface that falls towards the light faces it.
    return blob.lit * height * from_centre.dot(to_light) / variance + blob.shine * height;
  };
  AddNear({blob.centre_mm}, 5 * blob.radius_mm, add, patch);
}

}  // namespace laygauge
