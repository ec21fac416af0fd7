#pragma once

#include <array>
#include <filesystem>
#include <opencv2/core.hpp>
#include <optional>
#include <string>

#include "base/error.h"

namespace laygauge {

// What the file's tags tell about the camera. Absent tags stay absent.
struct CameraTags {
  std::optional<std::string> make;
  std::optional<std::string> model;
  std::optional<double> focal_length_mm;
  std::optional<double> focal_length_35mm;  // 35 mm equivalent, by the image diagonal
  std::optional<std::string> taken_at;      // as written: "YYYY:MM:DD hh:mm:ss"
  int orientation = 1;                      // EXIF 1..8, already applied to the pixels
};

// A decoded photograph, upright. Pixel centres are at whole numbers (OpenCV's rule), here and
// everywhere in this program.
struct Photo {
  std::string file;                    // as named by the caller, for messages
  std::string stem;                    // the file's name without folder and extension
  cv::Mat encoded;                     // CV_8UC1 or CV_16UC1: luma, still encoded by the sRGB curve
  std::optional<double> jpeg_quality;  // 1 to 100, as JpegQuality tells it; none: another format
  CameraTags tags;

  [[nodiscard]] cv::Size size() const { return encoded.size(); }
};

// Decodes JPEG, PNG or TIFF (told apart by their first bytes), 8 or 16 bit, gray, colour or with
// alpha (composed over white is not assumed: alpha is dropped). Applies the EXIF orientation.
// Only luma is decoded: under a power-law encoding a uniform change of light scales encoded red,
// green and blue by one factor, hence luma too, so relative reflectance is preserved.
// Problem: missing, empty, a folder, not an image, truncated, larger than 400 megapixels.
[[nodiscard]] Expected<Photo> ReadPhoto(const std::filesystem::path& path);

// The region as linear light, CV_32FC1, 0 (black) to 1 (encoded full scale): IEC 61966-2-1.
[[nodiscard]] cv::Mat LinearRegion(const Photo& photo, const cv::Rect& region);

}  // namespace laygauge
