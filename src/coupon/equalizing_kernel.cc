#include "coupon/equalizing_kernel.h"

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <functional>
#include <limits>
#include <numbers>
#include <opencv2/imgproc.hpp>

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
  HaloUndoing best;
  double best_error = std::numeric_limits<double>::infinity();
  for (double power = 1; power <= 1 + 2 * sharpening + 0.3; power += 0.02) {
    double product = 0;
    double square = 0;
    std::array<double, kSteps> exact{};
    std::array<double, kSteps> halo{};
    std::array<double, kSteps> weight{};
    for (size_t i = 0; i < kSteps; ++i) {
      const double u = Square(kReach * static_cast<double>(i) / (kSteps - 1));
      exact[i] = 1 / (1 + sharpening * (1 - std::exp(-u)));
      halo[i] = std::exp(-power * u);
      weight[i] = std::exp(-ratio * u);
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

// A symmetric filter's transfer at f cycles a sample: taps[0] + 2 sum taps[n] cos(2 pi f n).
double TransferOfTaps(const Eigen::VectorXd& taps, double f) {
  double sum = taps[0];
  for (Eigen::Index n = 1; n < taps.size(); ++n) {
    sum += 2 * taps[n] * std::cos(2 * std::numbers::pi * f * static_cast<double>(n));
  }
  return sum;
}

// A filter's transfer to be approached, and how much of each frequency the photo shows: what it
// does not show need not be met.
struct WantedTransfer {
  std::function<double(double)> transfer;  // of cycles a mm
  std::function<double(double)> shown;     // 0..1
};

// The taps from the middle outwards, by least squares at frequencies up to half the sampling rate.
Eigen::VectorXd FitTaps(const WantedTransfer& wanted, double samples_per_mm, Eigen::Index radius) {
  constexpr Eigen::Index kFrequencies = 48;
  Eigen::MatrixXd waves(kFrequencies, radius + 1);
  Eigen::VectorXd values(kFrequencies);
  for (Eigen::Index k = 0; k < kFrequencies; ++k) {
    const double f = 0.5 * static_cast<double>(k) / (kFrequencies - 1);  // cycles a sample
    const double weight = std::max(0.02, wanted.shown(f * samples_per_mm));
    values[k] = weight * wanted.transfer(f * samples_per_mm);
    waves(k, 0) = weight;
    for (Eigen::Index tap = 1; tap <= radius; ++tap) {
      waves(k, tap) = 2 * weight * std::cos(2 * std::numbers::pi * f * static_cast<double>(tap));
    }
  }
  const Eigen::VectorXd taps = (waves.transpose() * waves).ldlt().solve(waves.transpose() * values);
  return taps / TransferOfTaps(taps, 0);  // what is uniform stays as bright as it is
}

// The shortest symmetric filter that is as wanted, in what it makes of the photo.
cv::Mat DesignTaps(const WantedTransfer& wanted, double samples_per_mm) {
  constexpr double kTolerance = 0.002;
  constexpr Eigen::Index kMaxRadius = 20;
  Eigen::VectorXd taps;
  for (Eigen::Index radius = 1; radius <= kMaxRadius; ++radius) {
    taps = FitTaps(wanted, samples_per_mm, radius);
    double error = 0;
    for (int k = 1; k <= 40; ++k) {
      const double f = 0.5 * k / 40;
      const double miss = TransferOfTaps(taps, f) - wanted.transfer(f * samples_per_mm);
      error = std::max(error, std::abs(miss) * wanted.shown(f * samples_per_mm));
    }
    if (error <= kTolerance) break;
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

}  // namespace

cv::Mat SeparableFilter::Apply(const cv::Mat& image) const {
  constexpr int kRows = 128;  // strips of so many stay in the cache from term to term
  cv::Mat sum(image.size(), CV_32FC1);
  cv::Mat part;
  for (int y = 0; y < image.rows; y += kRows) {
    const cv::Range rows(y, std::min(y + kRows, image.rows));
    const cv::Mat strip = image.rowRange(rows);  // filters see the rows beyond it
    cv::Mat out = sum.rowRange(rows);
    for (const Term& term : terms) {
      const bool is_first = &term == &terms.front();
      cv::sepFilter2D(strip, is_first ? out : part, CV_32F, term.row, term.column, {-1, -1}, 0,
                      cv::BORDER_REFLECT_101);
      if (!is_first) out += part;
    }
  }
  return sum;
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
