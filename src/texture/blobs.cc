#include "texture/blobs.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <opencv2/imgproc.hpp>

#include "base/error.h"

namespace laygauge {
namespace {

// What one of the two responses is made of.
struct Channel {
  double closing_mm;  // valleys across the lines up to this width are closed; 0: none
  double flatten_mm;  // window along the lay whose mean is taken out
  double darkest;     // clipped at so many deviations below
};
constexpr Channel kChannels[] = {{0, 1.0, 2}, {0.9, 1.5, 1.5}};
constexpr double kBrightest = 20;

cv::Point Rounded(cv::Point2d p) { return {cvRound(p.x), cvRound(p.y)}; }

// Where a scar goes on, faint or half hidden: `reach` beyond the end of its path.
cv::Point2d Beyond(cv::Point2d other_end, cv::Point2d end, double reach) {
  const cv::Point2d along = end - other_end;
  return end + along * (reach / std::max(cv::norm(along), 1.0));
}

cv::Mat SearchedBesideScars(const TopView& view, const std::vector<Track>& scars,
                            const BlobOptions& options) {
  cv::Mat searched = view.searched.clone();
  const double reach = options.scar_beyond_mm * view.px_per_mm;
  const int width = 2 * static_cast<int>(std::lround(options.scar_seam_mm * view.px_per_mm)) + 1;
  for (const Track& scar : scars) {
    const cv::Point2d first = scar.path_px.front();
    const cv::Point2d last = scar.path_px.back();
    std::vector<cv::Point> points{Rounded(Beyond(last, first, reach))};
    for (const cv::Point2d& p : scar.path_px) {
      points.push_back(Rounded(p));
    }
    points.push_back(Rounded(Beyond(first, last, reach)));
    cv::polylines(searched, points, false, cv::Scalar::all(0), width);
  }
  return searched;
}

cv::Mat PrepareChannel(const TopView& view, const cv::Mat& searched, const Channel& channel) {
  cv::Mat image = view.relative;
  if (channel.closing_mm > 0) {
    const int height = 2 * static_cast<int>(channel.closing_mm * view.px_per_mm / 2) + 1;
    cv::Mat closed;  // never into `image`: it shares the view's pixels
    cv::dilate(view.relative, closed, cv::Mat::ones(height, 1, CV_8UC1));
    image = closed;
  }
  cv::Mat flat = RemoveAlongRows(image, view, channel.flatten_mm);
  const double deviation = std::max(SpreadOn(flat, searched, 0.5), 1e-9);
  flat = cv::max(cv::min(flat / deviation, kBrightest), -channel.darkest);
  flat.setTo(0, searched == 0);
  return flat;
}

// Root mean square of the smoothed image and of its two slopes, each over its own spread.
cv::Mat Energy(const cv::Mat& image, const cv::Mat& searched, double scale_px) {
  cv::Mat smooth;
  cv::GaussianBlur(image, smooth, {}, scale_px);
  const float slope_kernel[] = {-0.5F, 0, 0.5F};
  const cv::Mat slope(1, 3, CV_32FC1, const_cast<float*>(slope_kernel));
  cv::Mat along;
  cv::Mat across;
  cv::filter2D(smooth, along, -1, slope);
  cv::filter2D(smooth, across, -1, slope.t());
  cv::Mat energy = cv::Mat::zeros(image.size(), CV_32FC1);
  for (const cv::Mat& part : {smooth, along, across}) {
    const double spread = std::max(SpreadOn(part, searched, 0.75), 1e-9);
    cv::accumulateSquare(part / (spread * std::sqrt(3.0)), energy);
  }
  cv::sqrt(energy, energy);
  energy.setTo(0, searched == 0);
  return energy;
}

std::vector<cv::Point> LocalMaxima(const cv::Mat& energy, const cv::Mat& searched,
                                   double separation_px) {
  const int side = 2 * static_cast<int>(std::lround(separation_px)) + 1;
  cv::Mat highest;
  cv::dilate(energy, highest, cv::getStructuringElement(cv::MORPH_RECT, {side, side}));
  std::vector<cv::Point> maxima;
  for (int y = 0; y < energy.rows; ++y) {
    const auto* row = energy.ptr<float>(y);
    const auto* most = highest.ptr<float>(y);
    const auto* on = searched.ptr<std::uint8_t>(y);
    for (int x = 0; x < energy.cols; ++x) {
      if (on[x] != 0 && row[x] > 0 && row[x] >= most[x]) {
        maxima.emplace_back(x, y);
      }
    }
  }
  return maxima;
}

// Energy as excess over the coupon's own local maxima; empty when there are too few of them.
cv::Mat Excess(const cv::Mat& energy, const cv::Mat& searched, double separation_px) {
  constexpr size_t kFewest = 30;
  std::vector<float> heights;
  for (const cv::Point& p : LocalMaxima(energy, searched, separation_px)) {
    heights.push_back(energy.at<float>(p));
  }
  if (heights.size() < kFewest) {
    return {};
  }
  std::sort(heights.begin(), heights.end());
  const double median = heights[heights.size() / 2];
  const double high = heights[heights.size() * 9 / 10];
  if (high <= median) {
    return {};
  }
  return (energy - median) / (high - median);
}

// Pixels above half of the peak within the separation, mm2.
double HalfHeightArea(const cv::Mat& excess, cv::Point peak, double separation_px,
                      double px_per_mm) {
  const int reach = static_cast<int>(separation_px);
  const float half = 2.0F;
  const cv::Rect frame({0, 0}, excess.size());
  int above = 0;
  for (int dy = -reach; dy <= reach; ++dy) {
    for (int dx = -reach; dx <= reach; ++dx) {
      const cv::Point p = peak + cv::Point(dx, dy);
      above +=
          frame.contains(p) && dx * dx + dy * dy <= reach * reach && excess.at<float>(p) >= half
              ? 1
              : 0;
    }
  }
  return above / (px_per_mm * px_per_mm);
}

void Need(bool holds, const char* field, double value, const char* rule) {
  if (!holds) {
    throw BadOption(fmt::format("{} is {}: {}", field, value, rule));
  }
}

}  // namespace

void BlobOptions::Check() const {
  Need(scale_mm >= 0.1 && scale_mm <= 1, "scale_mm", scale_mm, "from 0.1 to 1");
  Need(separation_mm >= scale_mm, "separation_mm", separation_mm, "at least scale_mm");
  Need(min_excess > 1, "min_excess", min_excess, "more than 1");
  Need(scar_seam_mm >= 0, "scar_seam_mm", scar_seam_mm, "0 or more");
  Need(scar_beyond_mm >= 0, "scar_beyond_mm", scar_beyond_mm, "0 or more");
}

std::vector<Blob> FindBlobs(const TopView& view, const std::vector<Track>& scars,
                            const BlobOptions& options) {
  options.Check();
  if (view.relative.empty()) {
    return {};
  }
  const cv::Mat searched = SearchedBesideScars(view, scars, options);
  const double separation_px = options.separation_mm * view.px_per_mm;
  cv::Mat excess;
  for (const Channel& channel : kChannels) {
    const cv::Mat image = PrepareChannel(view, searched, channel);
    const cv::Mat one =
        Excess(Energy(image, searched, options.scale_mm * view.px_per_mm), searched, separation_px);
    if (!one.empty()) {
      excess = excess.empty() ? one : cv::Mat(cv::max(excess, one));
    }
  }
  std::vector<Blob> blobs;
  if (excess.empty()) {
    return blobs;
  }
  for (const cv::Point& p : LocalMaxima(excess, searched, separation_px)) {
    const double peak = excess.at<float>(p);
    if (peak >= options.min_excess) {
      blobs.push_back({p, HalfHeightArea(excess, p, separation_px, view.px_per_mm), peak});
    }
  }
  return blobs;
}

}  // namespace laygauge
