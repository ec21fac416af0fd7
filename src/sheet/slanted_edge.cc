#include "sheet/slanted_edge.h"

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <complex>
#include <numbers>

namespace laygauge {

EdgeProfile BinEdge(std::span<const EdgeSample> samples, double bin_mm, double half_width_mm) {
  const int half = static_cast<int>(std::floor(half_width_mm / bin_mm));
  EdgeProfile profile;
  profile.bin_mm = bin_mm;
  profile.first_mm = -half * bin_mm;
  const size_t n = 2 * static_cast<size_t>(half) + 1;
  profile.distance_mm.assign(n, 0);
  profile.value.assign(n, 0);
  profile.count.assign(n, 0);
  for (const EdgeSample& sample : samples) {
    const double position = (sample.distance_mm - profile.first_mm) / bin_mm + 0.5;
    if (position < 0 || position >= static_cast<double>(n)) continue;
    const auto bin = static_cast<size_t>(position);
    profile.distance_mm[bin] += sample.distance_mm;
    profile.value[bin] += sample.value;
    profile.count[bin] += 1;
  }
  for (size_t bin = 0; bin < n; ++bin) {
    if (profile.count[bin] == 0) continue;
    profile.distance_mm[bin] /= profile.count[bin];
    profile.value[bin] /= profile.count[bin];
  }
  return profile;
}

namespace {

// The fit's parameters in one vector: offset, dark, bright, blur, sharpening, halo.
constexpr int kParameters = 6;
using Vector = Eigen::Matrix<double, kParameters, 1>;
using Matrix = Eigen::Matrix<double, kParameters, kParameters>;

Vector Pack(const EdgeFit& fit) {
  Vector p;
  p << fit.offset_mm, fit.dark, fit.bright, fit.spread.blur_sd_mm, fit.spread.sharpening,
      fit.spread.halo_sd_mm;
  return p;
}

EdgeFit Unpack(const Vector& p) {
  EdgeFit fit;
  fit.offset_mm = p[0];
  fit.dark = p[1];
  fit.bright = p[2];
  fit.spread = {p[3], p[4], p[5]};
  return fit;
}

Vector Within(Vector p, double pixel_mm) {
  p[3] = std::clamp(p[3], 0.15 * pixel_mm, 6 * pixel_mm);
  p[4] = std::clamp(p[4], 0.0, 3.0);
  p[5] = std::clamp(p[5], 0.6 * pixel_mm, 4 * pixel_mm);
  return p;
}

// The model's value at a distance, and its derivatives by the parameters.
double Linearise(const EdgeFit& fit, double distance_mm, Vector* gradient) {
  const auto& [s, a, r] = fit.spread;
  const double x = distance_mm - fit.offset_mm;
  const double contrast = fit.bright - fit.dark;
  const double wide = std::sqrt(s * s + r * r);
  const PointSpread direct{s, 0, 0};
  const PointSpread halo{wide, 0, 0};
  const double direct_line = direct.LineSpread(x);
  const double halo_line = halo.LineSpread(x);
  const double direct_edge = direct.EdgeResponse(x);
  const double halo_edge = halo.EdgeResponse(x);
  const double response = (1 + a) * direct_edge - a * halo_edge;
  Vector& g = *gradient;
  g[0] = -contrast * ((1 + a) * direct_line - a * halo_line);
  g[1] = 1 - response;
  g[2] = response;
  // d Phi(x / sd) / d sd = -x / sd * density
  g[3] = contrast * (-(1 + a) * x / s * direct_line + a * x / wide * halo_line * s / wide);
  g[4] = contrast * (direct_edge - halo_edge);
  g[5] = contrast * a * x / wide * halo_line * r / wide;
  return fit.dark + contrast * response;
}

double Cost(const EdgeProfile& profile, const EdgeFit& fit) {
  double cost = 0;
  for (size_t bin = 0; bin < profile.size(); ++bin) {
    if (profile.count[bin] == 0) continue;
    const double modelled = std::clamp(fit.Value(profile.distance_mm[bin]), 0.0, 1.0);
    cost += profile.count[bin] * std::pow(modelled - profile.value[bin], 2);
  }
  return cost;
}

// The normal equations of the linearised model, and the cost; clipped bins say nothing about the
// parameters.
struct Linearised {
  Matrix normal = Matrix::Zero();
  Vector right = Vector::Zero();
  double cost = 0;
};

Linearised LineariseProfile(const EdgeProfile& profile, const EdgeFit& fit) {
  Linearised result;
  for (size_t bin = 0; bin < profile.size(); ++bin) {
    const double count = profile.count[bin];
    if (count == 0) continue;
    Vector g;
    const double modelled = Linearise(fit, profile.distance_mm[bin], &g);
    const double miss = profile.value[bin] - std::clamp(modelled, 0.0, 1.0);
    result.cost += count * miss * miss;
    if (modelled < 0 || modelled > 1) continue;
    result.normal.noalias() += count * g * g.transpose();
    result.right += count * miss * g;
  }
  return result;
}

double ResidualRms(const EdgeProfile& profile, const EdgeFit& fit) {
  double total = 0;
  for (const double count : profile.count) total += count;
  return std::sqrt(Cost(profile, fit) / std::max(total, 1.0)) /
         std::max(std::abs(fit.bright - fit.dark), 1e-6);
}

}  // namespace

EdgeFit FitEdge(const EdgeProfile& profile, const EdgeFit& start, double pixel_mm,
                bool hold_sharpening) {
  constexpr int kMaxSteps = 60;
  constexpr double kEnough = 1e-6;  // relative fall of the cost
  const int free = hold_sharpening ? kParameters - 2 : kParameters;
  Vector p = hold_sharpening ? Pack(start) : Within(Pack(start), pixel_mm);
  Linearised at = LineariseProfile(profile, Unpack(p));
  double damping = 1e-3;
  for (int step = 0; step < kMaxSteps && damping < 1e8; ++step) {
    bool settled = false;
    for (; damping < 1e8; damping *= 10) {
      Eigen::MatrixXd damped = at.normal.topLeftCorner(free, free);
      // The floor keeps a parameter without effect (the halo of no sharpening) where it is.
      damped.diagonal() += damping * at.normal.diagonal().head(free) +
                           Eigen::VectorXd::Constant(free, 1e-12 * at.normal.diagonal().maxCoeff());
      Vector next = p;
      next.head(free) += damped.ldlt().solve(at.right.head(free));
      if (!hold_sharpening) next = Within(next, pixel_mm);
      next[3] = std::clamp(next[3], 0.15 * pixel_mm, 6 * pixel_mm);
      const Linearised there = LineariseProfile(profile, Unpack(next));
      if (!(there.cost < at.cost)) continue;
      settled = at.cost - there.cost < kEnough * at.cost;
      p = next;
      at = there;
      damping = std::max(damping / 10, 1e-9);
      break;
    }
    if (settled) break;
  }
  EdgeFit fit = Unpack(p);
  fit.residual_rms = ResidualRms(profile, fit);
  return fit;
}

EdgeFit GuessEdge(const EdgeProfile& profile, double pixel_mm) {
  // Plateaus: the outer quarters' means; middle: where the area under the profile balances.
  const auto mean = [&](size_t begin, size_t end) {
    double sum = 0;
    double count = 0;
    for (size_t bin = begin; bin < end; ++bin) {
      sum += profile.value[bin] * profile.count[bin];
      count += profile.count[bin];
    }
    return count > 0 ? sum / count : 0.0;
  };
  EdgeFit fit;
  fit.dark = mean(0, profile.size() / 4);
  fit.bright = mean(profile.size() - profile.size() / 4, profile.size());
  double area = 0;
  double filled = 0;
  for (size_t bin = 0; bin < profile.size(); ++bin) {
    if (profile.count[bin] == 0) continue;
    area += std::clamp((profile.value[bin] - fit.dark) / (fit.bright - fit.dark), 0.0, 1.0);
    filled += 1;
  }
  fit.offset_mm = filled > 0 ? -profile.first_mm * (1 - 2 * area / filled) : 0;
  fit.spread = {0.7 * pixel_mm, 0.2, 1.4 * pixel_mm};
  return fit;
}

namespace {

// The windowed line spread of a profile, and its Fourier transform at any frequency.
class LineSpectrum {
 public:
  LineSpectrum(const EdgeProfile& profile, const EdgeFit& fit) : step_mm_(profile.bin_mm) {
    const size_t n = profile.size();
    std::vector<double> edge(n);
    for (size_t bin = 0; bin < n; ++bin) {
      edge[bin] = fit.Value(profile.Center(bin));
      // Few samples do not spread evenly over their bin: carry their mean to its centre.
      if (profile.count[bin] > 0) {
        edge[bin] += profile.value[bin] - fit.Value(profile.distance_mm[bin]);
      }
    }
    const double half = static_cast<double>(n - 1) / 2 * step_mm_;
    line_.assign(n, 0);
    for (size_t bin = 1; bin + 1 < n; ++bin) {
      const double away = std::abs(profile.Center(bin) - fit.offset_mm) / half;
      const double window =
          away < 0.5 ? 1.0
                     : 0.5 + 0.5 * std::cos(2 * std::numbers::pi * (std::min(away, 1.0) - 0.5));
      line_[bin] = window * (edge[bin + 1] - edge[bin - 1]);
      total_ += line_[bin];
    }
  }

