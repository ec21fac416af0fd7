#pragma once

#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "base/csv.h"
#include "base/error.h"
#include "grade/grades.h"
#include "grade/scale.h"

namespace laygauge {

// One coupon as result folders give it. Several rows (takes) of it are averaged.
struct MeasuredCoupon {
  std::string file;       // the last scores.csv that has it
  std::string status;     // ok if any row is
  FeatureTable features;  // those asked for; no value where no row has one; empty unless ok
  std::optional<double> score;
};
using Measurements = std::map<CouponName, MeasuredCoupon>;

// Takes `features` and the score from tables in the form of scores.csv (docs/formats.md).
// Problem: a missing column, or a field that is no number.
[[nodiscard]] Expected<Measurements> ParseResults(const std::vector<CsvTable>& tables,
                                                  const std::vector<std::string>& features);

// `paths`: result folders, or their scores.csv files.
[[nodiscard]] Expected<Measurements> ReadResults(const std::vector<std::filesystem::path>& paths,
                                                 const std::vector<std::string>& features);

// The features that the scale needs: its terms' and those it watches.
[[nodiscard]] std::vector<std::string> FeaturesOf(const Scale& scale);

}  // namespace laygauge
