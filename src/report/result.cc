#include "report/result.h"

#include <fmt/format.h>

namespace laygauge {

std::string_view StatusName(CouponStatus status) {
  switch (status) {
    case CouponStatus::kOk:
      return "ok";
    case CouponStatus::kRetake:
      return "retake";
    case CouponStatus::kEmpty:
      return "empty";
  }
  return "";
}

const std::vector<std::string_view>& FixedResultColumns() {
  static const std::vector<std::string_view> columns{
      "batch",       "well",        "photo",    "status",    "note",   "takes",
      "score",       "loss",        "score_sd", "why",       "fault",  "unfamiliar",
      "center_x_mm", "center_y_mm", "turn_deg", "roughness", "defects"};
  return columns;
}

std::string WhyText(const Score& score) {
  constexpr double kSmallestShown = 0.05;  // half a unit of the digit that is shown
  std::string text;
  for (const Loss& loss : score.losses) {
    if (loss.points < kSmallestShown) continue;
    text += fmt::format("{}{} -{:.1f}", text.empty() ? "" : ", ", loss.name, loss.points);
  }
  return text;
}

}  // namespace laygauge
