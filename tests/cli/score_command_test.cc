#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>
#include <fstream>
#include <nlohmann/json.hpp>
#include <opencv2/core.hpp>
#include <opencv2/imgproc.hpp>

#include "base/csv.h"
#include "base/file.h"
#include "cli/run_with.h"
#include "photo/photo.h"
#include "report/encode_png.h"
#include "support/encode.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

const fs::path& Samples() {
  static const fs::path samples = fs::path(LAYGAUGE_SOURCE_DIR) / "sample-images";
  return samples;
}

class ScoreCommandTest : public testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::temp_directory_path() / ("laygauge-score-" + std::to_string(::getpid()));
    fs::create_directories(folder_);
  }
  void TearDown() override { fs::remove_all(folder_); }

  [[nodiscard]] std::string In(const std::string& name) const { return (folder_ / name).string(); }
  std::string Write(const std::string& name, const std::string& bytes) const {
    std::ofstream(In(name), std::ios::binary) << bytes;
    return In(name);
  }
  std::string WritePicture(const std::string& name, const cv::Mat& gray) const {
    return Write(name, EncodePng(gray.clone(), 0));
  }
  // The luma of d2.jpg: six coupons on sheet a5-6.
  static const cv::Mat& D2() {
    static const cv::Mat luma = ReadPhoto(Samples() / "d2.jpg").value().encoded;
    return luma;
  }
  // Refused with exit code 3 in one sentence that contains `part`; nothing is left behind.
  void ExpectRefused(std::vector<std::string> arguments, const std::string& part) const {
    arguments.insert(arguments.begin(), "score");
    arguments.insert(arguments.end(), {"--out", In("out")});
    const Outcome outcome = RunWith(arguments);
    EXPECT_EQ(outcome.code, kExitBadInput) << outcome.err;
    EXPECT_TRUE(IsOneLine(outcome.err)) << outcome.err;
    EXPECT_NE(outcome.err.find(part), std::string::npos) << outcome.err;
    EXPECT_EQ(outcome.out, "");
    EXPECT_FALSE(fs::exists(In("out")));
  }

  fs::path folder_;
};

TEST_F(ScoreCommandTest, FilesThatAreNoPhotographs) {
  ExpectRefused({Write("text.jpg", "a letter\n")}, "text.jpg: ");
  ExpectRefused({Write("empty.jpg", "")}, "empty.jpg: ");
  ExpectRefused({In("missing.jpg")}, "missing.jpg: no such file");
  ExpectRefused({folder_.string()}, "is a folder");
  const std::string whole = ReadFile(Samples() / "d2.jpg").value();
  ExpectRefused({Write("cut.jpg", whole.substr(0, whole.size() / 2))}, "cut.jpg: ");
}

TEST_F(ScoreCommandTest, PhotographsThatCannotBeMeasured) {
  const int middle = D2().rows / 2;
  ExpectRefused({WritePicture("bare.png", cv::Mat(900, 1200, CV_8UC1, cv::Scalar(200)))},
                "bare.png: ");
  // The sheet's upper edge alone has three whole markers at most in this strip.
  ExpectRefused({WritePicture("strip.png", D2()(cv::Rect(0, 0, D2().cols / 2, middle / 2)))},
                "strip.png: ");
  cv::Mat mirrored;
  cv::flip(D2(), mirrored, 1);
  ExpectRefused({WritePicture("mirrored.png", mirrored)}, "mirror");
  cv::Mat small;
  cv::resize(D2(), small, {}, 0.5, 0.5, cv::INTER_AREA);  // d2 shows about 17 px/mm
  ExpectRefused({WritePicture("small.png", small)}, "at least 10 are needed");
  ExpectRefused({(Samples() / "d2.jpg").string(), "--sheet", "a4-15"}, "a4-15");
}

TEST_F(ScoreCommandTest, CoarseJpegsAreRefusedOrNoted) {
  ExpectRefused({Write("coarse.jpg", support::EncodeJpeg(D2(), {.quality = 40}))},
                "coarse.jpg: saved as JPEG of quality 40");
  const auto noted = Write("noted.jpg", support::EncodeJpeg(D2(), {.quality = 65}));
  const Outcome outcome = RunWith({"score", noted, "--out", In("out"), "--pictures", "none"});
  EXPECT_EQ(outcome.code, kExitDone) << outcome.err;
  EXPECT_NE(outcome.err.find("noted.jpg: saved as JPEG of quality 65"), std::string::npos);
}

