#pragma once

#include <cstdint>
#include <string>
#include <vector>

namespace laygauge {

// A rectified coupon to be judged.
struct GradingCoupon {
  std::string batch;
  std::string well;
  std::string png;      // the picture file's bytes
  double width_mm = 0;  // what the picture's width shows
};

enum class GradingMode {
  kGrades,  // one coupon at a time, 1 to 10 in half steps
  kPairs,   // two coupons: which is better?
};

struct GradingPageOptions {
  GradingMode mode = GradingMode::kGrades;
  std::uint64_t seed = 1;     // of the order
  int repeats = 3;            // grades: how many coupons come twice, unannounced
  int pairs = 40;             // pairs: how many are shown
  double css_px_per_mm = 16;  // the scale at 100 % zoom
  void Check() const;         // throws BadOption
};

// What is shown in which order: indices of coupons, one or two an item. Seeded, the same on every
// machine. Grades: every coupon once, `repeats` of them again, at least a third of the page later.
// Pairs: no pair twice, every coupon about equally often, all coupons connected.
[[nodiscard]] std::vector<std::vector<int>> GradingOrder(int coupons,
                                                         const GradingPageOptions& options);

// One self-contained HTML page that works from disk without a network: pictures, order and script
// inside. It shows neither names nor scores; it keeps judgements in the browser and saves them as
// docs/formats.md describes ("Hand grades", "Pairs").
[[nodiscard]] std::string FormatGradingPage(const std::vector<GradingCoupon>& coupons,
                                            const GradingPageOptions& options);

}  // namespace laygauge
