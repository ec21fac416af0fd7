#pragma once

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <random>
#include <string>
#include <vector>

#include "grade/grades.h"
#include "grade/results.h"
#include "grade/scale.h"
#include "grade/scale_example.h"

namespace laygauge {

// Coupons drawn at random, and graders who follow ExampleScale() but for weights of their own, what
// the metrics do not see, their strictness and their noise. Seeded: the same at every run.
class SimulatedPanel {
 public:
  explicit SimulatedPanel(unsigned seed) : random_(seed) {
    truth_ = ExampleScale();
    truth_.terms[0].weight *= std::exp(0.2 * normal_(random_));
    truth_.terms[1].weight *= std::exp(0.2 * normal_(random_));
  }

  static constexpr double kCouponSd = 0.25;
  static constexpr double kGraderSd = 0.4;

  // A coupon of that name among `measurements`.
  void Draw(const CouponName& name, Measurements& measurements) {
    std::exponential_distribution<double> gap(1 / 2.0);
    std::exponential_distribution<double> ridge(1 / 8.0);
    MeasuredCoupon coupon{
        "scores.csv", "ok",
        ExampleFeatures(std::min(gap(random_), 10.0), std::min(ridge(random_), 20.0)),
        std::nullopt};
    quality_[name] = ScoreCoupon(truth_, coupon.features)->value + kCouponSd * normal_(random_);
    measurements[name] = coupon;
  }

  // What the graders see of it, without strictness and noise.
  [[nodiscard]] double Quality(const CouponName& name) const { return quality_.at(name); }

  // The score by the graders' own weights.
  [[nodiscard]] double TrueScore(const FeatureTable& features) const {
    return ScoreCoupon(truth_, features)->value;
  }

  [[nodiscard]] double Grade(const CouponName& name, double strictness) {
    const double exact = Quality(name) + strictness + kGraderSd * normal_(random_);
    return std::clamp(std::round(2 * exact) / 2, 1.0, 10.0);
  }

  // The mean of three graders whose strictness cancels.
  [[nodiscard]] double PanelMean(const CouponName& name) {
    return (Grade(name, 0.5) + Grade(name, -0.6) + Grade(name, 0.1)) / 3;
  }

 private:
  std::mt19937 random_;
  std::normal_distribution<double> normal_;
  Scale truth_;
  std::map<CouponName, double> quality_;
};

// A base to fit from: ExampleScale(), loosely held.
inline Scale LooseBase() {
  Scale base = ExampleScale();
  base.covariance = Eigen::Vector2d(0.3, 0.3).asDiagonal();
  return base;
}

}  // namespace laygauge
