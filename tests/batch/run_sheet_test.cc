#include "batch/run_sheet.h"

#include <gtest/gtest.h>
#include <unistd.h>

#include <array>
#include <fstream>

#include "report/result.h"
#include "support/doc_example.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

class RunSheetTest : public testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::path(testing::TempDir()) / ("run_sheet_test." + std::to_string(::getpid()));
    fs::create_directories(folder_);
  }
  void TearDown() override { fs::remove_all(folder_); }

  fs::path File(const std::string& text) const {
    const fs::path path = folder_ / "f.csv";
    std::ofstream(path) << text;
    return path;
  }
  std::string RunsMessage(const std::string& text) const {
    const auto sheet = ReadRunSheet(File(text), FixedResultColumns());
    return sheet ? "" : sheet.error().message.substr(folder_.string().size() + 1);
  }
  std::string PhotosMessage(const std::string& text) const {
    const auto list = ReadPhotoList(File(text));
    return list ? "" : list.error().message.substr(folder_.string().size() + 1);
  }

  fs::path folder_;
};

TEST_F(RunSheetTest, ReadsTheExampleOfTheDocs) {
  const auto sheet = ReadRunSheet(File(DocExample("formats.md", "Run sheet")), {});
  ASSERT_TRUE(sheet) << sheet.error().message;
  EXPECT_EQ(sheet->setting_columns,
            (std::vector<std::string>{"line_width_mm", "flow_pct", "speed_mm_s", "remark"}));
  EXPECT_EQ(sheet->SettingsOf("b1", "A2").back(), "first layer reprinted, twice");
  EXPECT_EQ(sheet->SettingsOf("b9", "A2"), std::vector<std::string>(4));
}

TEST_F(RunSheetTest, SaysFileAndLineOfWhatIsWrong) {
  EXPECT_EQ(RunsMessage("batch,flow\nb1,3\n"),
            "f.csv: the column \"well\" is missing; the file has: batch, flow");
  EXPECT_EQ(RunsMessage("batch,well\nb1,A1\nb1,A1\n"),
            "f.csv, line 3: well A1 of batch b1 is listed twice");
  EXPECT_EQ(RunsMessage("batch,well\nb1,\n"), "f.csv, line 2: batch and well may not be empty");
  EXPECT_EQ(RunsMessage("batch,well,score\nb1,A1,3\n"),
            "f.csv: the column \"score\" has the name of a column of the result; rename it");
}

TEST_F(RunSheetTest, ReadsThePhotoListOfTheDocs) {
  const auto list = ReadPhotoList(File(DocExample("formats.md", "Photo list")));
  ASSERT_TRUE(list) << list.error().message;
  EXPECT_EQ(list->EntryOf("some/where/d3.jpg").batch, "b2");
  EXPECT_EQ(list->EntryOf("some/where/d3.jpg").filament, "gray");
  EXPECT_EQ(list->EntryOf("other.jpg").batch, "other");  // not listed: a batch of its own
}

TEST_F(RunSheetTest, SaysWhatIsWrongWithAPhotoList) {
  EXPECT_EQ(PhotosMessage("photo,take\na.jpg,1\n"),
            "f.csv: the column \"batch\" is missing; the file has: photo, take");
  EXPECT_EQ(PhotosMessage("photo,batch\na.jpg,b1\nx/a.jpg,b2\n"),
            "f.csv, line 3: the photo a.jpg is listed twice");
  EXPECT_EQ(PhotosMessage("photo,batch\na.jpg,\n"),
            "f.csv, line 2: photo and batch may not be empty");
}

}  // namespace
}  // namespace laygauge
