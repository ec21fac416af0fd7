#include "report/encode_png.h"

#include <gtest/gtest.h>
#include <unistd.h>

#include <array>
#include <cstdio>
#include <filesystem>

#include "base/file.h"

namespace laygauge {
namespace {

// What Pillow, which does not share our code, makes of the file.
std::string SeenByPillow(const std::string& png, const std::string& pixels) {
  const auto file = std::filesystem::temp_directory_path() /
                    ("laygauge-png-" + std::to_string(::getpid()) + ".png");
  EXPECT_TRUE(WriteFileWhole(file, png));
  const std::string command = std::string(LAYGAUGE_PYTHON) +
                              " '" LAYGAUGE_SOURCE_DIR "/tests/report/png_reference.py' '" +
                              file.string() + "' " + pixels;
  std::FILE* pipe = popen(command.c_str(), "r");
  std::string output;
  std::array<char, 256> buffer{};
  while (const size_t count = std::fread(buffer.data(), 1, buffer.size(), pipe)) {
    output.append(buffer.data(), count);
  }
  EXPECT_EQ(pclose(pipe), 0);
  std::filesystem::remove(file);
  return output;
}

TEST(Png, GrayComesBackAsItWas) {
  cv::Mat image(3, 5, CV_8UC1, cv::Scalar(7));
  image.at<uchar>(1, 4) = 200;
  const std::string png = EncodePng(image, 20);
  // 20 px/mm = 508 dots an inch.
  EXPECT_EQ(SeenByPillow(png, "4 1 0 0"), "L 5 3 508.0 508.0\n200\n7\n");
}

TEST(Png, ColoursAreCairosBlueGreenRed) {
  cv::Mat image(2, 2, CV_8UC4, cv::Scalar(10, 20, 30, 0));  // blue 10, green 20, red 30
  image.at<cv::Vec4b>(1, 0) = {255, 0, 0, 99};              // blue; the last byte means nothing
  EXPECT_EQ(SeenByPillow(EncodePng(image, 10), "0 0 0 1"),
            "RGB 2 2 254.0 254.0\n30 20 10\n0 0 255\n");
}

TEST(Png, TellsWhatItsWidthShows) {
  const cv::Mat image(4, 880, CV_8UC1, cv::Scalar(0));
  const auto width_mm = WidthMmOfPng(EncodePng(image, 20));
  ASSERT_TRUE(width_mm);
  EXPECT_DOUBLE_EQ(*width_mm, 44);
  // 18.75 px/mm is a whole number of pixels a metre, as the file stores it.
  EXPECT_DOUBLE_EQ(WidthMmOfPng(EncodePng(image, 18.75)).value(), 880 / 18.75);
}

TEST(Png, TellsNothingWithoutAScaleOrOfOtherFiles) {
  const cv::Mat image(4, 8, CV_8UC1, cv::Scalar(0));
  EXPECT_FALSE(WidthMmOfPng(EncodePng(image, 0)));
  EXPECT_FALSE(WidthMmOfPng(""));
  EXPECT_FALSE(WidthMmOfPng("\xff\xd8\xff\xe0 a JPEG"));
  // Cut anywhere before the scale is whole: nothing, and no read past the end.
  const std::string whole = EncodePng(image, 20);
  const size_t scale_ends = whole.find("pHYs") + 4 + 9 + 4;  // type, data, check sum
  for (size_t length = 0; length < scale_ends; ++length) {
    EXPECT_FALSE(WidthMmOfPng(whole.substr(0, length))) << length;
  }
  EXPECT_TRUE(WidthMmOfPng(whole.substr(0, scale_ends)));
  // A length that points past the end.
  std::string bad = whole;
  bad[8] = '\x7f';
  EXPECT_FALSE(WidthMmOfPng(bad));
}

TEST(Png, NamesStayInTheirFolder) {
  EXPECT_EQ(PictureName("b1", "A2"), "b1-A2.png");
  EXPECT_EQ(PictureName("b1", "A2", 2), "b1-A2-take2.png");
  EXPECT_EQ(PictureName("b1", "A2", 2, "-found"), "b1-A2-take2-found.png");
  EXPECT_EQ(PictureName("../b\\1", "A/2"), ".._b_1-A_2.png");
}

}  // namespace
}  // namespace laygauge
