#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>
#include <sstream>

#include "base/csv.h"
#include "base/file.h"
#include "cli/program.h"
#include "grade/results.h"
#include "grade/scale_file.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;
using ::testing::HasSubstr;

struct Outcome {
  int code;
  std::string out;
  std::string err;
};

Outcome RunWith(const std::vector<std::string>& arguments) {
  std::ostringstream out;
  std::ostringstream err;
  const int code = RunProgram(arguments, {out, err});
  return {code, out.str(), err.str()};
}

// A folder with scores.csv of ten coupons, whose features rise together from the shipped scale's
// lowest to its highest, and grades that fall.
class CalibrateTest : public ::testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::temp_directory_path() / ("laygauge-calibrate-" + std::to_string(::getpid()));
    fs::create_directories(folder_);
    std::vector<std::string> columns{"batch", "well", "status"};
    std::vector<FeatureRange> ranges = ShippedScale().watched;
    for (const ScaleTerm& term : ShippedScale().terms) ranges.push_back(term.range);
    for (const FeatureRange& range : ranges) columns.push_back(range.feature);
    std::vector<std::vector<std::string>> rows;
    for (int i = 0; i < 10; ++i) {
      rows.push_back({"b1", "A" + std::to_string(i), "ok"});
      for (const FeatureRange& range : ranges) {
        rows.back().push_back(std::to_string(range.low + (range.high - range.low) * i / 9));
      }
    }
    Write("scores.csv", FormatCsv(columns, rows));
    grades_ = "grader,batch,well,grade\n";
    for (int i = 0; i < 10; ++i) {
      grades_ += "ash,b1,A" + std::to_string(i) + "," + std::to_string(9.5 - 0.5 * i) + "\n";
    }
    Write("grades.csv", grades_);
  }
  void TearDown() override { fs::remove_all(folder_); }
  void Write(const std::string& name, const std::string& text) const {
    ASSERT_TRUE(WriteFileWhole(In(name), text));
  }
  [[nodiscard]] std::string In(const std::string& name) const { return (folder_ / name).string(); }
  [[nodiscard]] Outcome Calibrate() const {
    return RunWith({"calibrate", "--results", folder_.string(), "--grades", In("grades.csv"),
                    "--out", In("mine.json")});
  }

  fs::path folder_;
  std::string grades_;
};

TEST_F(CalibrateTest, WritesAScaleWithItsReport) {
  const Outcome outcome = Calibrate();
  ASSERT_EQ(outcome.code, kExitDone) << outcome.err;
  EXPECT_THAT(outcome.out, HasSubstr("Left out, then foretold"));
  EXPECT_THAT(outcome.out, HasSubstr("pictures/b1-A"));
  const auto scale = ReadScale(In("mine.json"));
  ASSERT_TRUE(scale) << scale.error().message;
  EXPECT_EQ(scale->name, "mine");
  EXPECT_EQ(scale->coupons.size(), 10U);
  EXPECT_THAT(scale->report, ::testing::Contains(HasSubstr("Strictness")));
}

TEST_F(CalibrateTest, BadInputIsOneSentenceAndWritesNothing) {
  struct Bad {
    std::string rows;
    std::string said;
  };
  for (const Bad& bad : {Bad{"ash,b1,Z1,5\n", "b1 Z1"}, Bad{"ash,b1,A1,12\n", "outside 1 to 10"},
                         Bad{"ash,b1,A1\n", "grades.csv"}}) {
    Write("grades.csv", grades_ + bad.rows);
    const Outcome outcome = Calibrate();
    EXPECT_EQ(outcome.code, kExitBadInput) << bad.said;
    EXPECT_THAT(outcome.err, HasSubstr(bad.said));
    EXPECT_EQ(outcome.err.find('\n'), outcome.err.size() - 1);
    EXPECT_EQ(outcome.out, "");
    EXPECT_FALSE(fs::exists(In("mine.json")));
  }
}

TEST_F(CalibrateTest, NeedsGradesOrPairs) {
  const Outcome outcome =
      RunWith({"calibrate", "--results", folder_.string(), "--out", In("mine.json")});
  EXPECT_EQ(outcome.code, kExitWrongUse);
  EXPECT_THAT(outcome.err, HasSubstr("--grades or --pairs"));
}

TEST_F(CalibrateTest, AgreePrintsAndWritesTheSameFigures) {
  std::string second = grades_;
  for (int i = 0; i < 10; ++i) {
    second += "birch,b1,A" + std::to_string(i) + "," + std::to_string(9.0 - 0.5 * i) + "\n";
  }
  Write("grades.csv", second);
  const Outcome outcome = RunWith({"agree", In("grades.csv"), "--json", In("agree.json")});
  ASSERT_EQ(outcome.code, kExitDone) << outcome.err;
  EXPECT_THAT(outcome.out, HasSubstr("ICC(3,1)    1.00"));  // they differ by a constant
  EXPECT_THAT(ReadFile(In("agree.json")).value(), HasSubstr("\"form\": \"ICC(3,1)\""));
}

}  // namespace
}  // namespace laygauge
