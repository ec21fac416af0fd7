#include "grade/scale_file.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <functional>
#include <nlohmann/json.hpp>

#include "base/file.h"
#include "grade/scale_example.h"

namespace laygauge {
namespace {

using nlohmann::json;
using ::testing::AllOf;
using ::testing::HasSubstr;

TEST(ScaleFile, WrittenAndReadAgain) {
  const std::string text = FormatScale(ExampleScale());
  const Scale scale = ParseScale(text, "s.json").value();
  EXPECT_EQ(FormatScale(scale), text);
  EXPECT_EQ(scale.terms[1].range.metric_version, 3);
  EXPECT_EQ(scale.terms[1].when_missing, WhenMissing::kTypical);
  EXPECT_EQ(scale.covariance(1, 1), 0.09);
  EXPECT_EQ(scale.coupons[0].well, "A1");
}

// The file in the tree is the one in the program, byte for byte, and readable.
TEST(ScaleFile, ShippedScaleIsTheFile) {
  const EmbeddedFile& embedded = EmbeddedScales().front();
  const auto text = ReadFile(std::string(LAYGAUGE_SOURCE_DIR "/calibration/scales/") +
                             std::string(embedded.name));
  ASSERT_TRUE(text);
  EXPECT_EQ(embedded.text, *text);
  EXPECT_EQ(FormatScale(ShippedScale()), *text);
  EXPECT_FALSE(ShippedScale().remark.empty());  // it must be called a start
  EXPECT_TRUE(CheckMetricVersions(ShippedScale(), MetricTable(), embedded.name));
}

std::string Edited(const std::function<void(json&)>& edit) {
  json document = json::parse(FormatScale(ExampleScale()));
  edit(document);
  return document.dump(1);
}

struct Nonsense {
  std::string what;
  std::function<void(json&)> edit;
  std::string said;
};

// Hand edits, each with its own sentence that names file and key.
TEST(ScaleFile, NonsenseIsRefusedWithTheKey) {
  const std::vector<Nonsense> cases{
      {"unknown key", [](json& j) { j["colour"] = 1; }, "colour: this key is not known"},
      {"unknown key of a term", [](json& j) { j["terms"][0]["power"] = 1; }, "terms[0].power"},
      {"missing key", [](json& j) { j.erase("residual_sd"); }, "residual_sd: is missing"},
      {"missing weight", [](json& j) { j["terms"][1].erase("weight"); }, "terms[1].weight"},
      {"negative weight", [](json& j) { j["terms"][1]["weight"] = -1; }, "-1 is negative"},
      {"wrong format", [](json& j) { j["format"] = 99; }, "format: 99 is not known"},
      {"a word for a number", [](json& j) { j["terms"][0]["weight"] = "big"; }, "\"big\""},
      {"unknown transform", [](json& j) { j["terms"][0]["transform"] = "cubic"; }, "cubic"},
      {"half of nothing", [](json& j) { j["terms"][0]["half"] = 0; }, "terms[0].half"},
      {"empty range", [](json& j) { j["terms"][0]["low"] = 11; }, "above `high`"},
      {"a feature twice", [](json& j) { j["terms"][1]["feature"] = "gap_area_pct"; }, "twice"},
      {"no terms", [](json& j) { j["terms"] = json::array(); }, "at least one term"},
      {"short covariance", [](json& j) { j["covariance_lower"] = {1.0}; }, "3 numbers"},
      {"not a covariance",
       [](json& j) {
         j["covariance_lower"] = {1.0, 5.0, 1.0};
       },
       "negative variance"},
      {"no residual", [](json& j) { j["residual_sd"] = 0; }, "residual_sd"},
      {"score of 11", [](json& j) { j["coupons"][0]["score"] = 11; }, "outside 1 to 10"},
      {"changed weight", [](json& j) { j["terms"][0]["weight"] = 2.5; }, "changed after"},
      {"no panel", [](json& j) { j["panel"] = 0; }, "panel"},
  };
  for (const Nonsense& nonsense : cases) {
    const auto scale = ParseScale(Edited(nonsense.edit), "s.json");
    ASSERT_FALSE(scale) << nonsense.what;
    EXPECT_THAT(scale.error().message, AllOf(HasSubstr("s.json"), HasSubstr(nonsense.said)))
        << nonsense.what;
  }
}

// What a first calibration starts from may be written by hand: no coupons, no hash.
TEST(ScaleFile, ABareScaleNeedsNoHash) {
  const auto bare = [](json& j) {
    j["coupons"] = json::array();
    j["content"] = "";
  };
  EXPECT_TRUE(ParseScale(Edited(bare), "s.json"));
  EXPECT_FALSE(ParseScale(Edited([](json& j) { j["content"] = ""; }), "s.json"));
}

TEST(ScaleFile, TruncatedTextIsRefusedAtAnyLength) {
  const std::string text = FormatScale(ExampleScale());
  for (size_t length = 0; length + 2 < text.size(); length += 7) {
    EXPECT_FALSE(ParseScale(text.substr(0, length), "s.json")) << length;
  }
}

}  // namespace
}  // namespace laygauge
