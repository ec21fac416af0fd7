#include "report/grading_page.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <map>
#include <numeric>
#include <set>

#include "base/error.h"

namespace laygauge {
namespace {

TEST(GradingOrder, ShowsEveryCouponOnceAndSomeAgainMuchLater) {
  GradingPageOptions options;
  options.repeats = 4;
  for (options.seed = 1; options.seed <= 50; ++options.seed) {
    const auto items = GradingOrder(15, options);
    ASSERT_EQ(items.size(), 19U);
    std::map<int, std::vector<size_t>> places;
    for (size_t i = 0; i < items.size(); ++i) {
      ASSERT_EQ(items[i].size(), 1U);
      places[items[i][0]].push_back(i);
    }
    EXPECT_EQ(places.size(), 15U);
    size_t twice = 0;
    for (const auto& [coupon, at] : places) {
      if (at.size() == 1) continue;
      ASSERT_EQ(at.size(), 2U);
      ++twice;
      EXPECT_GE(at[1] - at[0], 15U / 3);  // at least a third of the page later
    }
    EXPECT_EQ(twice, 4U);
  }
}

TEST(GradingOrder, IsTheSameForOneSeedAndAnotherForTheNext) {
  GradingPageOptions options;
  const auto first = GradingOrder(15, options);
  EXPECT_EQ(GradingOrder(15, options), first);
  options.seed = 2;
  EXPECT_NE(GradingOrder(15, options), first);
}

TEST(GradingOrder, PairsConnectAllCouponsAndNeverComeTwice) {
  GradingPageOptions options;
  options.mode = GradingMode::kPairs;
  options.pairs = 40;
  for (options.seed = 1; options.seed <= 50; ++options.seed) {
    const auto items = GradingOrder(15, options);
    ASSERT_EQ(items.size(), 40U);
    std::set<std::pair<int, int>> seen;
    std::map<int, int> shown;
    std::vector<int> group(15);
    std::iota(group.begin(), group.end(), 0);
    for (const auto& item : items) {
      ASSERT_EQ(item.size(), 2U);
      EXPECT_TRUE(seen.insert(std::minmax(item[0], item[1])).second);
      ++shown[item[0]];
      ++shown[item[1]];
      const int joined = group[static_cast<size_t>(item[0])];
      std::replace(group.begin(), group.end(), joined, int{group[static_cast<size_t>(item[1])]});
    }
    EXPECT_TRUE(std::all_of(group.begin(), group.end(), [&](int g) { return g == group[0]; }));
    // 80 showings over 15 coupons: 5.33 each; whole rings give 2 a coupon, the last one is cut.
    for (const auto& [coupon, count] : shown) {
      EXPECT_GE(count, 2);
      EXPECT_LE(count, 8);
    }
  }
  options.pairs = 1000;
  EXPECT_EQ(GradingOrder(4, options).size(), 6U);  // 4 * 3 / 2: there are no more
}

TEST(GradingPage, CarriesPicturesAndNothingFromOutside) {
  const std::vector<GradingCoupon> coupons{{"b1", "A1", "foobar", 44},
                                           {"b</script>", "A2", "f", 44}};
  const std::string html = FormatGradingPage(coupons, {});
  EXPECT_NE(html.find("\"Zm9vYmFy\""), std::string::npos);  // RFC 4648, section 10: "foobar"
  EXPECT_NE(html.find("\"Zg==\""), std::string::npos);      // RFC 4648, section 10: "f"
  EXPECT_EQ(html.find("http:"), std::string::npos);
  EXPECT_EQ(html.find("https:"), std::string::npos);
  EXPECT_EQ(html.find("b</script>"), std::string::npos);
  EXPECT_EQ(html.find("/*PAGE*/"), std::string::npos);
  EXPECT_EQ(html.find("/*SCRIPT*/"), std::string::npos);
}

TEST(GradingPage, RefusesOptionsOutOfRange) {
  GradingPageOptions options;
  EXPECT_NO_THROW(options.Check());
  options.repeats = -1;
  EXPECT_THROW(options.Check(), BadOption);
  options.repeats = 0;
  options.pairs = 0;
  EXPECT_THROW(options.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
