#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>
#include <opencv2/core.hpp>

#include "base/file.h"
#include "cli/run_with.h"
#include "report/encode_png.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

// A folder of results with three coupons of batch b1, one more that is to be photographed again.
class GradeCommandTest : public ::testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::temp_directory_path() / ("laygauge-grade-" + std::to_string(::getpid()));
    fs::create_directories(folder_ / "pictures");
    Write("scores.csv",
          "batch,well,status\nb1,A1,ok\nb1,A2,ok\nb1,A3,ok\nb1,A1,ok\nb1,B1,retake\n");
    for (const char* well : {"A1", "A2", "A3"}) {
      Write("pictures/" + PictureName("b1", well), EncodePng(cv::Mat::zeros(8, 8, CV_8UC1), 20));
    }
  }
  void TearDown() override { fs::remove_all(folder_); }
  void Write(const std::string& name, const std::string& bytes) const {
    ASSERT_TRUE(WriteFileWhole(folder_ / name, bytes));
  }
  [[nodiscard]] Outcome Grade(const std::vector<std::string>& options) const {
    std::vector<std::string> arguments{"grade", folder_.string()};
    arguments.insert(arguments.end(), options.begin(), options.end());
    return RunWith(arguments);
  }
  // One sentence with `part`, that exit code, and no page.
  void ExpectRefused(const std::vector<std::string>& options, ExitCode code,
                     const std::string& part) const {
    const Outcome outcome = Grade(options);
    EXPECT_EQ(outcome.code, code) << outcome.err;
    EXPECT_TRUE(IsOneLine(outcome.err)) << outcome.err;
    EXPECT_NE(outcome.err.find(part), std::string::npos) << outcome.err;
    EXPECT_EQ(outcome.out, "");
    EXPECT_FALSE(fs::exists(folder_ / "grading.html"));
  }

  fs::path folder_;
};

TEST_F(GradeCommandTest, WritesAPageAndSaysWhatIsOnIt) {
  const Outcome outcome = Grade({"--repeats", "0", "--seed", "12"});
  EXPECT_EQ(outcome.code, kExitDone) << outcome.err;
  EXPECT_EQ(outcome.err, "");
  // Two takes of A1 are one coupon; B1 was not measured.
  EXPECT_NE(outcome.out.find("3 coupons, 3 judgements, order by seed 12"), std::string::npos)
      << outcome.out;
  EXPECT_TRUE(fs::exists(folder_ / "grading.html"));
}

TEST_F(GradeCommandTest, NotesPairsThatCannotOrderAll) {
  const Outcome few = Grade({"--pairs", "--count", "1"});
  EXPECT_EQ(few.code, kExitDone);
  EXPECT_NE(few.err.find("cannot tie 3 coupons"), std::string::npos) << few.err;
  EXPECT_EQ(Grade({"--pairs", "--count", "2"}).err, "");
}

TEST_F(GradeCommandTest, RefusesWrongOptions) {
  ExpectRefused({"--repeats", "-1"}, kExitWrongUse, "repeats");
  ExpectRefused({"--pairs", "--count", "0"}, kExitWrongUse, "pairs");
  ExpectRefused({"--suggest", "1"}, kExitWrongUse, "--suggest 1");
}

TEST_F(GradeCommandTest, RefusesResultsItCannotUse) {
  // The shipped scale needs metrics that this table lacks.
  ExpectRefused({"--suggest", "2"}, kExitBadInput, "is missing");
  ExpectRefused({"--suggest", "2", "--scale", "none.json"}, kExitBadInput, "none.json");
  fs::remove(folder_ / "pictures/b1-A2.png");
  ExpectRefused({}, kExitBadInput, "batch b1, well A2 is missing; score again with --pictures all");
  Write("pictures/b1-A2.png", "no picture");
  ExpectRefused({}, kExitBadInput, "not a picture that laygauge wrote");
  Write("scores.csv", "batch,well,status\nb1,A1,ok\n");
  ExpectRefused({}, kExitBadInput, "1 coupon with status ok");
  Write("scores.csv", "batch,status\nb1,ok\n");
  ExpectRefused({}, kExitBadInput, "\"well\" is missing");
  Write("scores.csv",
        "batch,well,status\nGr\xF6\xDF"
        "e,A1,ok\n");
  ExpectRefused({}, kExitBadInput, "not UTF-8");
  fs::remove(folder_ / "scores.csv");
  ExpectRefused({}, kExitBadInput, "scores.csv");
}

TEST_F(GradeCommandTest, SaysWhereItCannotWrite) {
  ExpectRefused({"--out", (folder_ / "none/x.html").string()}, kExitCannotWrite, "x.html");
}

}  // namespace
}  // namespace laygauge
