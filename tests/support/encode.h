#pragma once

#include <cstdint>
#include <opencv2/core.hpp>
#include <string>
#include <vector>

// Small pictures as files in memory, made by the codec libraries, for tests.
namespace laygauge::support {

struct JpegChoices {
  int quality = 100;
  bool progressive = false;
  bool rgb = false;       // stored as red, green and blue
  bool cmyk = false;      // `pixels` gray: every ink gets its value
  std::string exif = {};  // the APP1 segment's content; empty: none
};
// `pixels`: CV_8UC1, or CV_8UC3 in the order red, green, blue (here and below).
[[nodiscard]] std::string EncodeJpeg(const cv::Mat& pixels, const JpegChoices& choices = {});

struct PngChoices {
  bool interlaced = false;
  std::string exif = {};  // TIFF-formed, without "Exif\0\0"
};
// 8 or 16 bit, 1 to 4 channels (gray, gray with alpha, colour, colour with alpha).
[[nodiscard]] std::string EncodePng(const cv::Mat& pixels, const PngChoices& choices = {});
[[nodiscard]] std::string EncodePalettePng(const cv::Mat& indices,
                                           const std::vector<cv::Vec3b>& palette);

// Claims this size, and holds no pixels.
[[nodiscard]] std::string EncodePngHeader(int width, int height);

struct TiffChoices {
  std::uint16_t compression = 1;  // none
  bool tiled = false;             // 16 x 16
  bool planes_apart = false;
  bool white_is_zero = false;
  int rows_per_strip = 3;
  int orientation = 0;  // 0: no tag
};
[[nodiscard]] std::string EncodeTiff(const cv::Mat& pixels, const TiffChoices& choices = {});

struct ExifChoices {
  int orientation = 1;
  std::uint32_t focal_numerator = 679;  // mm
  std::uint32_t focal_denominator = 100;
  std::uint16_t focal_35mm = 26;
};
// A TIFF-formed block, little-endian, written by hand after EXIF 2.3, section 4.6: make "Invented",
// model "Camera 1", taken at 2026:03:11 10:01:00.
[[nodiscard]] std::string MakeExif(const ExifChoices& choices);
[[nodiscard]] std::string InApp1(const std::string& exif);  // "Exif\0\0" before it

}  // namespace laygauge::support
