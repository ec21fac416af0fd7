#include "coupon/equalizing_kernel.h"

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <cstring>
#include <functional>
#include <limits>
#include <numbers>
#include <vector>

#include "base/vectorize.h"

namespace laygauge {
namespace {

constexpr double kTwoPiSquared = 2 * std::numbers::pi * std::numbers::pi;

double Square(double x) { return x * x; }

// exp(-2 pi^2 v f^2): the transfer of a Gaussian of variance v; v < 0 undoes one.
double GaussianTransfer(double variance, double f) {
  return std::exp(-kTwoPiSquared * variance * f * f);
}

// 1 / (1 + a (1 - h)) ~ direct + (1 - direct) h^power.
struct HaloUndoing {
  double direct = 1;
  double power = 1;
};

// Fitted where it counts: h = exp(-u), weighted by exp(-ratio u), the transfer of the separable
// part. For each power the best `direct` is linear least squares; the power is searched.
HaloUndoing FitHaloUndoing(double sharpening, double ratio) {
  constexpr int kSteps = 120;
  constexpr double kReach = 2.5;  // of sqrt(u), the frequency: h = 0.002
  std::array<double, kSteps> u{};
  std::array<double, kSteps> exact{};
  std::array<double, kSteps> weight{};
  for (size_t i = 0; i < kSteps; ++i) {
    u[i] = Square(kReach * static_cast<double>(i) / (kSteps - 1));
    exact[i] = 1 / (1 + sharpening * (1 - std::exp(-u[i])));
    weight[i] = std::exp(-ratio * u[i]);
  }
  HaloUndoing best;
  double best_error = std::numeric_limits<double>::infinity();
  for (double power = 1; power <= 1 + 2 * sharpening + 0.3; power += 0.02) {
    double product = 0;
    double square = 0;
    std::array<double, kSteps> halo{};
    for (size_t i = 0; i < kSteps; ++i) {
      halo[i] = std::exp(-power * u[i]);
      product += Square(weight[i]) * (exact[i] - halo[i]) * (1 - halo[i]);
      square += Square(weight[i] * (1 - halo[i]));
    }
    const double direct = product / square;
    double error = 0;
    for (size_t i = 0; i < kSteps; ++i) {
      const double fitted = direct + (1 - direct) * halo[i];
      error = std::max(error, weight[i] * std::abs(fitted - exact[i]));
    }
    if (error < best_error) {
      best_error = error;
      best = {direct, power};
    }
  }
  return best;
}

constexpr Eigen::Index kMaxRadius = 20;

// What each tap of a symmetric filter, from the middle outwards, adds to its transfer at `count`
// frequencies from 0 to half the sampling rate: 1, then 2 cos(2 pi f n).
Eigen::MatrixXd TapWaves(Eigen::Index count) {
  Eigen::MatrixXd waves(count, kMaxRadius + 1);
  for (Eigen::Index k = 0; k < count; ++k) {
    waves(k, 0) = 1;
    for (Eigen::Index tap = 1; tap <= kMaxRadius; ++tap) {
      waves(k, tap) = 2 * std::cos(std::numbers::pi * static_cast<double>(k * tap) /
                                   static_cast<double>(count - 1));
    }
  }
  return waves;
}

// A filter's transfer to be approached, and how much of each frequency the photo shows: what it
// does not show need not be met.
struct WantedTransfer {
  std::function<double(double)> transfer;  // of cycles a mm
  std::function<double(double)> shown;     // 0..1
};

// Values of a function of cycles a mm at `count` frequencies from 0 to half the sampling rate.
Eigen::VectorXd AtFrequencies(const std::function<double(double)>& function, double samples_per_mm,
                              Eigen::Index count) {
  Eigen::VectorXd values(count);
  for (Eigen::Index k = 0; k < count; ++k) {
    values[k] =
        function(0.5 * samples_per_mm * static_cast<double>(k) / static_cast<double>(count - 1));
  }
  return values;
}

// The shortest symmetric filter that is as wanted, in what it makes of the photo. Its taps by least
// squares; what is uniform stays as bright as it is.
cv::Mat DesignTaps(const WantedTransfer& wanted, double samples_per_mm) {
  constexpr double kTolerance = 0.002;
  constexpr Eigen::Index kFitted = 48;
  constexpr Eigen::Index kChecked = 41;
  static const Eigen::MatrixXd fitted_waves = TapWaves(kFitted);
  static const Eigen::MatrixXd checked_waves = TapWaves(kChecked);
  const Eigen::VectorXd weights =
      AtFrequencies(wanted.shown, samples_per_mm, kFitted).cwiseMax(0.02);
  const Eigen::VectorXd values =
      weights.cwiseProduct(AtFrequencies(wanted.transfer, samples_per_mm, kFitted));
  const Eigen::MatrixXd waves = weights.asDiagonal() * fitted_waves;
  const Eigen::MatrixXd normal = waves.transpose() * waves;
  const Eigen::VectorXd right = waves.transpose() * values;
  const Eigen::VectorXd checked = AtFrequencies(wanted.transfer, samples_per_mm, kChecked);
  const Eigen::VectorXd shown = AtFrequencies(wanted.shown, samples_per_mm, kChecked);
  Eigen::VectorXd taps;
  for (Eigen::Index radius = 1; radius <= kMaxRadius; ++radius) {
    const Eigen::Index count = radius + 1;
    taps = normal.topLeftCorner(count, count).ldlt().solve(right.head(count));
    taps /= checked_waves.row(0).head(count).dot(taps);
    const Eigen::VectorXd miss = checked_waves.leftCols(count) * taps - checked;
    if (miss.cwiseAbs().cwiseProduct(shown).maxCoeff() <= kTolerance) break;
  }
  const auto radius = static_cast<int>(taps.size()) - 1;
  cv::Mat result(2 * radius + 1, 1, CV_32FC1);
  for (int n = -radius; n <= radius; ++n) {
    result.at<float>(n + radius) = static_cast<float>(taps[std::abs(n)]);
  }
  return result;
}

// At most `limit`, without a kink that would need a long filter.
double SoftlyLimited(double value, double limit) {
  return value / std::pow(1 + std::pow(value / limit, 8), 1.0 / 8);
}

// A symmetric filter's two samples at one distance, and their weight; the middle one is a pair of
// its own, at half weight.
struct TapPair {
  const float* first;
  const float* second;
  float tap;
};

LAYGAUGE_WIDE_VECTORS
void SumPairs(const std::vector<TapPair>& pairs, int count, float* out) {
  int x = 0;
  for (; x + 32 <= count; x += 32) {
    EightFloats a = {};
    EightFloats b = {};
    EightFloats c = {};
    EightFloats d = {};
    for (const TapPair& pair : pairs) {
      const float* first = pair.first + x;
      const float* second = pair.second + x;
      a += pair.tap * (*EightAt(first) + *EightAt(second));
      b += pair.tap * (*EightAt(first + 8) + *EightAt(second + 8));
      c += pair.tap * (*EightAt(first + 16) + *EightAt(second + 16));
      d += pair.tap * (*EightAt(first + 24) + *EightAt(second + 24));
    }
    *EightAt(out + x) = a;
    *EightAt(out + x + 8) = b;
    *EightAt(out + x + 16) = c;
    *EightAt(out + x + 24) = d;
  }
  for (; x + 8 <= count; x += 8) {
    EightFloats sum = {};
    for (const TapPair& pair : pairs) {
      sum += pair.tap * (*EightAt(pair.first + x) + *EightAt(pair.second + x));
    }
    *EightAt(out + x) = sum;
  }
  for (; x < count; ++x) {
    float sum = 0;
    for (const TapPair& pair : pairs) sum += pair.tap * (pair.first[x] + pair.second[x]);
    out[x] = sum;
  }
}

// The taps of a symmetric kernel from the middle outwards, the middle one halved.
std::vector<float> HalfOf(const cv::Mat& kernel) {
  const float* middle = kernel.ptr<float>() + kernel.total() / 2;
  std::vector<float> taps(middle, middle + kernel.total() / 2 + 1);
  taps[0] /= 2;
  return taps;
}

// One term on its way down a picture: the last few rows, filtered along.
class TermRows {
 public:
  TermRows(const SeparableFilter::Term& term, const cv::Size& size)
      : along_(HalfOf(term.row)),
        down_(HalfOf(term.column)),
        size_(size),
        padded_(size.width + 2 * (along_.size() - 1)),
        rows_(static_cast<int>(2 * down_.size() - 1), size.width, CV_32FC1) {
    const int reach = static_cast<int>(down_.size()) - 1;
    next_ = -reach;
  }

