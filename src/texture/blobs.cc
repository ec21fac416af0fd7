#include "texture/blobs.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <numeric>
#include <opencv2/imgproc.hpp>
#include <optional>

#include "base/error.h"
#include "texture/structuring_element.h"

namespace laygauge {
namespace {

constexpr double kSurroundingsMm = 5;  // square over which the surface's own level is averaged
constexpr double kDarkest = 1;         // clipped at so many deviations below the surroundings
constexpr double kFlattenMm = 0.7;     // window along the lay whose mean is taken out

cv::Point Rounded(cv::Point2d p) { return {cvRound(p.x), cvRound(p.y)}; }

// Where a scar goes on, faint or half hidden: `reach` beyond the end of its path.
cv::Point2d Beyond(cv::Point2d other_end, cv::Point2d end, double reach) {
  const cv::Point2d along = end - other_end;
  return end + along * (reach / std::max(cv::norm(along), 1.0));
}

// The share by which a place belongs to no scar, CV_32FC1: 1 - chance beside each track, the surest
// where several are.
cv::Mat NoScar(const TopView& view, std::vector<Track> scars, const BlobOptions& options) {
  std::stable_sort(scars.begin(), scars.end(),
                   [](const Track& a, const Track& b) { return a.chance < b.chance; });
  cv::Mat no_scar(view.searched.size(), CV_32FC1, cv::Scalar::all(1));
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
    cv::polylines(no_scar, points, false, cv::Scalar::all(1 - scar.chance), width);
  }
  return no_scar;
}

// What is searched, less a rim in which the response reaches over the border: open seams lie there.
cv::Mat Inner(const TopView& view, double rim_px) {
  cv::Mat inner;
  cv::erode(view.searched, inner, Square(rim_px), {-1, -1}, 1, cv::BORDER_CONSTANT,
            cv::Scalar::all(0));
  return inner;
}

// The mean over the searched part of a square about each pixel: coarse, since it is wide.
cv::Mat Surroundings(const TopView& view) {
  constexpr int kReduction = 4;
  const cv::Size size(view.relative.cols / kReduction, view.relative.rows / kReduction);
  const cv::Rect whole(0, 0, size.width * kReduction, size.height * kReduction);
  const int side = 2 * static_cast<int>(kSurroundingsMm * view.px_per_mm / kReduction / 2) + 1;
  const auto sum = [&](const cv::Mat& image) {
    cv::Mat coarse;
    cv::Mat sums;
    cv::resize(image(whole), coarse, size, 0, 0, cv::INTER_AREA);
    cv::boxFilter(coarse, sums, CV_32F, {side, side}, {-1, -1}, false, cv::BORDER_CONSTANT);
    return sums;
  };
  cv::Mat level;
  // Nothing searched about a pixel: no level, 0 over the least that is something.
  cv::divide(sum(view.relative), cv::max(sum(view.searched), 1.0), level, 255);
  cv::resize(level, level, view.relative.size(), 0, 0, cv::INTER_LINEAR);
  return level;
}

// The view over its surroundings, without lines and gaps; 0 where not searched.
cv::Mat WithoutLines(const TopView& view) {
  cv::Mat over = view.relative - Surroundings(view);
  cv::max(over, -kDarkest * SpreadOn(over, view.searched, 0.5), over);
  return RemoveAlongRows(over, view, kFlattenMm);
}

// What each part's square is weighed by in the energy.
struct Weights {
  float bright;
  float along;
  float across;
};

// One over the square of its own size, which lumps and scars do not move: from the 75 % quantile.
float WeightOf(std::vector<float>& sizes) {
  constexpr float kNormal75 = 1.1503F;  // of a normal variable's size (common practice)
  constexpr float kLeast = 1e-9F;
  const auto at =
      sizes.begin() + static_cast<std::ptrdiff_t>(0.75 * static_cast<double>(sizes.size() - 1));
  std::nth_element(sizes.begin(), at, sizes.end());
  const float size = std::max(*at / kNormal75, kLeast);
  return 1 / (3 * size * size);
}

// From every fourth pixel along both axes. None: nothing is searched.
std::optional<Weights> WeighParts(const cv::Mat& smooth, const cv::Mat& searched) {
  std::vector<float> bright;
  std::vector<float> along;
  std::vector<float> across;
  for (int y = 1; y + 1 < smooth.rows; y += 4) {
    const auto* above = smooth.ptr<float>(y - 1);
    const auto* here = smooth.ptr<float>(y);
    const auto* below = smooth.ptr<float>(y + 1);
    const auto* on = searched.ptr<std::uint8_t>(y);
    for (int x = 1; x + 1 < smooth.cols; x += 4) {
      if (on[x] == 0) continue;
      bright.push_back(std::abs(here[x]));
      along.push_back(std::abs(here[x + 1] - here[x - 1]));
      across.push_back(std::abs(below[x] - above[x]));
    }
  }
  if (bright.empty()) return std::nullopt;
  return Weights{WeightOf(bright), WeightOf(along), WeightOf(across)};
}

// Mean square of the smoothed image and of its two slopes, each over its own size; 0 where not
// searched.
cv::Mat Energy(const cv::Mat& image, const cv::Mat& searched, double scale_px) {
  cv::Mat smooth;
  const int side = 2 * static_cast<int>(std::lround(3 * scale_px)) + 1;
  cv::GaussianBlur(image, smooth, {side, side}, scale_px, 0, cv::BORDER_CONSTANT);
  cv::Mat energy = cv::Mat::zeros(image.size(), CV_32FC1);
  const std::optional<Weights> weights = WeighParts(smooth, searched);
  if (!weights) return energy;
  const Weights weight = *weights;
  for (int y = 1; y + 1 < image.rows; ++y) {
    const auto* above = smooth.ptr<float>(y - 1);
    const auto* here = smooth.ptr<float>(y);
    const auto* below = smooth.ptr<float>(y + 1);
    const auto* on = searched.ptr<std::uint8_t>(y);
    auto* out = energy.ptr<float>(y);
    for (int x = 1; x + 1 < image.cols; ++x) {
      const float along = here[x + 1] - here[x - 1];
      const float across = below[x] - above[x];
      const float square = weight.bright * here[x] * here[x] + weight.along * along * along +
                           weight.across * across * across;
      out[x] = on[x] != 0 ? square : 0.F;
    }
  }
  return energy;
}

// Offsets of the pixels within `radius`, nearest first.
std::vector<cv::Point> OffsetsWithin(double radius) {
  const int reach = static_cast<int>(radius);
  std::vector<cv::Point> offsets;
  for (int dy = -reach; dy <= reach; ++dy) {
    for (int dx = -reach; dx <= reach; ++dx) {
      const int square = dx * dx + dy * dy;
      if (square > 0 && square <= radius * radius) {
        offsets.emplace_back(dx, dy);
      }
    }
  }
  std::stable_sort(offsets.begin(), offsets.end(),
                   [](cv::Point a, cv::Point b) { return a.dot(a) < b.dot(b); });
  return offsets;
}

struct Peak {
  cv::Point at;
  double height = 0;  // root of the energy
};

// Pixels that none within the separation exceeds.
std::vector<Peak> LocalMaxima(const cv::Mat& energy, double separation_px) {
  // A frame of nothing, so that no place beside a peak lies outside.
  const int reach = static_cast<int>(separation_px);
  cv::Mat framed;
  cv::copyMakeBorder(energy, framed, reach, reach, reach, reach, cv::BORDER_CONSTANT);
  std::vector<std::ptrdiff_t> near;
  for (const cv::Point& offset : OffsetsWithin(separation_px)) {
    near.push_back(offset.y * static_cast<std::ptrdiff_t>(framed.step1()) + offset.x);
  }
  cv::Mat most_beside;
  cv::dilate(energy, most_beside, cv::Mat::ones(3, 3, CV_8UC1));
  std::vector<Peak> peaks;
  for (int y = 0; y < energy.rows; ++y) {
    const auto* row = energy.ptr<float>(y);
    const auto* most = most_beside.ptr<float>(y);
    for (int x = 0; x < energy.cols; ++x) {
      if (row[x] <= 0 || row[x] < most[x]) continue;
      const float* here = framed.ptr<float>(y + reach) + x + reach;
      const bool highest = std::none_of(
          near.begin(), near.end(), [here](std::ptrdiff_t offset) { return here[offset] > *here; });
      if (highest) peaks.push_back({{x, y}, std::sqrt(row[x])});
    }
  }
  return peaks;
}

// How the heights of local maxima turn into excess; no unit where nothing can stand out.
struct ExcessScale {
  double zero = 0;
  double unit = 0;

