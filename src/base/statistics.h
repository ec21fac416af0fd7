#pragma once

#include <span>
#include <vector>

namespace laygauge {

// All of these refuse an empty span by an assertion-like std::invalid_argument: a caller's bug.

[[nodiscard]] double Mean(std::span<const double> values);

// Sample standard deviation (divisor n - 1); 0 for a single value.
[[nodiscard]] double StandardDeviation(std::span<const double> values);

// Hyndman & Fan 1996 type 7 (R's and NumPy's default): linear between order statistics,
// at position (n - 1) p. 0 <= p <= 1.
[[nodiscard]] double Quantile(std::span<const double> values, double p);
[[nodiscard]] double Median(std::span<const double> values);

// Median absolute deviation from the median times 1.4826: the standard deviation of normal data.
[[nodiscard]] double RobustDeviation(std::span<const double> values);

// Ranks from 1; equal values share the mean of their ranks.
[[nodiscard]] std::vector<double> Ranks(std::span<const double> values);

// Product-moment and rank (Spearman 1904) correlation, with ties; same length, at least 2.
// NaN when one side is constant.
[[nodiscard]] double Correlation(std::span<const double> a, std::span<const double> b);
[[nodiscard]] double RankCorrelation(std::span<const double> a, std::span<const double> b);

}  // namespace laygauge
