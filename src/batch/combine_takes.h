#pragma once

#include <map>
#include <string>
#include <vector>

#include "base/error.h"
#include "batch/run_sheet.h"
#include "grade/scale.h"
#include "report/record.h"
#include "report/result.h"

namespace laygauge {

// One feature over several takes: the mean of the takes that have a value. Its standard deviation:
// the larger of what the takes' own ones give and of what their spread gives, both of the mean.
[[nodiscard]] FeatureValue MeanOfTakes(const std::vector<FeatureValue>& takes);

// One row a coupon: the photos of a batch are takes of it. The score is that of the mean features.
// Rows in order of batches' first photo, wells in the sheet's order.
[[nodiscard]] std::vector<ResultRow> CombineTakes(const std::vector<PhotoRecord>& records,
                                                  const std::vector<std::string>& feature_columns,
                                                  const Scale& scale);

// One row a coupon and photo; `takes` is 1.
[[nodiscard]] std::vector<ResultRow> EachTake(const std::vector<PhotoRecord>& records,
                                              const std::vector<std::string>& feature_columns,
                                              const Scale& scale);

}  // namespace laygauge
