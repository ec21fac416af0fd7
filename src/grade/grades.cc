#include "grade/grades.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <cmath>
#include <optional>
#include <utility>

namespace laygauge {
namespace {

constexpr double kContradictionPoints = 4;
constexpr size_t kFewestForJoinedFile = 6;

// The table's columns by name; reading a field refuses an empty one.
class Fields {
 public:
  static Expected<Fields> Of(const CsvTable& table, const std::vector<std::string>& names) {
    Fields fields(table);
    for (const std::string& name : names) {
      const auto column = table.NeedColumn(name);
      if (!column) return tl::unexpected(column.error());
      fields.columns_[name] = *column;
    }
    return fields;
  }
  [[nodiscard]] const std::string& Text(size_t row, const std::string& name) const {
    return table_->rows[row][columns_.at(name)];
  }
  // The problem of the row's first empty field, if there is one.
  [[nodiscard]] Done NoneEmpty(size_t row) const {
    for (const auto& [name, column] : columns_) {
      if (table_->rows[row][column].empty()) {
        return BadInput(fmt::format("{}: the field {} is empty", table_->Where(row), name));
      }
    }
    return {};
  }

 private:
  explicit Fields(const CsvTable& table) : table_(&table) {}
  const CsvTable* table_;
  std::map<std::string, size_t> columns_;
};

Expected<double> ReadGrade(const CsvTable& table, size_t row, const std::string& text) {
  const auto grade = ParseNumber(text);
  if (!grade) {
    return BadInput(
        fmt::format("{}: the grade \"{}\" is not a number; grades are numbers from 1 to 10",
                    table.Where(row), text));
  }
  if (*grade < 1 || *grade > 10) {
    return BadInput(fmt::format("{}: the grade {} is outside 1 to 10", table.Where(row), text));
  }
  return *grade;
}

// What a file's earlier rows said, to recognise repeats.
struct Given {
  double grade;
  size_t row;
};
using GivenGrades = std::map<std::pair<std::string, CouponName>, std::vector<Given>>;

Done CheckRepeat(const CsvTable& table, size_t row, const Judgement& judgement,
                 const std::vector<Given>& earlier) {
  if (earlier.empty()) return {};
  const std::string who = fmt::format("{} graded {}", judgement.grader, ToText(judgement.coupon));
  if (earlier.size() >= 2) {
    return BadInput(fmt::format("{}: {} a third time; a coupon comes twice at most for a grader",
                                table.Where(row), who));
  }
  const double apart = std::abs(earlier.front().grade - judgement.grade);
  if (apart < kContradictionPoints) return {};
  return BadInput(fmt::format(
      "{}: {} with {}, but with {} in line {}; delete the one that is a mistake", table.Where(row),
      who, judgement.grade, earlier.front().grade, table.lines[earlier.front().row]));
}

// A file that was appended to itself looks like a grader who repeats himself to perfection.
Done CheckNotJoinedWithItself(const CsvTable& table, const GivenGrades& given) {
  if (given.size() < kFewestForJoinedFile) return {};
  const bool all_twice = std::all_of(given.begin(), given.end(), [](const auto& entry) {
    return entry.second.size() == 2 && entry.second[0].grade == entry.second[1].grade;
  });
  if (!all_twice) return {};
  return BadInput(fmt::format(
      "{}: every grade is there twice, so the file seems to be joined with itself; delete one half",
      table.file));
}

template <class Row>
Done CheckFilesDiffer(const std::map<Row, std::string>& seen, const Row& row,
                      const std::string& file, const std::string& what) {
  const auto found = seen.find(row);
  if (found == seen.end() || found->second == file) return {};
  return BadInput(
      fmt::format("{}: {} is in {} too; give each file once", file, what, found->second));
}

double MeanDifference(const std::vector<double>& a, const std::vector<double>& b) {
  double sum = 0;
  for (size_t i = 0; i < a.size(); ++i) sum += std::abs(a[i] - b[i]);
  return sum / static_cast<double>(a.size());
}

// Mean |difference| over all pairs of a grader's different coupons.
double MeanSpread(const std::map<CouponName, double>& grades) {
  std::vector<double> a;
  std::vector<double> b;
  for (auto i = grades.begin(); i != grades.end(); ++i) {
    for (auto j = grades.begin(); j != i; ++j) {
      a.push_back(i->second);
      b.push_back(j->second);
    }
  }
  return a.empty() ? 0 : MeanDifference(a, b);
}

Done CheckRepeatsAgree(const std::vector<Judgement>& judgements, const std::string& grader) {
  const RepeatGrades repeats = RepeatsOf(judgements, grader);
  if (repeats.first.size() < 3) return {};
  const double apart = MeanDifference(repeats.first, repeats.second);
  const double spread = MeanSpread(MeanGrades(judgements, grader));
  if (apart < spread) return {};
  return BadInput(fmt::format(
      "{} contradicts himself throughout: his {} repeats differ by {:.1f} points on average, and "
      "his grades of different coupons by {:.1f}; leave his grades out, or let him grade again",
      grader, repeats.first.size(), apart, spread));
}

// Triads of coupons that a grader compared in all three pairs, and how many of them are circles.
struct Triads {
  int all = 0;
  int circular = 0;
};

Triads CountTriads(const std::set<std::pair<CouponName, CouponName>>& better) {
  std::set<CouponName> names;
  for (const auto& [a, b] : better) names.insert({a, b});
  const auto beats = [&better](const CouponName& a, const CouponName& b) {
    return better.contains({a, b});
  };
  const auto compared = [&beats](const CouponName& a, const CouponName& b) {
    return beats(a, b) || beats(b, a);
  };
  Triads triads;
  for (auto a = names.begin(); a != names.end(); ++a) {
    for (auto b = std::next(a); b != names.end(); ++b) {
      if (!compared(*a, *b)) continue;
      for (auto c = std::next(b); c != names.end(); ++c) {
        if (!compared(*a, *c) || !compared(*b, *c)) continue;
        ++triads.all;
        const bool ab = beats(*a, *b);
        triads.circular += ab == beats(*b, *c) && ab == beats(*c, *a) ? 1 : 0;
      }
    }
  }
  return triads;
}

Done CheckNoCircles(const std::vector<Preference>& preferences) {
  std::map<std::string, std::set<std::pair<CouponName, CouponName>>> by_grader;
  for (const Preference& p : preferences) by_grader[p.grader].insert({p.better, p.worse});
  for (const auto& [grader, better] : by_grader) {
    const Triads triads = CountTriads(better);
    if (triads.all < 8 || 4 * triads.circular < triads.all) continue;
    return BadInput(fmt::format(
        "{} contradicts himself throughout: {} of {} triples of his comparisons run in a circle, "
        "as many as by chance; leave his comparisons out, or let him compare again",
        grader, triads.circular, triads.all));
  }
  return {};
}

std::set<CouponName> CouponsOf(const std::vector<Judgement>& judgements,
                               const std::vector<Preference>& preferences) {
  std::set<CouponName> coupons;
  for (const Judgement& judgement : judgements) coupons.insert(judgement.coupon);
  for (const Preference& preference : preferences) {
    coupons.insert({preference.better, preference.worse});
  }
  return coupons;
}

}  // namespace

std::string ToText(const CouponName& coupon) {
  return fmt::format("{} {}", coupon.batch, coupon.well);
}

Expected<std::vector<Judgement>> ParseGrades(const CsvTable& table) {
  const auto fields = Fields::Of(table, {"grader", "batch", "well", "grade"});
  if (!fields) return tl::unexpected(fields.error());
  std::vector<Judgement> judgements;
  GivenGrades given;
  for (size_t row = 0; row < table.rows.size(); ++row) {
    if (const Done full = fields->NoneEmpty(row); !full) return tl::unexpected(full.error());
    const auto grade = ReadGrade(table, row, fields->Text(row, "grade"));
    if (!grade) return tl::unexpected(grade.error());
    const Judgement judgement{fields->Text(row, "grader"),
                              {fields->Text(row, "batch"), fields->Text(row, "well")},
                              *grade};
    std::vector<Given>& earlier = given[{judgement.grader, judgement.coupon}];
    const Done fits = CheckRepeat(table, row, judgement, earlier);
    if (!fits) return tl::unexpected(fits.error());
    earlier.push_back({judgement.grade, row});
    judgements.push_back(judgement);
  }
  if (judgements.empty()) return BadInput(fmt::format("{}: there are no grades", table.file));
  const Done once = CheckNotJoinedWithItself(table, given);
  if (!once) return tl::unexpected(once.error());
  return judgements;
}

Expected<std::vector<Preference>> ParsePreferences(const CsvTable& table) {
  const auto fields =
      Fields::Of(table, {"grader", "better_batch", "better_well", "worse_batch", "worse_well"});
  if (!fields) return tl::unexpected(fields.error());
  std::vector<Preference> preferences;
  std::map<std::tuple<std::string, CouponName, CouponName>, size_t> given;
  for (size_t row = 0; row < table.rows.size(); ++row) {
    if (const Done full = fields->NoneEmpty(row); !full) return tl::unexpected(full.error());
    const Preference answer{fields->Text(row, "grader"),
                            {fields->Text(row, "better_batch"), fields->Text(row, "better_well")},
                            {fields->Text(row, "worse_batch"), fields->Text(row, "worse_well")}};
    if (answer.better == answer.worse) {
      return BadInput(
          fmt::format("{}: {} is compared with itself", table.Where(row), ToText(answer.better)));
    }
    const auto reverse = given.find({answer.grader, answer.worse, answer.better});
    if (reverse != given.end()) {
      return BadInput(fmt::format(
          "{}: {} says that {} is better than {}, but the reverse in line {}; delete one",
          table.Where(row), answer.grader, ToText(answer.better), ToText(answer.worse),
          table.lines[reverse->second]));
    }
    const auto [place, is_new] = given.insert({{answer.grader, answer.better, answer.worse}, row});
    if (!is_new) {
      return BadInput(fmt::format("{}: the same answer as in line {}; delete one", table.Where(row),
                                  table.lines[place->second]));
    }
    preferences.push_back(answer);
  }
  if (preferences.empty()) {
    return BadInput(fmt::format("{}: there are no comparisons", table.file));
  }
  return preferences;
}

Expected<std::vector<Judgement>> ReadGrades(const std::vector<std::filesystem::path>& files) {
  std::vector<Judgement> all;
  std::map<std::pair<std::string, CouponName>, std::string> seen;
  for (const auto& file : files) {
    const auto table = ReadCsv(file);
    if (!table) return tl::unexpected(table.error());
    const auto judgements = ParseGrades(*table);
    if (!judgements) return tl::unexpected(judgements.error());
    for (const Judgement& judgement : *judgements) {
      const std::pair key{judgement.grader, judgement.coupon};
      const std::string what =
          fmt::format("a grade of {} by {}", ToText(judgement.coupon), judgement.grader);
      const Done differ = CheckFilesDiffer(seen, key, table->file, what);
      if (!differ) return tl::unexpected(differ.error());
      seen[key] = table->file;
      all.push_back(judgement);
    }
  }
  return all;
}

Expected<std::vector<Preference>> ReadPreferences(const std::vector<std::filesystem::path>& files) {
  std::vector<Preference> all;
  std::map<std::tuple<std::string, CouponName, CouponName>, std::string> seen;
  for (const auto& file : files) {
    const auto table = ReadCsv(file);
    if (!table) return tl::unexpected(table.error());
    const auto preferences = ParsePreferences(*table);
    if (!preferences) return tl::unexpected(preferences.error());
    for (const Preference& answer : *preferences) {
      const std::tuple key{answer.grader, std::min(answer.better, answer.worse),
                           std::max(answer.better, answer.worse)};
      const std::string what =
          fmt::format("a comparison of {} with {} by {}", ToText(answer.better),
                      ToText(answer.worse), answer.grader);
      const Done differ = CheckFilesDiffer(seen, key, table->file, what);
      if (!differ) return tl::unexpected(differ.error());
      seen[key] = table->file;
      all.push_back(answer);
    }
  }
  return all;
}

std::vector<std::string> GraderNames(const std::vector<Judgement>& judgements) {
  std::set<std::string> names;
  for (const Judgement& judgement : judgements) names.insert(judgement.grader);
  return {names.begin(), names.end()};
}

std::map<CouponName, double> MeanGrades(const std::vector<Judgement>& judgements,
                                        const std::string& grader) {
  std::map<CouponName, std::pair<double, int>> sums;
  for (const Judgement& judgement : judgements) {
    if (judgement.grader != grader) continue;
    sums[judgement.coupon].first += judgement.grade;
    ++sums[judgement.coupon].second;
  }
  std::map<CouponName, double> means;
  for (const auto& [coupon, sum] : sums) means[coupon] = sum.first / sum.second;
  return means;
}

RepeatGrades RepeatsOf(const std::vector<Judgement>& judgements, const std::string& grader) {
  std::map<CouponName, double> first;
  RepeatGrades repeats;
  for (const Judgement& judgement : judgements) {
    if (judgement.grader != grader) continue;
    const auto [place, is_new] = first.insert({judgement.coupon, judgement.grade});
    if (is_new) continue;
    repeats.coupons.push_back(judgement.coupon);
    repeats.first.push_back(place->second);
    repeats.second.push_back(judgement.grade);
  }
  return repeats;
}

Done CheckCouponsKnown(const std::vector<Judgement>& judgements,
                       const std::vector<Preference>& preferences,
                       const std::set<CouponName>& known) {
  std::vector<std::string> foreign;
  for (const CouponName& coupon : CouponsOf(judgements, preferences)) {
    if (!known.contains(coupon)) foreign.push_back(ToText(coupon));
  }
  if (foreign.empty()) return {};
  return BadInput(fmt::format(
      "graded, but not in the results: {}; give the folders of all graded batches, or correct the "
      "names",
      fmt::join(foreign, ", ")));
}

Done CheckGradesTeach(const std::vector<Judgement>& judgements,
                      const std::vector<Preference>& preferences) {
  constexpr size_t kFewest = 6;
  const size_t count = CouponsOf(judgements, preferences).size();
  if (count < kFewest) {
    return BadInput(fmt::format(
        "{} coupons are graded; a scale needs at least {}, from bad to good", count, kFewest));
  }
  const bool alike = preferences.empty() &&
                     std::all_of(judgements.begin(), judgements.end(), [&](const Judgement& j) {
                       return j.grade == judgements.front().grade;
                     });
  if (alike) {
    return BadInput(fmt::format(
        "all grades are {}, which teaches nothing; grade coupons that differ, from bad to good",
        judgements.front().grade));
  }
  for (const std::string& grader : GraderNames(judgements)) {
    if (Done steady = CheckRepeatsAgree(judgements, grader); !steady) return steady;
  }
  return CheckNoCircles(preferences);
}

}  // namespace laygauge