TEST_F(ScoreCommandTest, DescriptionsThatAreWrong) {
  const std::string photo = (Samples() / "d2.jpg").string();
  const std::string sheet =
      ReadFile(fs::path(LAYGAUGE_SOURCE_DIR) / "calibration/sheets/a5-6.json").value();
  ExpectRefused({photo, "--sheet", "a9"}, "neither a file nor a shipped sheet");
  ExpectRefused({photo, "--sheet", Write("cut.json", sheet.substr(0, 300))}, "cut.json, line ");
  auto twice = nlohmann::json::parse(sheet);
  twice["wells"][1]["name"] = "A1";
  ExpectRefused({photo, "--sheet", Write("twice.json", twice.dump())}, "A1");
  auto text = nlohmann::json::parse(sheet);
  text["wells"][1]["width_mm"] = "46";
  ExpectRefused({photo, "--sheet", Write("text.json", text.dump())}, "wells[1].width_mm");
  ExpectRefused({photo, "--coupon", "disc"}, "neither a file nor a shipped coupon");
  ExpectRefused({photo, "--bar-mm", "12"}, "--bar-mm 12");
  ExpectRefused({photo, "--runs", Write("runs.csv", "batch,well\nd2,A1\nd2,C9\n")},
                "runs.csv, line 3: well \"C9\" is not on sheet a5-6");
  ExpectRefused({photo, "--runs", Write("runs2.csv", "batch,well\nd2,A1\nd2,A1\n")},
                "runs2.csv, line 3: well A1 of batch d2 is listed twice");
  ExpectRefused({photo, "--photos", Write("photos.csv", "photo\nd2.jpg\n")}, "photos.csv: ");
}

TEST_F(ScoreCommandTest, AnOutputThatCannotBeWritten) {
  Write("taken", "a file");
  const Outcome outcome =
      RunWith({"score", (Samples() / "d2.jpg").string(), "--out", In("taken/inside")});
  EXPECT_EQ(outcome.code, kExitCannotWrite);
  EXPECT_TRUE(IsOneLine(outcome.err)) << outcome.err;
}

TEST_F(ScoreCommandTest, TheGoodPhotosAreScoredAndTheBadOneIsReported) {
  const Outcome outcome =
      RunWith({"score", Write("bad.jpg", "no picture"), (Samples() / "d2.jpg").string(), "--runs",
               Write("runs.csv", "batch,well,flow\nd2,A1,97\nd2,A2,\"9,5\"\n"), "--out", In("out"),
               "--loss"});
  EXPECT_EQ(outcome.code, kExitDoneInPart);
  EXPECT_NE(outcome.err.find("bad.jpg"), std::string::npos);
  EXPECT_NE(outcome.out.find("scores.csv"), std::string::npos);

  const auto table = ReadCsv(In("out/scores.csv"));
  ASSERT_TRUE(table) << table.error().message;
  ASSERT_EQ(table->rows.size(), 6U);
  EXPECT_EQ(table->columns[2], "flow");
  EXPECT_EQ(table->rows[0][2], "97");
  EXPECT_EQ(table->rows[1][2], "9,5");  // as it was
  const size_t score = table->NeedColumn("score").value();
  const size_t loss = table->NeedColumn("loss").value();
  for (const auto& row : table->rows) {
    // Both are written with four digits.
    EXPECT_NEAR(*ParseNumber(row[score]) + *ParseNumber(row[loss]), 10, 0.01);
    EXPECT_TRUE(fs::exists(In("out/pictures/d2-" + row[1] + ".png")));
    EXPECT_TRUE(fs::exists(In("out/pictures/d2-" + row[1] + "-found.png")));
  }
  EXPECT_TRUE(nlohmann::json::accept(ReadFile(In("out/records/d2.json")).value()));
}

TEST_F(ScoreCommandTest, ThreadsAreNoMoreThanTheCores) {
  RunWith({"score", In("missing.jpg"), "--threads", "1000", "--out", In("out")});
  EXPECT_EQ(cv::getNumThreads(), cv::getNumberOfCPUs());
  cv::setNumThreads(-1);
}

TEST_F(ScoreCommandTest, PrintsJsonForPrograms) {
  const Outcome outcome = RunWith({"score", (Samples() / "d2.jpg").string(), "--json", "--pictures",
                                   "none", "--out", In("out")});
  ASSERT_EQ(outcome.code, kExitDone) << outcome.err;
  const auto json = nlohmann::json::parse(outcome.out);
  ASSERT_EQ(json.at("coupons").size(), 6U);
  EXPECT_TRUE(json.at("coupons")[0].at("score").is_number());
  EXPECT_FALSE(fs::exists(In("out/pictures")));
}

}  // namespace
}  // namespace laygauge