  [[nodiscard]] double Of(double height) const { return (height - zero) / unit; }
};

constexpr double kLeastUnit = 0.25;  // of zero: maxima of mere noise are nearly equal

// From sorted heights: the unit by the mean between two quantiles, as if they thinned out
// exponentially beyond the median.
ExcessScale ScaleBetween(const std::vector<double>& heights, double from, double to) {
  // Of an exponential variable of mean 1: the mean between the quantiles, less the median.
  const auto integral = [](double above) { return above - above * std::log(above); };
  const double band = (integral(1 - from) - integral(1 - to)) / (to - from) - std::log(2.0);
  const double median_to_90 = std::log(5.0);
  const auto count = static_cast<double>(heights.size());
  const auto first = heights.begin() + static_cast<std::ptrdiff_t>(from * count);
  const auto last = heights.begin() + static_cast<std::ptrdiff_t>(to * count);
  const double mean = std::accumulate(first, last, 0.0) / static_cast<double>(last - first);
  const double zero = heights[heights.size() / 2];
  return {zero, std::max((mean - zero) / band * median_to_90, kLeastUnit * zero)};
}

// What stands out by more than `least` is left out of the surface that it is measured by, until no
// more does: many blobs must not hide each other. It starts from quantiles low enough that a fifth
// of the maxima may be blobs, and leaves out what stands out twice as far by those.
ExcessScale MeasureScale(const std::vector<Peak>& peaks, double least) {
  constexpr size_t kFewest = 30;
  std::vector<double> heights;
  for (const Peak& peak : peaks) {
    heights.push_back(peak.height);
  }
  std::sort(heights.begin(), heights.end());
  const auto drop_beyond = [&heights](const ExcessScale& scale, double excess) {
    while (!heights.empty() && heights.back() > scale.zero + excess * scale.unit) {
      heights.pop_back();
    }
  };
  if (heights.size() < kFewest) return {};
  drop_beyond(ScaleBetween(heights, 0.7, 0.8), 2 * least);
  ExcessScale scale;
  for (size_t before = heights.size() + 1; heights.size() < before;) {
    before = heights.size();
    if (before < kFewest) return {};
    scale = ScaleBetween(heights, 0.85, 0.95);
    drop_beyond(scale, least);
  }
  return scale;
}

// What the response would take if all of it that is nearer than `reach_px` were as high as its
// peak, mm2: its excess summed, over that of the peak, so that contrast drops out.
double EquivalentArea(const cv::Mat& energy, const ExcessScale& scale, cv::Point peak,
                      double reach_px, double px_per_mm) {
  const double highest = scale.Of(std::sqrt(energy.at<float>(peak)));
  const cv::Rect frame({0, 0}, energy.size());
  double area_px = 1;  // the peak
  for (const cv::Point& offset : OffsetsWithin(reach_px)) {
    const cv::Point p = peak + offset;
    if (frame.contains(p)) {
      area_px += std::max(scale.Of(std::sqrt(energy.at<float>(p))) / highest, 0.0);
    }
  }
  return area_px / (px_per_mm * px_per_mm);
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
  const cv::Mat no_scar = NoScar(view, scars, options);
  const double scale_px = options.scale_mm * view.px_per_mm;
  const cv::Mat searched = Inner(view, 3 * scale_px) & (no_scar > 0.5);
  cv::Mat image = WithoutLines(view);
  if (!scars.empty()) {
    cv::multiply(image, no_scar, image);
  }
  const cv::Mat energy = Energy(image, searched, scale_px);
  const double separation_px = options.separation_mm * view.px_per_mm;
  const std::vector<Peak> peaks = LocalMaxima(energy, separation_px);
  const ExcessScale scale = MeasureScale(peaks, options.min_excess);
  std::vector<Blob> blobs;
  if (scale.unit <= 0) {
    return blobs;
  }
  for (const Peak& peak : peaks) {
    const double excess = scale.Of(peak.height);
    if (excess >= options.min_excess) {
      blobs.push_back(
          {peak.at, EquivalentArea(energy, scale, peak.at, separation_px, view.px_per_mm), excess});
    }
  }
  return blobs;
}

}  // namespace laygauge
