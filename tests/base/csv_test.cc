#include "base/csv.h"

#include <gtest/gtest.h>

namespace laygauge {
namespace {

// RFC 4180, section 2, rules 1 to 7: the record forms that it prints.
TEST(Csv, ReadsTheFormsOfRfc4180) {
  const auto table = ParseCsv("a,b,c\r\n\"aaa\",\"b\r\nbb\",\"c\"\"cc\"\r\nzzz,,xxx\r\n", "t.csv");
  ASSERT_TRUE(table) << table.error().message;
  EXPECT_EQ(table->columns, (std::vector<std::string>{"a", "b", "c"}));
  ASSERT_EQ(table->rows.size(), 2U);
  EXPECT_EQ(table->rows[0], (std::vector<std::string>{"aaa", "b\r\nbb", "c\"cc"}));
  EXPECT_EQ(table->rows[1], (std::vector<std::string>{"zzz", "", "xxx"}));
  EXPECT_EQ(table->Where(1), "t.csv, line 4");
}

TEST(Csv, WhatIsWrittenIsReadBack) {
  const std::vector<std::string> columns{"x", "with, comma"};
  const std::vector<std::vector<std::string>> rows{{"\"q\"", "line\nbreak"}, {"", " spaces "}};
  const auto table = ParseCsv(FormatCsv(columns, rows), "t.csv");
  ASSERT_TRUE(table) << table.error().message;
  EXPECT_EQ(table->columns, columns);
  EXPECT_EQ(table->rows, rows);
}

TEST(Csv, SkipsAByteOrderMarkAndBlankLinesAndNeedsNoLastNewline) {
  const auto table = ParseCsv(
      "\xEF\xBB\xBF"
      "a,b\n\n1,2\n\n3,4",
      "t.csv");
  ASSERT_TRUE(table) << table.error().message;
  ASSERT_EQ(table->rows.size(), 2U);
  EXPECT_EQ(table->Where(0), "t.csv, line 3");
  EXPECT_EQ(table->Where(1), "t.csv, line 5");
}

TEST(Csv, RefusesWithFileAndLine) {
  const auto message = [](std::string_view text) {
    return ParseCsv(text, "t.csv").error().message;
  };
  EXPECT_EQ(message(""), "t.csv: is empty; a header line with the column names was expected");
  EXPECT_EQ(message("a,a\n"), "t.csv, line 1: the column \"a\" is there twice");
  EXPECT_EQ(message("a,\n"), "t.csv, line 1: a column has no name");
  EXPECT_EQ(message("a,b\n1,2\n1\n"), "t.csv, line 3: 1 fields, but the header names 2");
  EXPECT_EQ(message("a,b\n1,\"2\n"), "t.csv, line 2: a quoted field is not closed");
  EXPECT_EQ(message("a,b\n1,2\"2\n"),
            "t.csv, line 2: not CSV: a quote stands where none may (RFC 4180)");
}

TEST(Csv, TakesUtf8AndNothingElse) {
  // Examples of RFC 3629, section 7, and the ends of each length (section 4).
  for (const std::string text :
       {"A\xE2\x89\xA2\xCE\x91.", "\xED\x95\x9C\xEA\xB5\xAD\xEC\x96\xB4", "\xF0\xA3\x8E\xB4",
        "\xC2\x80", "\xDF\xBF", "\xE0\xA0\x80", "\xED\x9F\xBF", "\xEE\x80\x80", "\xEF\xBF\xBF",
        "\xF0\x90\x80\x80", "\xF4\x8F\xBF\xBF"}) {
    const auto table = ParseCsv("a\n" + text, "t.csv");
    ASSERT_TRUE(table) << table.error().message;
    EXPECT_EQ(table->rows[0][0], text);
  }
  // Latin-1, an overlong slash and NUL (section 10), a surrogate, too far, cut short, a stray tail.
  for (const std::string text :
       {"Gr\xF6\xDF"
        "e",
        "\xC0\xAF", "\xC0\x80", "\xE0\x9F\xBF", "\xF0\x8F\xBF\xBF", "\xED\xA0\x80",
        "\xF4\x90\x80\x80", "\xF5\x80\x80\x80", "\xE2\x89", "\xF0\xA3\x8E", "\xA2", "\xFF\xFE"}) {
    const auto table = ParseCsv("a\nb\n" + text + "\n", "t.csv");
    ASSERT_FALSE(table);
    EXPECT_EQ(table.error().message, "t.csv, line 3: is not UTF-8; save the file as CSV in UTF-8");
  }
}

TEST(Csv, NumbersHaveAPointAndAreWhole) {
  EXPECT_EQ(ParseNumber("1.5"), 1.5);
  EXPECT_EQ(ParseNumber(" +2e3 "), 2000);
  EXPECT_FALSE(ParseNumber("1,5"));
  EXPECT_FALSE(ParseNumber("1.5 mm"));
  EXPECT_FALSE(ParseNumber("nan"));
  EXPECT_FALSE(ParseNumber(""));
}

}  // namespace
}  // namespace laygauge
