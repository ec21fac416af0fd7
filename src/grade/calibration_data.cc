#include "grade/calibration_data.h"

#include <fmt/format.h>

#include <algorithm>
#include <map>
#include <set>

namespace laygauge {
namespace {

using Eigen::Index;

bool IsMeasured(const Measurements& measurements, const CouponName& coupon) {
  const auto found = measurements.find(coupon);
  return found != measurements.end() && found->second.status == "ok";
}

// Rows of coupons that are measured; each coupon and grader gets an index when it first comes.
class Indices {
 public:
  Index Coupon(const CouponName& name) { return Of(name, coupons, coupon_places_); }
  Index Grader(const std::string& name) { return Of(name, graders, grader_places_); }
  std::vector<CouponName> coupons;
  std::vector<std::string> graders;

 private:
  template <class Name>
  static Index Of(const Name& name, std::vector<Name>& names, std::map<Name, Index>& places) {
    const auto [place, is_new] = places.insert({name, static_cast<Index>(names.size())});
    if (is_new) names.push_back(name);
    return place->second;
  }
  std::map<CouponName, Index> coupon_places_;
  std::map<std::string, Index> grader_places_;
};

}  // namespace

Expected<CalibrationData> JoinGradesAndMetrics(const Scale& base, const Measurements& measurements,
                                               const std::vector<Judgement>& judgements,
                                               const std::vector<Preference>& preferences) {
  CalibrationData data;
  Indices indices;
  std::set<CouponName> not_measured;
  const auto measured = [&](const CouponName& coupon) {
    const bool is = IsMeasured(measurements, coupon);
    if (!is) not_measured.insert(coupon);
    return is;
  };
  for (const Judgement& judgement : judgements) {
    if (!measured(judgement.coupon)) continue;
    data.model.grades.push_back(
        {indices.Coupon(judgement.coupon), indices.Grader(judgement.grader), judgement.grade});
  }
  for (const Preference& answer : preferences) {
    const bool both = measured(answer.better) && measured(answer.worse);
    if (!both) continue;
    data.model.pairs.push_back({indices.Coupon(answer.better), indices.Coupon(answer.worse)});
  }
  data.coupons = indices.coupons;
  data.graders = indices.graders;
  data.not_measured.assign(not_measured.begin(), not_measured.end());
  data.model.graders = static_cast<Index>(data.graders.size());
  data.model.terms.resize(static_cast<Index>(data.coupons.size()),
                          static_cast<Index>(base.terms.size()));
  for (size_t i = 0; i < data.coupons.size(); ++i) {
    data.features.push_back(measurements.at(data.coupons[i]).features);
    const auto sum = SumDefects(base, data.features.back());
    if (!sum) {
      return tl::unexpected(Problem{
          sum.error().kind, fmt::format("{}: {}", ToText(data.coupons[i]), sum.error().message)});
    }
    data.model.terms.row(static_cast<Index>(i)) = sum->terms.transpose();
  }
  return data;
}

ModelData WithoutCoupons(const ModelData& data, const std::vector<bool>& left_out) {
  const auto out = [&](Index coupon) { return left_out[static_cast<size_t>(coupon)]; };
  ModelData rest = data;
  std::erase_if(rest.grades, [&](const GradeRow& row) { return out(row.coupon); });
  std::erase_if(rest.pairs, [&](const PairRow& row) { return out(row.better) || out(row.worse); });
  return rest;
}

}  // namespace laygauge