  [[nodiscard]] double At(double cycles_per_mm) const {
    const double f = cycles_per_mm * step_mm_;
    const std::complex<double> turn = std::polar(1.0, -2 * std::numbers::pi * f);
    std::complex<double> phase = 1;
    std::complex<double> sum = 0;
    for (const double value : line_) {
      sum += value * phase;
      phase *= turn;
    }
    const auto sinc = [](double x) {
      const double t = std::numbers::pi * x;
      return x == 0 ? 1.0 : std::sin(t) / t;
    };
    return std::abs(sum / total_) / (sinc(2 * f) * sinc(f));
  }

 private:
  double step_mm_;
  std::vector<double> line_;
  double total_ = 0;
};

}  // namespace

std::vector<double> ModulationTransfer(const EdgeProfile& profile, const EdgeFit& fit,
                                       std::span<const double> cycles_per_mm) {
  const LineSpectrum spectrum(profile, fit);
  std::vector<double> modulation;
  modulation.reserve(cycles_per_mm.size());
  for (const double f : cycles_per_mm) modulation.push_back(spectrum.At(f));
  return modulation;
}

double Mtf50(const EdgeProfile& profile, const EdgeFit& fit) {
  // Bracketed from the fit's own MTF50, where the curve falls steeply.
  const LineSpectrum spectrum(profile, fit);
  const double expected = fit.spread.Mtf50PerMm();
  double low = expected;
  double high = expected;
  while (spectrum.At(low) < 0.5 && low > expected / 8) low /= 1.1;
  while (spectrum.At(high) > 0.5 && high < expected * 8) high *= 1.1;
  for (int step = 0; step < 14; ++step) {
    const double middle = (low + high) / 2;
    (spectrum.At(middle) > 0.5 ? low : high) = middle;
  }
  return (low + high) / 2;
}

Shoot MeasureShoot(const EdgeProfile& profile, const EdgeFit& fit) {
  const double contrast = fit.bright - fit.dark;
  Shoot shoot;
  for (size_t bin = 1; bin + 1 < profile.size(); ++bin) {
    double sum = 0;
    double count = 0;
    for (size_t near = bin - 1; near <= bin + 1; ++near) {
      sum += profile.value[near] * profile.count[near];
      count += profile.count[near];
    }
    if (count == 0) continue;
    const double value = sum / count;
    shoot.over_pct = std::max(shoot.over_pct, 100 * (value - fit.bright) / contrast);
    shoot.under_pct = std::max(shoot.under_pct, 100 * (fit.dark - value) / contrast);
  }
  return shoot;
}

namespace {

// A fit's clipped curve as a table: thousands of samples ask for few distinct distances.
class EdgeCurve {
 public:
  EdgeCurve(const EdgeFit& fit, double half_width_mm)
      : step_mm_(fit.spread.blur_sd_mm / 8),
        first_mm_(-half_width_mm - step_mm_),
        values_(static_cast<size_t>(2 * half_width_mm / step_mm_) + 4) {
    for (size_t i = 0; i < values_.size(); ++i) {
      values_[i] = std::clamp(fit.Value(first_mm_ + static_cast<double>(i) * step_mm_), 0.0, 1.0);
    }
  }

