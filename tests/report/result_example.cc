#include "report/result_example.h"

#include <utility>

namespace laygauge {
namespace {

ResultRow RowOf(std::string well, CouponStatus status, std::vector<std::string> settings) {
  ResultRow row;
  row.batch = "b1";
  row.well = std::move(well);
  row.status = status;
  row.settings = std::move(settings);
  row.features.resize(2);
  return row;
}

}  // namespace

ResultTable ExampleTable() {
  ResultTable table;
  table.setting_columns = {"flow_pct", "remark"};
  table.feature_columns = {"pitch_mm", "gap_area_pct"};
  table.scale_name = "example";
  table.rows = {RowOf("A1", CouponStatus::kOk, {"97.50", "first layer, \"reprinted\""}),
                RowOf("A2", CouponStatus::kRetake, {"88", ""}),
                RowOf("A3", CouponStatus::kEmpty, {"106", ""})};
  ResultRow& scored = table.rows[0];
  scored.takes = 2;
  scored.score = Score{7.3456, 0.3217, {{"gaps", 2.1}, {"ridges", 0.5104}, {"scars", 0.044}}, {}};
  scored.fault = "too little material";
  scored.features[0] = 0.412345678;
  ResultRow& retake = table.rows[1];
  retake.takes = 1;
  retake.note = "12 % of the field is blown out; expose it less";
  return table;
}

}  // namespace laygauge
