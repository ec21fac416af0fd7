#include "batch/combine_takes.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "base/statistics.h"

namespace laygauge {
namespace {

// The takes of one coupon.
struct CouponTakes {
  std::string batch;
  std::string well;
  std::vector<const CouponRecord*> takes;
};

std::vector<CouponTakes> GroupTakes(const std::vector<PhotoRecord>& records) {
  std::vector<CouponTakes> coupons;
  std::vector<std::string> batches;
  for (const PhotoRecord& record : records) {
    if (std::find(batches.begin(), batches.end(), record.batch) == batches.end()) {
      batches.push_back(record.batch);
    }
  }
  for (const std::string& batch : batches) {
    const size_t first = coupons.size();
    for (const PhotoRecord& record : records) {
      if (record.batch != batch) continue;
      for (const CouponRecord& coupon : record.coupons) {
        const auto same =
            std::find_if(coupons.begin() + static_cast<std::ptrdiff_t>(first), coupons.end(),
                         [&](const CouponTakes& takes) { return takes.well == coupon.well; });
        if (same == coupons.end()) {
          coupons.push_back({batch, coupon.well, {&coupon}});
        } else {
          same->takes.push_back(&coupon);
        }
      }
    }
  }
  return coupons;
}

void AddNote(std::string& note, const std::string& more) {
  if (more.empty() || note.find(more) != std::string::npos) return;
  note += fmt::format("{}{}", note.empty() ? "" : "; ", more);
}

void PlaceOf(const CouponRecord& coupon, ResultRow& row) {
  if (!coupon.placement) return;
  row.center_x_mm = coupon.placement->center_x_mm;
  row.center_y_mm = coupon.placement->center_y_mm;
  row.turn_deg = coupon.placement->turn_deg;
}

// Features, score and fault of a row from the takes that were measured.
void Judge(const std::vector<const CouponRecord*>& measured,
           const std::vector<std::string>& feature_columns, const Scale& scale, ResultRow& row) {
  std::map<std::string, std::vector<FeatureValue>, std::less<>> takes;
  for (const CouponRecord* coupon : measured) {
    for (const auto& [name, value] : FeaturesOf(*coupon)) takes[name].push_back(value);
  }
  FeatureTable features;
  for (const auto& [name, values] : takes) features[name] = MeanOfTakes(values);
  for (const std::string& column : feature_columns) {
    const auto found = features.find(column);
    row.features.push_back(found == features.end() ? std::nullopt : found->second.value);
  }
  const auto score = ScoreCoupon(scale, features);
  if (score) {
    row.score = *score;
  } else {
    row.status = CouponStatus::kRetake;
    AddNote(row.note, score.error().message);
  }
}

ResultRow RowOf(const CouponTakes& coupon, const std::vector<std::string>& feature_columns,
                const Scale& scale) {
  ResultRow row;
  row.batch = coupon.batch;
  row.well = coupon.well;
  std::vector<const CouponRecord*> measured;
  bool unclear = false;
  for (const CouponRecord* take : coupon.takes) {
    if (take->status == CouponStatus::kOk) measured.push_back(take);
    unclear = unclear || take->status == CouponStatus::kRetake;
    AddNote(row.note, take->note);
  }
  row.takes = static_cast<int>(measured.size());
  if (!measured.empty()) {
    const auto same_well_empty = std::count_if(
        coupon.takes.begin(), coupon.takes.end(),
        [](const CouponRecord* take) { return take->status == CouponStatus::kEmpty; });
    if (same_well_empty > 0) {
      AddNote(row.note, fmt::format("the well is empty in {} of {} photos", same_well_empty,
                                    coupon.takes.size()));
    }
    Judge(measured, feature_columns, scale, row);
    if (measured.size() == 1) PlaceOf(*measured.front(), row);
    return row;
  }
  row.status = unclear ? CouponStatus::kRetake : CouponStatus::kEmpty;
  row.features.resize(feature_columns.size());
  if (coupon.takes.size() == 1) PlaceOf(*coupon.takes.front(), row);
  return row;
}

}  // namespace

FeatureValue MeanOfTakes(const std::vector<FeatureValue>& takes) {
  std::vector<double> values;
  double variance_sum = 0;
  bool all_have_sd = true;
  for (const FeatureValue& take : takes) {
    if (!take.value) continue;
    values.push_back(*take.value);
    all_have_sd = all_have_sd && take.sd.has_value();
    variance_sum += take.sd ? *take.sd * *take.sd : 0;
  }
  if (values.empty()) return {};
  const auto count = static_cast<double>(values.size());
  FeatureValue mean{Mean(values), std::nullopt};
  const double told_sd = std::sqrt(variance_sum) / count;
  if (values.size() > 1) {
    mean.sd = std::max(told_sd, StandardDeviation(values) / std::sqrt(count));
  } else if (all_have_sd) {
    mean.sd = told_sd;
  }
  return mean;
}

std::vector<ResultRow> CombineTakes(const std::vector<PhotoRecord>& records,
                                    const std::vector<std::string>& feature_columns,
                                    const Scale& scale) {
  std::vector<ResultRow> rows;
  for (const CouponTakes& coupon : GroupTakes(records)) {
    rows.push_back(RowOf(coupon, feature_columns, scale));
  }
  return rows;
}

std::vector<ResultRow> EachTake(const std::vector<PhotoRecord>& records,
                                const std::vector<std::string>& feature_columns,
                                const Scale& scale) {
  std::vector<ResultRow> rows;
  for (const PhotoRecord& record : records) {
    for (const CouponRecord& coupon : record.coupons) {
      rows.push_back(RowOf({record.batch, coupon.well, {&coupon}}, feature_columns, scale));
      rows.back().photo = record.file;
    }
  }
  return rows;
}

}  // namespace laygauge
