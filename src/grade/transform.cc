#include "grade/transform.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <utility>

namespace laygauge {
namespace {

constexpr std::array<std::pair<TransformKind, std::string_view>, 4> kNames{{
    {TransformKind::kLinear, "linear"},
    {TransformKind::kSaturating, "saturating"},
    {TransformKind::kRoot, "root"},
    {TransformKind::kLogarithm, "logarithm"},
}};

}  // namespace

double Transform::operator()(double x) const {
  const double ratio = std::max(x, 0.0) / half;
  switch (kind) {
    case TransformKind::kLinear:
      return ratio;
    case TransformKind::kSaturating:
      return 2 * ratio / (ratio + 1);
    case TransformKind::kRoot:
      return std::sqrt(ratio);
    case TransformKind::kLogarithm:
      return std::log2(1 + ratio);
  }
  return 0;
}

double Transform::Slope(double x) const {
  const double ratio = std::max(x, 0.0) / half;
  switch (kind) {
    case TransformKind::kLinear:
      return 1 / half;
    case TransformKind::kSaturating:
      return 2 / ((ratio + 1) * (ratio + 1)) / half;
    case TransformKind::kRoot:
      return 0.5 / std::sqrt(std::max(ratio, 0.01)) / half;
    case TransformKind::kLogarithm:
      return 1 / ((1 + ratio) * std::numbers::ln2) / half;
  }
  return 0;
}

std::string_view TransformName(TransformKind kind) {
  for (const auto& [candidate, name] : kNames) {
    if (candidate == kind) return name;
  }
  return "";
}

std::optional<TransformKind> TransformByName(std::string_view name) {
  for (const auto& [kind, candidate] : kNames) {
    if (candidate == name) return kind;
  }
  return std::nullopt;
}

}  // namespace laygauge
