#include "base/file.h"

#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>

namespace laygauge {
namespace {

namespace fs = std::filesystem;

class FileTest : public testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::path(testing::TempDir()) / ("file_test." + std::to_string(::getpid()));
    fs::create_directories(folder_);
  }
  void TearDown() override { fs::remove_all(folder_); }
  fs::path folder_;
};

TEST_F(FileTest, WhatIsWrittenIsReadAndNothingElseIsLeft) {
  const std::string bytes("a\0b\r\n", 5);
  ASSERT_TRUE(WriteFileWhole(folder_ / "x", "old"));
  ASSERT_TRUE(WriteFileWhole(folder_ / "x", bytes));
  EXPECT_EQ(ReadFile(folder_ / "x").value(), bytes);
  EXPECT_EQ(std::distance(fs::directory_iterator(folder_), fs::directory_iterator()), 1);
}

TEST_F(FileTest, SaysWhyAFileCannotBeRead) {
  EXPECT_EQ(ReadFile("no/such.jpg").error().message, "no/such.jpg: no such file; check the path");
  EXPECT_EQ(ReadFile(folder_).error().message,
            folder_.string() + ": is a folder, but a file was expected");
}

TEST_F(FileTest, SaysWhyAFileCannotBeWrittenAndLeavesTheOldOne) {
  const auto done = WriteFileWhole(folder_ / "none" / "x", "new");
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().kind, ProblemKind::kCannotWrite);
  // A folder stands where the file should go: the rename fails, and the neighbour is removed.
  fs::create_directories(folder_ / "taken" / "inside");
  EXPECT_FALSE(WriteFileWhole(folder_ / "taken", "new"));
  EXPECT_EQ(std::distance(fs::directory_iterator(folder_), fs::directory_iterator()), 1);
}

TEST_F(FileTest, AFolderCannotBeMadeOverAFile) {
  ASSERT_TRUE(WriteFileWhole(folder_ / "x", "file"));
  EXPECT_EQ(MakeFolder(folder_ / "x").error().kind, ProblemKind::kCannotWrite);
  EXPECT_TRUE(MakeFolder(folder_ / "a" / "b"));
  EXPECT_TRUE(MakeFolder(folder_ / "a" / "b"));
}

}  // namespace
}  // namespace laygauge
