#include "base/statistics.h"

#include <algorithm>
#include <cmath>
#include <numeric>
#include <stdexcept>

namespace laygauge {
namespace {

void NeedValues(std::span<const double> values) {
  if (values.empty()) throw std::invalid_argument("statistics of no values");
}

}  // namespace

double Mean(std::span<const double> values) {
  NeedValues(values);
  return std::accumulate(values.begin(), values.end(), 0.0) / static_cast<double>(values.size());
}

double StandardDeviation(std::span<const double> values) {
  const double mean = Mean(values);
  if (values.size() < 2) return 0;
  double sum = 0;
  for (const double value : values) sum += (value - mean) * (value - mean);
  return std::sqrt(sum / static_cast<double>(values.size() - 1));
}

double Quantile(std::span<const double> values, double p) {
  NeedValues(values);
  std::vector<double> parted(values.begin(), values.end());
  const double position = std::clamp(p, 0.0, 1.0) * static_cast<double>(parted.size() - 1);
  const auto below = parted.begin() + static_cast<std::ptrdiff_t>(position);
  std::nth_element(parted.begin(), below, parted.end());
  const auto next = below + 1;
  const double above = next == parted.end() ? *below : *std::min_element(next, parted.end());
  return *below + (position - std::floor(position)) * (above - *below);
}

double Median(std::span<const double> values) { return Quantile(values, 0.5); }

double RobustDeviation(std::span<const double> values) {
  const double median = Median(values);
  std::vector<double> away(values.begin(), values.end());
  for (double& value : away) value = std::abs(value - median);
  return 1.4826 * Median(away);
}

std::vector<double> Ranks(std::span<const double> values) {
  std::vector<size_t> order(values.size());
  std::iota(order.begin(), order.end(), 0);
  std::sort(order.begin(), order.end(), [&](size_t a, size_t b) { return values[a] < values[b]; });
  std::vector<double> ranks(values.size());
  for (size_t first = 0; first < order.size();) {
    size_t last = first;
    while (last + 1 < order.size() && values[order[last + 1]] == values[order[first]]) ++last;
    const double shared = 1 + (static_cast<double>(first) + static_cast<double>(last)) / 2;
    for (size_t i = first; i <= last; ++i) ranks[order[i]] = shared;
    first = last + 1;
  }
  return ranks;
}

double Correlation(std::span<const double> a, std::span<const double> b) {
  if (a.size() != b.size() || a.size() < 2) {
    throw std::invalid_argument("correlation of unequal or too few values");
  }
  const double mean_a = Mean(a);
  const double mean_b = Mean(b);
  double ab = 0;
  double aa = 0;
  double bb = 0;
  for (size_t i = 0; i < a.size(); ++i) {
    ab += (a[i] - mean_a) * (b[i] - mean_b);
    aa += (a[i] - mean_a) * (a[i] - mean_a);
    bb += (b[i] - mean_b) * (b[i] - mean_b);
  }
  return ab / std::sqrt(aa * bb);
}

double RankCorrelation(std::span<const double> a, std::span<const double> b) {
  const std::vector<double> ranks_a = Ranks(a);
  const std::vector<double> ranks_b = Ranks(b);
  return Correlation(ranks_a, ranks_b);
}

}  // namespace laygauge
