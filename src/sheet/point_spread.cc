#include "sheet/point_spread.h"

#include <cmath>
#include <numbers>

namespace laygauge {
namespace {

// So many standard deviations away the normal distribution is 0 or 1 within 1e-13.
constexpr double kFar = 7.5;

double NormalDistribution(double x, double sd) {
  const double z = x / sd;
  if (std::abs(z) > kFar) return z > 0 ? 1 : 0;
  return 0.5 * std::erfc(-z / M_SQRT2);
}

double NormalDensity(double x, double sd) {
  const double z = x / sd;
  if (std::abs(z) > kFar) return 0;
  return std::exp(-0.5 * z * z) / (sd * std::sqrt(2 * std::numbers::pi));
}

// The standard deviation of two blurs one after the other.
double Joined(double a, double b) { return std::sqrt(a * a + b * b); }

}  // namespace

double PointSpread::EdgeResponse(double distance_mm) const {
  const double direct = NormalDistribution(distance_mm, blur_sd_mm);
  if (sharpening == 0) return direct;
  const double halo = NormalDistribution(distance_mm, Joined(blur_sd_mm, halo_sd_mm));
  return (1 + sharpening) * direct - sharpening * halo;
}

double PointSpread::LineSpread(double distance_mm) const {
  const double direct = NormalDensity(distance_mm, blur_sd_mm);
  if (sharpening == 0) return direct;
  const double halo = NormalDensity(distance_mm, Joined(blur_sd_mm, halo_sd_mm));
  return (1 + sharpening) * direct - sharpening * halo;
}

double PointSpread::Modulation(double cycles_per_mm) const {
  const double k = 2 * std::numbers::pi * std::numbers::pi * cycles_per_mm * cycles_per_mm;
  const double direct = std::exp(-k * blur_sd_mm * blur_sd_mm);
  const double halo = direct * std::exp(-k * halo_sd_mm * halo_sd_mm);
  return (1 + sharpening) * direct - sharpening * halo;
}

double PointSpread::Mtf50PerMm() const {
  // Modulation rises above 1 at most once and then falls for good, and it is no less than the
  // blur's own: bracket outwards from there, then halve.
  double low = kMtf50OfGaussian / blur_sd_mm;
  double high = low;
  while (Modulation(high) > 0.5) high *= 1.5;
  for (int step = 0; step < 60; ++step) {
    const double middle = (low + high) / 2;
    (Modulation(middle) > 0.5 ? low : high) = middle;
  }
  return (low + high) / 2;
}

double PointSpread::RiseMm() const {
  // By symmetry twice the way from the middle up to 90 %; the response rises steadily up to there.
  double low = 0;
  double high = 3 * std::hypot(blur_sd_mm, sharpening > 0 ? halo_sd_mm : 0);
  while (EdgeResponse(high) < 0.9) high *= 1.5;
  for (int step = 0; step < 60; ++step) {
    const double middle = (low + high) / 2;
    (EdgeResponse(middle) < 0.9 ? low : high) = middle;
  }
  return 2 * low;
}

}  // namespace laygauge
