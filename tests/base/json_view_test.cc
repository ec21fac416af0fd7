#include "base/json_view.h"

#include <gtest/gtest.h>

namespace laygauge {
namespace {

// Reads {"name": TEXT, "size": NUMBER, "parts": [{"n": WHOLE}]} and returns the message, or "".
std::string Read(std::string_view text) {
  const auto read = ParseJson(text, "f.json", [](const JsonView& top) {
    (void)top.Text("name");
    (void)top.Number("size");
    for (const JsonView& part : top.Objects("parts")) {
      (void)part.Integer("n");
      part.NoOtherKeys();
    }
    top.NoOtherKeys();
    return true;
  });
  return read ? "" : read.error().message;
}

TEST(JsonView, ReadsWhatIsAsked) {
  EXPECT_EQ(Read(R"({"name": "a", "size": 1.5, "parts": [{"n": 1}, {"n": 2}]})"), "");
}

TEST(JsonView, NamesFileKeyAndExpectation) {
  EXPECT_EQ(Read(R"({"size": 1, "parts": []})"), "f.json: name: is missing");
  EXPECT_EQ(Read(R"({"name": 3, "size": 1, "parts": []})"),
            "f.json: name: a text was expected, not the whole number 3");
  EXPECT_EQ(Read(R"({"name": "a", "size": "1", "parts": []})"),
            "f.json: size: a number was expected, not the text \"1\"");
  EXPECT_EQ(Read(R"({"name": "a", "size": 1, "parts": [{"n": 1}, {"n": 1.5}]})"),
            "f.json: parts[1].n: a whole number was expected, not the number 1.5");
  EXPECT_EQ(Read(R"({"name": "a", "size": 1, "parts": [7]})"),
            "f.json: parts[0]: an object {…} was expected, not the whole number 7");
  EXPECT_EQ(Read(R"({"name": "a", "size": 1, "parts": [{"n": 1, "m": 2}]})"),
            "f.json: parts[0].m: this key is not known here");
  EXPECT_EQ(Read(R"({"name": "a", "size": 1, "parts": [{"n": 99999999999}]})"),
            "f.json: parts[0].n: a smaller whole number was expected, not 99999999999");
}

TEST(JsonView, NamesTheLineOfASyntaxError) {
  EXPECT_EQ(Read("{\"name\": \"a\",\n \"size\" 1}"),
            "f.json, line 2, column 9: not JSON; check for a missing comma, quote or bracket");
  EXPECT_EQ(Read(""),
            "f.json, line 1, column 1: not JSON; check for a missing comma, quote or "
            "bracket");
  EXPECT_EQ(Read(R"({"name": "a", "name": "b", "size": 1, "parts": []})"),
            "f.json: the key \"name\" is there twice in one object");
  EXPECT_EQ(Read("[]"), "f.json: an object {…} was expected, not a list");
}

TEST(JsonView, CollectsUnknownKeys) {
  const auto unknown = ParseJson(R"({"a": 1, "colour": 2})", "f.json", [](const JsonView& top) {
    (void)top.Number("a");
    return top.UnknownKeys();
  });
  ASSERT_TRUE(unknown);
  EXPECT_EQ(*unknown, std::vector<std::string>{"f.json: colour"});
}

}  // namespace
}  // namespace laygauge
