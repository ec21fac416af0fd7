#include "photo/photo.h"

#include <gtest/gtest.h>
#include <tiff.h>

#include <cmath>
#include <filesystem>
#include <fstream>

#include "photo/srgb.h"
#include "support/encode.h"

namespace laygauge {
namespace {

using support::EncodeJpeg;
using support::EncodePalettePng;
using support::EncodePng;
using support::EncodeTiff;
using support::ExifChoices;
using support::InApp1;
using support::MakeExif;

class PhotoTest : public ::testing::Test {
 protected:
  void SetUp() override {
    folder_ =
        std::filesystem::temp_directory_path() / ("laygauge-photo-" + std::to_string(::getpid()));
    std::filesystem::create_directories(folder_);
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  std::filesystem::path Write(const std::string& bytes, const std::string& name = "p.img") {
    std::ofstream(folder_ / name, std::ios::binary) << bytes;
    return folder_ / name;
  }
  Photo Read(const std::string& bytes) {
    auto photo = ReadPhoto(Write(bytes));
    EXPECT_TRUE(photo) << (photo ? "" : photo.error().message);
    return photo ? *photo : Photo{};
  }
  // The reason for which a file is refused.
  std::string Refusal(const std::string& bytes) {
    const auto photo = ReadPhoto(Write(bytes));
    return photo ? "was read" : photo.error().message;
  }

  std::filesystem::path folder_;
};

// 37 x 21 pixels: no multiple of a JPEG block, a tile or an interlacing step.
cv::Mat ColourPicture() {
  cv::Mat picture(21, 37, CV_8UC3);
  for (int y = 0; y < picture.rows; ++y) {
    for (int x = 0; x < picture.cols; ++x) {
      picture.at<cv::Vec3b>(y, x) =
          cv::Vec3b(static_cast<uchar>(60 + 4 * x), static_cast<uchar>(200 - 5 * y),
                    static_cast<uchar>(90 + x + 2 * y));
    }
  }
  return picture;
}

// By definition (ITU-R BT.601), in floating point.
cv::Mat SlowLuma(const cv::Mat& picture) {
  cv::Mat luma(picture.size(), CV_64FC1);
  for (int y = 0; y < picture.rows; ++y) {
    for (int x = 0; x < picture.cols; ++x) {
      const cv::Vec3b color = picture.at<cv::Vec3b>(y, x);
      luma.at<double>(y, x) = 0.299 * color[0] + 0.587 * color[1] + 0.114 * color[2];
    }
  }
  return luma;
}

cv::Mat Gray(const cv::Mat& picture) {
  cv::Mat gray;
  SlowLuma(picture).convertTo(gray, CV_8U);
  return gray;
}

// 257 = 65535 / 255: full scale stays full scale.
cv::Mat Widened(const cv::Mat& picture) {
  cv::Mat wide;
  picture.convertTo(wide, CV_16U, 257);
  return wide;
}

// The picture with a further channel of arbitrary alpha.
cv::Mat WithAlpha(const cv::Mat& picture) {
  std::vector<cv::Mat> channels;
  cv::split(picture, channels);
  cv::Mat alpha(picture.size(), picture.depth());
  for (int y = 0; y < alpha.rows; ++y) alpha.row(y).setTo(7 * y);
  channels.push_back(alpha);
  cv::Mat merged;
  cv::merge(channels, merged);
  return merged;
}

// Largest distance to the definition, in 8-bit levels.
double DistanceToDefinition(const Photo& photo) {
  if (photo.encoded.empty()) return INFINITY;
  cv::Mat levels;
  photo.encoded.convertTo(levels, CV_64F, photo.encoded.depth() == CV_16U ? 1 / 257.0 : 1);
  return cv::norm(levels, SlowLuma(ColourPicture()), cv::NORM_INF);
}

// Rounding to whole levels, and what 16-bit weights add.
constexpr double kExactLevels = 0.51;
// JPEG at quality 100 rounds once more to colour differences and to cosines: 1.5 levels at most
// are common practice.
constexpr double kJpegLevels = 2;

TEST_F(PhotoTest, EveryKindOfFileShowsTheSamePicture) {
  const cv::Mat colour = ColourPicture();
  const cv::Mat gray = Gray(colour);
  const struct {
    std::string name;
    std::string bytes;
    double tolerance;
    int type;
  } files[] = {
      {"png gray", EncodePng(gray), kExactLevels, CV_8UC1},
      {"png gray alpha", EncodePng(WithAlpha(gray)), kExactLevels, CV_8UC1},
      {"png colour", EncodePng(colour), kExactLevels, CV_8UC1},
      {"png colour alpha", EncodePng(WithAlpha(colour)), kExactLevels, CV_8UC1},
      {"png interlaced", EncodePng(colour, {.interlaced = true}), kExactLevels, CV_8UC1},
      {"png 16 gray", EncodePng(Widened(gray)), kExactLevels, CV_16UC1},
      {"png 16 colour alpha", EncodePng(WithAlpha(Widened(colour))), 0.01, CV_16UC1},
      {"png 16 interlaced", EncodePng(Widened(colour), {.interlaced = true}), 0.01, CV_16UC1},
      {"tiff gray", EncodeTiff(gray), kExactLevels, CV_8UC1},
      {"tiff white is zero", EncodeTiff(255 - gray, {.white_is_zero = true}), kExactLevels,
       CV_8UC1},
      {"tiff colour", EncodeTiff(colour), kExactLevels, CV_8UC1},
      {"tiff gray alpha", EncodeTiff(WithAlpha(gray)), kExactLevels, CV_8UC1},
      {"tiff colour alpha", EncodeTiff(WithAlpha(colour)), kExactLevels, CV_8UC1},
      {"tiff lzw", EncodeTiff(colour, {.compression = COMPRESSION_LZW}), kExactLevels, CV_8UC1},
      {"tiff deflate", EncodeTiff(colour, {.compression = COMPRESSION_ADOBE_DEFLATE}), kExactLevels,
       CV_8UC1},
      {"tiff tiled", EncodeTiff(colour, {.tiled = true}), kExactLevels, CV_8UC1},
      {"tiff planes", EncodeTiff(colour, {.planes_apart = true}), kExactLevels, CV_8UC1},
      {"tiff tiled planes 16", EncodeTiff(Widened(colour), {.tiled = true, .planes_apart = true}),
       0.01, CV_16UC1},
      {"tiff 16", EncodeTiff(Widened(colour)), 0.01, CV_16UC1},
      {"tiff one strip", EncodeTiff(colour, {.rows_per_strip = 4000}), kExactLevels, CV_8UC1},
      {"jpeg gray", EncodeJpeg(gray), kJpegLevels, CV_8UC1},
      {"jpeg colour", EncodeJpeg(colour), kJpegLevels, CV_8UC1},
      {"jpeg progressive", EncodeJpeg(colour, {.progressive = true}), kJpegLevels, CV_8UC1},
      {"jpeg rgb", EncodeJpeg(colour, {.rgb = true}), kJpegLevels, CV_8UC1},
  };
  for (const auto& file : files) {
    SCOPED_TRACE(file.name);
    const Photo photo = Read(file.bytes);
    EXPECT_EQ(photo.encoded.type(), file.type);
    EXPECT_LE(DistanceToDefinition(photo), file.tolerance);
  }
}

TEST_F(PhotoTest, PalettesAreLookedUp) {
  const cv::Mat indices = (cv::Mat_<uchar>(1, 3) << 2, 0, 1);
  const Photo photo = Read(EncodePalettePng(indices, {{255, 0, 0}, {0, 255, 0}, {0, 0, 255}}));
  // Pure red, green and blue in 8 bits: 76, 150 and 29 (ITU-R BT.601, rounded).
  const cv::Mat expected = (cv::Mat_<uchar>(1, 3) << 29, 76, 150);
  ASSERT_EQ(photo.encoded.size(), expected.size());
  EXPECT_EQ(cv::norm(photo.encoded, expected, cv::NORM_INF), 0);
}

TEST_F(PhotoTest, LinearRegionFollowsTheCurveAtBothDepths) {
  cv::Mat ramp(1, 256, CV_8UC1);
  for (int i = 0; i < 256; ++i) ramp.at<uchar>(0, i) = static_cast<uchar>(i);
  const cv::Rect region(10, 0, 200, 1);
  const cv::Mat from_8 = LinearRegion(Read(EncodePng(ramp)), region);
  const cv::Mat from_16 = LinearRegion(Read(EncodePng(Widened(ramp))), region);
  ASSERT_EQ(from_8.size(), region.size());
  ASSERT_EQ(from_8.type(), CV_32FC1);
  for (int i = 0; i < region.width; ++i) {
    // One rounding to single precision.
    EXPECT_NEAR(from_8.at<float>(0, i), LinearFromSrgb((i + region.x) / 255.0), 6e-8);
  }
  EXPECT_EQ(cv::norm(from_8, from_16, cv::NORM_INF), 0);
  EXPECT_THROW(static_cast<void>(LinearRegion(Read(EncodePng(ramp)), cv::Rect(250, 0, 7, 1))),
               std::out_of_range);
}

TEST_F(PhotoTest, TagsAreReadFromJpegPngAndTiff) {
  const cv::Mat gray = Gray(ColourPicture());
  const std::string exif = MakeExif({});
  for (const std::string& bytes :
       {EncodeJpeg(gray, {.exif = InApp1(exif)}), EncodePng(gray, {.exif = exif})}) {
    const CameraTags tags = Read(bytes).tags;
    EXPECT_EQ(tags.make, "Invented");
    EXPECT_EQ(tags.model, "Camera 1");
    EXPECT_EQ(tags.taken_at, "2026:03:11 10:01:00");
    EXPECT_EQ(tags.focal_length_mm, 6.79);
    EXPECT_EQ(tags.focal_length_35mm, 26);
    EXPECT_EQ(tags.orientation, 1);
  }
  const Photo turned = Read(EncodeTiff(gray, {.orientation = 6}));
  EXPECT_EQ(turned.tags.orientation, 6);
  EXPECT_EQ(turned.size(), cv::Size(gray.rows, gray.cols));
}

TEST_F(PhotoTest, AbsentAndMeaninglessTagsStayAbsent) {
  const cv::Mat gray = Gray(ColourPicture());
  const CameraTags none = Read(EncodeJpeg(gray)).tags;
  EXPECT_FALSE(none.make || none.model || none.focal_length_mm || none.focal_length_35mm ||
               none.taken_at);
  EXPECT_EQ(none.orientation, 1);
  const ExifChoices zeros{.orientation = 9, .focal_denominator = 0, .focal_35mm = 0};
  const CameraTags bad = Read(EncodeJpeg(gray, {.exif = InApp1(MakeExif(zeros))})).tags;
  EXPECT_EQ(bad.make, "Invented");
  EXPECT_FALSE(bad.focal_length_mm);
  EXPECT_FALSE(bad.focal_length_35mm);
  EXPECT_EQ(bad.orientation, 1);
}

TEST_F(PhotoTest, DamagedTagsDoNotRefuseThePhoto) {
  const cv::Mat gray = Gray(ColourPicture());
  const std::string exif = InApp1(MakeExif({}));
  for (size_t cut = 7; cut < exif.size(); cut += 5) {
    EXPECT_EQ(Read(EncodeJpeg(gray, {.exif = exif.substr(0, cut)})).size(), gray.size()) << cut;
  }
}

// The sample plates' README: d2 was taken at 50 mm on a 36 mm wide frame; the tag counts by the
// diagonal (43.27 mm over that of a 4:3 frame 36 mm wide, 45 mm): 48.07, written as 48.
// libjpeg codes at a quality by jpeg_quality_scaling; the tables' whole numbers move the sum of 64
// of them by less than 1 %, half a quality. From 97 on many are 1, the least, and say little.
TEST_F(PhotoTest, JpegQualityIsWhatTheCoderWasTold) {
  const cv::Mat picture = ColourPicture();
  for (const int quality : {20, 40, 50, 60, 75, 85, 95}) {
    for (const bool progressive : {false, true}) {
      const Photo photo = Read(EncodeJpeg(
          picture, {.quality = quality, .progressive = progressive, .exif = InApp1(MakeExif({}))}));
      ASSERT_TRUE(photo.jpeg_quality) << quality;
      EXPECT_NEAR(*photo.jpeg_quality, quality, 0.5);
    }
  }
  EXPECT_EQ(Read(EncodePng(picture)).jpeg_quality, std::nullopt);
}

TEST_F(PhotoTest, SamplePlatesHaveTheirTags) {
  const std::filesystem::path plates = std::filesystem::path(LAYGAUGE_SOURCE_DIR) / "sample-images";
  const auto d2 = ReadPhoto(plates / "d2.jpg");
  ASSERT_TRUE(d2) << d2.error().message;
  EXPECT_EQ(d2->tags.focal_length_35mm, 48);
  EXPECT_EQ(d2->stem, "d2");
  EXPECT_EQ(d2->size(), cv::Size(4032, 3024));
  const auto d5 = ReadPhoto(plates / "d5.jpg");
  ASSERT_TRUE(d5) << d5.error().message;
  EXPECT_FALSE(d5->tags.focal_length_35mm);
  const auto d6 = ReadPhoto(plates / "d6.jpg");
  ASSERT_TRUE(d6) << d6.error().message;
  EXPECT_EQ(d6->tags.orientation, 6);
  EXPECT_EQ(d6->size(), cv::Size(4032, 3024));
}

TEST_F(PhotoTest, BadFilesAreRefusedInOneSentence) {
  const cv::Mat colour = ColourPicture();
  const std::string jpeg = EncodeJpeg(colour);
  const std::string png = EncodePng(colour);
  const std::string tiff = EncodeTiff(colour);
  const auto half = [](const std::string& bytes) { return bytes.substr(0, bytes.size() / 2); };
  const struct {
    std::string bytes;
    std::string expected;
  } files[] = {
      {"", "the file is empty"},
      {"hello", "is not a picture"},
      {half(jpeg), "the JPEG is damaged or cut short"},
      {jpeg.substr(0, jpeg.size() - 2), "the JPEG is damaged or cut short"},
      {half(EncodeJpeg(colour, {.progressive = true})), "the JPEG is damaged or cut short"},
      {jpeg.substr(0, 20), "the JPEG is damaged or cut short"},
      {half(png), "the PNG is damaged or cut short"},
      {half(tiff), "the TIFF is damaged or cut short"},
      {EncodeJpeg(Gray(colour), {.cmyk = true}), "CMYK"},
      {std::string("\0\0\0\x18", 4) + "ftypheic", "is an HEIC picture"},
      {"GIF89a", "is a GIF picture"},
      {"%PDF-1.5", "is a PDF document"},
  };
  for (const auto& file : files) {
    const std::string message = Refusal(file.bytes);
    EXPECT_NE(message.find(file.expected), std::string::npos) << message;
    EXPECT_EQ(message.rfind((folder_ / "p.img").string(), 0), 0U) << message;
    EXPECT_EQ(message.find('\n'), std::string::npos) << message;
  }
}

TEST_F(PhotoTest, MissingFilesAndFoldersAreRefused) {
  const auto missing = ReadPhoto(folder_ / "none.jpg");
  ASSERT_FALSE(missing);
  EXPECT_NE(missing.error().message.find("none.jpg: no such file"), std::string::npos);
  const auto folder = ReadPhoto(folder_);
  ASSERT_FALSE(folder);
  EXPECT_NE(folder.error().message.find("is a folder"), std::string::npos);
}

// A few hundred bytes that claim 60000 x 60000 pixels.
TEST_F(PhotoTest, AbsurdSizesAreRefusedBeforeTheyAreAllocated) {
  std::string jpeg = EncodeJpeg(ColourPicture());
  const size_t frame = jpeg.find("\xFF\xC0");
  ASSERT_NE(frame, std::string::npos);
  jpeg.replace(frame + 5, 4, "\xEA\x60\xEA\x60");
  EXPECT_NE(Refusal(jpeg).find("60000 x 60000 pixels large"), std::string::npos);
  const std::string png = support::EncodePngHeader(60000, 60000);
  EXPECT_NE(Refusal(png).find("60000 x 60000 pixels large"), std::string::npos);
}

}  // namespace
}  // namespace laygauge
