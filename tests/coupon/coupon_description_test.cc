#include "coupon/coupon_description.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <fstream>
#include <sstream>

namespace laygauge {
namespace {

using ::testing::ElementsAre;
using ::testing::HasSubstr;

// A coupon whose one key is replaced by `json`, or left out when that is empty.
std::string WithKey(const std::string& key, const std::string& json) {
  const std::vector<std::pair<std::string, std::string>> good = {
      {"coupon", "\"c\""},   {"outline_mm", "[[-10,-5],[10,-5],[10,5],[-10,5]]"},
      {"thickness_mm", "2"}, {"layer_height_mm", "0.2"},
      {"wall_mm", "0.9"},    {"holes", "[{\"x_mm\":2,\"y_mm\":1,\"diameter_mm\":3}]"},
      {"lay_deg", "45"},
  };
  std::string text = "{";
  for (const auto& [name, value] : good) {
    const std::string& used = name == key ? json : value;
    if (used.empty()) continue;
    text += (text.size() > 1 ? ",\"" : "\"") + name + "\":" + used;
  }
  return text + "}";
}

std::string Refusal(const std::string& key, const std::string& json) {
  const auto coupon = ParseCoupon(WithKey(key, json), "c.json");
  return coupon ? "accepted" : coupon.error().message;
}

TEST(CouponDescription, TheShippedOneIsTheFile) {
  std::ifstream file(LAYGAUGE_SOURCE_DIR "/calibration/coupons/square-40.json");
  std::stringstream text;
  text << file.rdbuf();
  const auto coupon = ParseCoupon(text.str(), "square-40.json");
  ASSERT_TRUE(coupon) << coupon.error().message;
  ASSERT_EQ(ShippedCoupons().size(), 1U);
  EXPECT_EQ(FormatCoupon(ShippedCoupons()[0]), FormatCoupon(*coupon));
  EXPECT_EQ(coupon->name, "square-40");
  EXPECT_EQ(coupon->Bounds(), cv::Rect2d(-20, -20, 40, 40));
  ASSERT_EQ(coupon->holes.size(), 2U);
  EXPECT_EQ(coupon->holes[1].diameter_mm, 3.2);
  EXPECT_FALSE(coupon->lay_deg);
}

TEST(CouponDescription, WhatIsWrittenIsReadBack) {
  const auto first = ParseCoupon(WithKey("", ""), "c.json");
  ASSERT_TRUE(first) << first.error().message;
  const auto second = ParseCoupon(FormatCoupon(*first), "d.json");
  ASSERT_TRUE(second) << second.error().message;
  EXPECT_EQ(second->outline_mm, first->outline_mm);
  EXPECT_EQ(second->thickness_mm, 2);
  EXPECT_EQ(second->layer_height_mm, 0.2);
  EXPECT_EQ(second->wall_mm, 0.9);
  EXPECT_EQ(second->holes.at(0).x_mm, 2);
  EXPECT_EQ(second->holes.at(0).y_mm, 1);
  EXPECT_EQ(second->lay_deg, 45);
  EXPECT_TRUE(second->unknown_keys.empty());
}

TEST(CouponDescription, HolesAndLayMayBeLeftOut) {
  EXPECT_TRUE(ParseCoupon(WithKey("holes", ""), "c.json")->holes.empty());
  EXPECT_FALSE(ParseCoupon(WithKey("lay_deg", ""), "c.json")->lay_deg);
}

TEST(CouponDescription, ReportsUnknownKeys) {
  const auto coupon = ParseCoupon(
      WithKey("holes", "[{\"x_mm\":2,\"y_mm\":1,\"diameter_mm\":3,\"depth\":1}],\"colour\":1"),
      "c.json");
  ASSERT_TRUE(coupon) << coupon.error().message;
  EXPECT_THAT(coupon->unknown_keys, ElementsAre("c.json: holes[0].depth", "c.json: colour"));
}

TEST(CouponDescription, RefusesWithFileKeyAndRule) {
  EXPECT_THAT(Refusal("coupon", "\"\""), HasSubstr("c.json: coupon: a name was expected"));
  EXPECT_THAT(Refusal("coupon", "7"), HasSubstr("c.json: coupon: a text was expected"));
  EXPECT_THAT(Refusal("outline_mm", ""), HasSubstr("outline_mm"));
  EXPECT_THAT(Refusal("outline_mm", "[[0,0],[9,0]]"), HasSubstr("3 or more corners"));
  EXPECT_THAT(Refusal("outline_mm", "[[-9,-9],[9,9],[9,-9],[-9,9]]"), HasSubstr("crosses itself"));
  EXPECT_THAT(Refusal("outline_mm", "[[-9,-9],[-9,-9],[9,-9],[9,9]]"),
              HasSubstr("outline_mm[0]: this corner is the same"));
  EXPECT_THAT(Refusal("outline_mm", "[[0,0],[20,0],[20,20],[0,20]]"), HasSubstr("10.000, 10.000"));
  EXPECT_THAT(Refusal("outline_mm", "[[-1,-1],[1,-1],[1,1],[-1,1]]"), HasSubstr("2 x 2 mm"));
  EXPECT_THAT(Refusal("outline_mm", "[[0,0],[\"a\",0],[1,1]]"), HasSubstr("outline_mm[1]"));
  EXPECT_THAT(Refusal("thickness_mm", "0"), HasSubstr("thickness_mm: more than 0"));
  EXPECT_THAT(Refusal("thickness_mm", "\"2\""), HasSubstr("thickness_mm: a number was expected"));
  EXPECT_THAT(Refusal("layer_height_mm", "2.5"), HasSubstr("layer_height_mm: more than 0 and at"));
  EXPECT_THAT(Refusal("wall_mm", "-1"), HasSubstr("wall_mm: 0 or more"));
  EXPECT_THAT(Refusal("wall_mm", "5"), HasSubstr("wall_mm: 0 or more and less than 5"));
  EXPECT_THAT(Refusal("holes", "[{\"x_mm\":9,\"y_mm\":0,\"diameter_mm\":3}]"),
              HasSubstr("holes[0]: the hole must lie wholly inside"));
  EXPECT_THAT(Refusal("holes",
                      "[{\"x_mm\":0,\"y_mm\":0,\"diameter_mm\":3},"
                      "{\"x_mm\":2,\"y_mm\":0,\"diameter_mm\":3}]"),
              HasSubstr("holes[1]: the hole overlaps holes[0]"));
  EXPECT_THAT(Refusal("holes", "[{\"x_mm\":0,\"y_mm\":0}]"), HasSubstr("holes[0].diameter_mm"));
  EXPECT_THAT(Refusal("lay_deg", "180"), HasSubstr("lay_deg: 0 or more and less than 180"));
  EXPECT_THAT(ParseCoupon("{", "c.json").error().message, HasSubstr("c.json"));
  EXPECT_THAT(ReadCoupon("/nowhere/c.json").error().message, HasSubstr("/nowhere/c.json"));
}

}  // namespace
}  // namespace laygauge
