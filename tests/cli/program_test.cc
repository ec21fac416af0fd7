#include "cli/program.h"

#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>

#include "base/file.h"
#include "cli/run_with.h"
#include "sheet/sheet_description.h"
#include "support/doc_example.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

class ProgramTest : public ::testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::temp_directory_path() / ("laygauge-cli-" + std::to_string(::getpid()));
    fs::create_directories(folder_);
  }
  void TearDown() override { fs::remove_all(folder_); }
  [[nodiscard]] std::string In(const std::string& name) const { return (folder_ / name).string(); }
  [[nodiscard]] size_t FileCount() const {
    return static_cast<size_t>(
        std::distance(fs::directory_iterator(folder_), fs::directory_iterator()));
  }

  fs::path folder_;
};

TEST_F(ProgramTest, HelpAndVersionAreNoErrors) {
  for (const std::vector<std::string>& arguments :
       {std::vector<std::string>{"--help"}, {"sheet", "--help"}, {"--version"}}) {
    const Outcome outcome = RunWith(arguments);
    EXPECT_EQ(outcome.code, kExitDone);
    EXPECT_EQ(outcome.err, "");
    EXPECT_NE(outcome.out, "");
  }
  EXPECT_NE(RunWith({"--help"}).out.find("Exit codes"), std::string::npos);
}

TEST_F(ProgramTest, WrongUseIsOneLineAndCode2) {
  for (const std::vector<std::string>& arguments :
       {std::vector<std::string>{},
        {"shet"},
        {"sheet", "a6-2"},
        {"sheet", "--rows", "two", "--out", In("x.pdf")},
        {"sheet", "--rows", "9", "--out", In("x.pdf")},
        {"sheet", "--page", "a4x", "--out", In("x.pdf")},
        {"sheet", "--rows", "2"},
        {"sheet", "--out", In("x.ps")}}) {
    const Outcome outcome = RunWith(arguments);
    EXPECT_EQ(outcome.code, kExitWrongUse) << outcome.err;
    EXPECT_TRUE(IsOneLine(outcome.err)) << outcome.err;
    EXPECT_EQ(outcome.out, "");
  }
  EXPECT_EQ(FileCount(), 0U);
}

TEST_F(ProgramTest, SheetWritesPdfAndDescription) {
  const Outcome outcome = RunWith({"sheet", "a4-15", "--out", In("fifteen.pdf")});
  EXPECT_EQ(outcome.code, kExitDone) << outcome.err;
  EXPECT_EQ(FileCount(), 2U);
  EXPECT_EQ(ReadFile(In("fifteen.pdf")).value().substr(0, 5), "%PDF-");
  const auto sheet = ReadSheet(In("fifteen.json"));
  ASSERT_TRUE(sheet) << sheet.error().message;
  EXPECT_EQ(sheet->name, "a4-15");
  EXPECT_EQ(sheet->wells.size(), 15U);
}

TEST_F(ProgramTest, SheetOfOnesOwnFollowsTheOptions) {
  const Outcome outcome =
      RunWith({"sheet", "--page", "250x148", "--columns", "4", "--well-mm", "44", "--first-marker",
               "100", "--floor", "0.4", "--out", In("mine.pdf")});
  EXPECT_EQ(outcome.code, kExitDone) << outcome.err;
  const auto sheet = ReadSheet(In("mine.json"));
  ASSERT_TRUE(sheet) << sheet.error().message;
  EXPECT_EQ(sheet->name, "mine");
  EXPECT_EQ(sheet->page_width_mm, 250);
  EXPECT_EQ(sheet->wells.size(), 8U);
  EXPECT_EQ(sheet->wells.front().width_mm, 44);
  EXPECT_EQ(sheet->markers.front().id, 100);
  EXPECT_EQ(sheet->well_floor_reflectance, 0.4);
}

// Every `laygauge sheet` line of docs/capture.md, with its outputs in the test's folder.
TEST_F(ProgramTest, DocumentedSheetCommandsWork) {
  std::istringstream lines(DocExample("capture.md", "The sheet"));
  int commands = 0;
  for (std::string line; std::getline(lines, line);) {
    std::istringstream words(line);
    std::vector<std::string> arguments;
    for (std::string word; words >> word;) {
      arguments.push_back(word.ends_with(".pdf") ? In(word) : word);
    }
    ASSERT_EQ(arguments.at(0), "laygauge");
    arguments.erase(arguments.begin());
    const Outcome outcome = RunWith(arguments);
    EXPECT_EQ(outcome.code, kExitDone) << line << ": " << outcome.err;
    ++commands;
  }
  EXPECT_EQ(FileCount(), 2U * static_cast<size_t>(commands));
  EXPECT_GE(commands, 3);
}

TEST_F(ProgramTest, WhatCannotBeWrittenLeavesNothing) {
  const Outcome missing = RunWith({"sheet", "--out", In("none/x.pdf")});
  EXPECT_EQ(missing.code, kExitCannotWrite);
  EXPECT_TRUE(IsOneLine(missing.err)) << missing.err;
  // The description's name is taken by a folder: no PDF either.
  fs::create_directories(folder_ / "y.json");
  const Outcome taken = RunWith({"sheet", "--out", In("y.pdf")});
  EXPECT_EQ(taken.code, kExitCannotWrite);
  EXPECT_TRUE(IsOneLine(taken.err)) << taken.err;
  EXPECT_EQ(FileCount(), 1U);
}

TEST_F(ProgramTest, OutputThatFailsIsReported) {
  std::ostringstream out;
  std::ostringstream err;
  out.setstate(std::ios::badbit);
  EXPECT_EQ(RunProgram({"--version"}, {out, err}), kExitCannotWrite);
  EXPECT_TRUE(IsOneLine(err.str())) << err.str();
}

}  // namespace
}  // namespace laygauge