  // Filters rows until those round `y` are there.
  void Advance(const cv::Mat& image, int y) {
    const int reach = static_cast<int>(down_.size()) - 1;
    for (; next_ <= y + reach; ++next_) FilterAlong(image, next_);
  }

  // What the filtered rows round `y` add to it.
  void AddPairs(int y, std::vector<TapPair>& pairs) {
    for (int k = 0; k < static_cast<int>(down_.size()); ++k) {
      pairs.push_back({RowAt(y - k), RowAt(y + k), down_[k]});
    }
  }

 private:
  float* RowAt(int y) { return rows_.ptr<float>((y + rows_.rows) % rows_.rows); }

  void FilterAlong(const cv::Mat& image, int y) {
    const int reach = static_cast<int>(along_.size()) - 1;
    const auto* row =
        image.ptr<float>(cv::borderInterpolate(y, size_.height, cv::BORDER_REFLECT_101));
    float* middle = padded_.data() + reach;
    std::copy(row, row + size_.width, middle);
    for (int k = 1; k <= reach; ++k) {
      middle[-k] = row[cv::borderInterpolate(-k, size_.width, cv::BORDER_REFLECT_101)];
      middle[size_.width - 1 + k] =
          row[cv::borderInterpolate(size_.width - 1 + k, size_.width, cv::BORDER_REFLECT_101)];
    }
    pairs_.clear();
    for (int k = 0; k <= reach; ++k) pairs_.push_back({middle - k, middle + k, along_[k]});
    SumPairs(pairs_, size_.width, RowAt(y));
  }

