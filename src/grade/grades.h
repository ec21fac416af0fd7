#pragma once

#include <compare>
#include <filesystem>
#include <map>
#include <set>
#include <string>
#include <vector>

#include "base/csv.h"
#include "base/error.h"

namespace laygauge {

struct CouponName {
  std::string batch;
  std::string well;
  // NOLINTNEXTLINE(modernize-use-nullptr): a false alarm of clang-tidy 14
  auto operator<=>(const CouponName&) const = default;
};

// "b1 A3"
[[nodiscard]] std::string ToText(const CouponName& coupon);

// A hand grade. A coupon may come twice for a grader: the second tells how steady he is.
struct Judgement {
  std::string grader;
  CouponName coupon;
  double grade = 0;  // 1 to 10
};

// One answer to "which is better?".
struct Preference {
  std::string grader;
  CouponName better;
  CouponName worse;
};

// Columns grader,batch,well,grade in any order; others are not read. Problem, with the line: a
// missing column, an empty name, a grade that is no number or outside 1 to 10, a coupon that one
// grader graded more than twice, or twice with grades 4 or more apart, or a file joined with
// itself.
[[nodiscard]] Expected<std::vector<Judgement>> ParseGrades(const CsvTable& table);

// Columns grader,better_batch,better_well,worse_batch,worse_well. Problem, with the line: as above;
// a coupon against itself; the same answer twice; one grader's answers that contradict each other.
[[nodiscard]] Expected<std::vector<Preference>> ParsePreferences(const CsvTable& table);

// All files together. Problem also: one grader's coupon in two of the files.
[[nodiscard]] Expected<std::vector<Judgement>> ReadGrades(
    const std::vector<std::filesystem::path>& files);
[[nodiscard]] Expected<std::vector<Preference>> ReadPreferences(
    const std::vector<std::filesystem::path>& files);

// Graders in the order of their names, and what they graded.
[[nodiscard]] std::vector<std::string> GraderNames(const std::vector<Judgement>& judgements);
// One grader's mean grade of each of his coupons.
[[nodiscard]] std::map<CouponName, double> MeanGrades(const std::vector<Judgement>& judgements,
                                                      const std::string& grader);

// Pairs of grades that one grader gave the same coupon, in the order given.
struct RepeatGrades {
  std::vector<CouponName> coupons;
  std::vector<double> first;
  std::vector<double> second;
};
[[nodiscard]] RepeatGrades RepeatsOf(const std::vector<Judgement>& judgements,
                                     const std::string& grader);

// Problem: coupons that are not among `known`, all listed.
[[nodiscard]] Done CheckCouponsKnown(const std::vector<Judgement>& judgements,
                                     const std::vector<Preference>& preferences,
                                     const std::set<CouponName>& known);

// Problem: fewer than 6 coupons graded or compared, all grades alike, or a grader who contradicts
// himself throughout: three or more repeats that differ as much as his grades of different coupons
// do, or comparisons that run in circles as often as chance would make them (Kendall & Babington
// Smith 1940, "On the method of paired comparisons", doi:10.1093/biomet/31.3-4.324: a quarter).
[[nodiscard]] Done CheckGradesTeach(const std::vector<Judgement>& judgements,
                                    const std::vector<Preference>& preferences);

}  // namespace laygauge
