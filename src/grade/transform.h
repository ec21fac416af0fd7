#pragma once

#include <optional>
#include <string_view>

namespace laygauge {

// How a feature x >= 0 (negative values count as 0) becomes a term of the scale. All start at 0,
// rise, and never fall: more of a defect is never less of a term. With h the feature's `half`:
enum class TransformKind {
  kLinear,      // x / h
  kSaturating,  // 2 x / (x + h): the half of its ceiling 2 is reached at h (Michaelis & Menten
                // 1913)
  kRoot,        // sqrt(x / h)
  kLogarithm,   // log(1 + x / h) / log(2)
};

// So each is 1 at x = h: weights of different features compare.
struct Transform {
  TransformKind kind = TransformKind::kLinear;
  double half = 1;  // in the feature's unit, > 0

  [[nodiscard]] double operator()(double x) const;
  // d term / d x at x; the one-sided slope at 0, where a root's is taken at a hundredth of h.
  [[nodiscard]] double Slope(double x) const;
};

[[nodiscard]] std::string_view TransformName(TransformKind kind);
[[nodiscard]] std::optional<TransformKind> TransformByName(std::string_view name);

}  // namespace laygauge
