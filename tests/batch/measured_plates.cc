#include "batch/measured_plates.h"

#include <fstream>
#include <nlohmann/json.hpp>
#include <stdexcept>

#include "base/file.h"
#include "batch/score_run.h"
#include "grade/scale_file.h"

namespace laygauge {
namespace {

std::vector<PhotoRecord> Measure() {
  const std::filesystem::path samples =
      std::filesystem::path(LAYGAUGE_SOURCE_DIR) / "sample-images";
  ScoreRunRequest request;
  for (int plate = 1; plate <= 7; ++plate) {
    request.photos.push_back(samples / ("d" + std::to_string(plate) + ".jpg"));
  }
  request.sheets = ShippedSheets();
  request.coupon = ShippedCoupons().front();
  request.scale = ShippedScale();
  auto list = ReadPhotoList(samples / "photos.csv");
  if (!list) throw std::runtime_error(list.error().message);
  request.photo_list = std::move(*list);
  std::vector<PhotoRecord> records;
  const auto run = RunScoring(request,
                              [&](const PhotoMeasurement& measured) -> Done {
                                records.push_back(measured.record);
                                return {};
                              },
                              {});
  if (!run) throw std::runtime_error(run.error().message);
  if (!run->refused.empty()) throw std::runtime_error(run->refused.front().problem.message);
  return records;
}

std::map<std::string, CouponTruth> TruthOf(const std::string& plate) {
  const std::filesystem::path folder = std::filesystem::path(LAYGAUGE_SOURCE_DIR) / "tests/truth";
  std::ifstream file(folder / (plate + ".truth.json"));
  const auto json = nlohmann::json::parse(file);
  std::map<std::string, CouponTruth> coupons;
  for (const auto& item : json.at("coupons")) {
    CouponTruth truth;
    truth.kind = item.at("kind");
    truth.center_x_mm = item.at("at_mm")[0];
    truth.center_y_mm = item.at("at_mm")[1];
    truth.turn_deg = item.at("turn_deg");
    for (const auto& [key, value] : item.items()) {
      if (value.is_number()) truth.numbers[key] = value;
    }
    coupons[item.at("well")] = std::move(truth);
  }
  return coupons;
}

}  // namespace

std::optional<double> MeasuredCoupon::Value(const std::string& feature) const {
  for (const NamedFeature& named : record->features) {
    if (named.name == feature) return named.feature.value;
  }
  throw std::invalid_argument("no feature is called " + feature);
}

const std::vector<PhotoRecord>& MeasuredPlates() {
  static const std::vector<PhotoRecord> records = Measure();
  return records;
}

const std::vector<MeasuredCoupon>& MeasuredCoupons() {
  static const std::vector<MeasuredCoupon> coupons = [] {
    std::vector<MeasuredCoupon> all;
    for (const PhotoRecord& record : MeasuredPlates()) {
      const auto truths = TruthOf(record.stem);
      for (const CouponRecord& coupon : record.coupons) {
        all.push_back({record.stem, &coupon, truths.at(coupon.well)});
      }
    }
    return all;
  }();
  return coupons;
}

}  // namespace laygauge
