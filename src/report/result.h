#pragma once

#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "grade/scale.h"

namespace laygauge {

// ok: measured. retake: there is a coupon, but this photo cannot measure it. empty: no coupon.
enum class CouponStatus { kOk, kRetake, kEmpty };

[[nodiscard]] std::string_view StatusName(CouponStatus status);

// One coupon of a batch, all its takes together.
struct ResultRow {
  std::string batch;
  std::string well;
  std::string photo;                  // with one row a take: the file; else empty
  std::vector<std::string> settings;  // parallel to ResultTable::setting_columns
  CouponStatus status = CouponStatus::kOk;
  std::string note;  // why it is not ok, or what to know about it; may be empty
  int takes = 0;     // photos that went into the row
  std::optional<Score> score;
  std::string fault;                            // the chief fault in words; may be empty
  std::vector<std::optional<double>> features;  // parallel to ResultTable::feature_columns
  std::optional<double> center_x_mm;            // on the sheet, x right, y down
  std::optional<double> center_y_mm;
  std::optional<double> turn_deg;  // counter-clockwise seen from above
};

struct ResultTable {
  std::vector<std::string> setting_columns;  // the run sheet's, in its order
  std::vector<std::string> feature_columns;  // metrics, each with its unit
  std::vector<ResultRow> rows;
  std::string scale_name;
  std::string scale_remark;  // what must be said wherever a score shows; may be empty
  bool each_take = false;    // one row a coupon and photo, with the column photo
  bool with_loss = false;    // adds the column loss = 10 - score, for programs that minimise
};

// Columns of scores.csv that are always there; a run sheet may not use their names.
[[nodiscard]] const std::vector<std::string_view>& FixedResultColumns();

// The losses that matter in words: "gaps -2.1, ridges -0.6"; those below 0.05 are left out.
[[nodiscard]] std::string WhyText(const Score& score);

}  // namespace laygauge