  std::vector<float> along_;
  std::vector<float> down_;
  cv::Size size_;
  std::vector<float> padded_;  // the row that is filtered, mirrored at its ends
  cv::Mat rows_;               // row y of the picture at y modulo the number of rows
  int next_ = 0;               // row that is not filtered yet
  std::vector<TapPair> pairs_;
};

}  // namespace

cv::Mat SeparableFilter::Apply(const cv::Mat& image,
                               const std::function<void(const float* row, int y)>& finished) const {
  std::vector<TermRows> parts;
  for (const Term& term : terms) parts.emplace_back(term, image.size());
  cv::Mat out(image.size(), CV_32FC1);
  std::vector<TapPair> pairs;
  for (int y = 0; y < image.rows; ++y) {
    pairs.clear();
    for (TermRows& part : parts) {
      part.Advance(image, y);
      part.AddPairs(y, pairs);
    }
    SumPairs(pairs, image.cols, out.ptr<float>(y));
    if (finished) finished(out.ptr<float>(y), y);
  }
  return out;
}

SeparableFilter DesignEqualizer(const LocalSpread& spread, double samples_per_mm,
                                double working_sd_mm, double max_gain) {
  const auto taps = [&](const PointSpread& axis, double halo_power) {
    const double variance = Square(working_sd_mm) - Square(axis.blur_sd_mm);
    const double halo_variance = halo_power * Square(axis.halo_sd_mm);
    const WantedTransfer wanted = {[=](double f) {
                                     const double gain = GaussianTransfer(variance, f);
                                     return (variance < 0 ? SoftlyLimited(gain, max_gain) : gain) *
                                            GaussianTransfer(halo_variance, f);
                                   },
                                   [=](double f) { return std::min(1.0, axis.Modulation(f)); }};
    return DesignTaps(wanted, samples_per_mm);
  };
  const double sharpening = (spread.along_x.sharpening + spread.along_y.sharpening) / 2;
  constexpr double kNoSharpening = 1e-3;
  if (sharpening < kNoSharpening) {
    return {{{taps(spread.along_y, 0), taps(spread.along_x, 0)}}};
  }
  const double blur_variance =
      (Square(spread.along_x.blur_sd_mm) + Square(spread.along_y.blur_sd_mm)) / 2;
  const double ratio = (Square(working_sd_mm) - blur_variance) / Square(spread.along_x.halo_sd_mm);
  const HaloUndoing halo = FitHaloUndoing(sharpening, std::clamp(ratio, 0.05, 2.0));
  SeparableFilter filter;
  filter.terms.push_back({halo.direct * taps(spread.along_y, 0), taps(spread.along_x, 0)});
  filter.terms.push_back(
      {(1 - halo.direct) * taps(spread.along_y, halo.power), taps(spread.along_x, halo.power)});
  return filter;
}

}  // namespace laygauge