  struct Point {
    double value = 0;
    double slope = 0;  // a mm
  };
  [[nodiscard]] Point At(double distance_mm) const {
    const double position = std::clamp((distance_mm - first_mm_) / step_mm_, 0.0,
                                       static_cast<double>(values_.size()) - 1.001);
    const auto i = static_cast<size_t>(position);
    const double rise = values_[i + 1] - values_[i];
    return {values_[i] + rise * (position - static_cast<double>(i)), rise / step_mm_};
  }

 private:
  double step_mm_;
  double first_mm_;
  std::vector<double> values_;
};

}  // namespace

double SampleScatter(std::span<const EdgeSample> samples, const EdgeFit& fit,
                     double half_width_mm) {
  const EdgeCurve curve(fit, half_width_mm);
  double squares = 0;
  for (const EdgeSample& sample : samples) {
    const double miss = sample.value - curve.At(sample.distance_mm).value;
    squares += miss * miss;
  }
  return std::sqrt(squares / static_cast<double>(samples.size())) / (fit.bright - fit.dark);
}

void StraightenEdge(std::span<EdgeSample> samples, const EdgeFit& fit, double half_width_mm) {
  const EdgeCurve curve(fit, half_width_mm);
  std::array<double, 5> moments{};  // sums of slope^2 along^k
  std::array<double, 3> products{};
  for (const EdgeSample& sample : samples) {
    const auto [value, slope] = curve.At(sample.distance_mm);
    if (std::abs(slope) < 1e-6) continue;
    double weight = slope * slope;
    for (double& moment : moments) {
      moment += weight;
      weight *= sample.along_mm;
    }
    double product = slope * (sample.value - value);
    for (double& sum : products) {
      sum += product;
      product *= sample.along_mm;
    }
  }
  Eigen::Matrix3d normal;
  for (int i = 0; i < 3; ++i) {
    for (int k = 0; k < 3; ++k) normal(i, k) = moments[i + k];
  }
  const Eigen::Vector3d right(products[0], products[1], products[2]);
  // value ~ curve(distance + shift): the shift that the samples ask for.
  normal.diagonal() *= 1 + 1e-9;
  const Eigen::Vector3d shift = normal.ldlt().solve(right);
  if (!shift.allFinite()) return;
  for (EdgeSample& sample : samples) {
    const double along_mm = sample.along_mm;
    sample.distance_mm += shift[0] + along_mm * (shift[1] + along_mm * shift[2]);
  }
}

}  // namespace laygauge
