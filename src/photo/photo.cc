#include "photo/photo.h"

#include <fmt/format.h>

#include <array>
#include <cstdint>
#include <stdexcept>
#include <vector>

#include "base/file.h"
#include "photo/camera_tags.h"
#include "photo/decode.h"
#include "photo/jpeg_quality.h"
#include "photo/srgb.h"
#include "photo/upright.h"

namespace laygauge {
namespace {

template <class Sample>
const std::vector<float>& LinearTable() {
  static const std::vector<float> table = [] {
    constexpr double kFullScale = std::numeric_limits<Sample>::max();
    std::vector<float> values(static_cast<size_t>(kFullScale) + 1);
    for (size_t i = 0; i < values.size(); ++i) {
      values[i] = static_cast<float>(LinearFromSrgb(static_cast<double>(i) / kFullScale));
    }
    return values;
  }();
  return table;
}

template <class Sample>
void Linearise(const cv::Mat& encoded, cv::Mat& linear) {
  const std::vector<float>& table = LinearTable<Sample>();
  for (int y = 0; y < encoded.rows; ++y) {
    const auto* from = encoded.ptr<Sample>(y);
    auto* to = linear.ptr<float>(y);
    for (int x = 0; x < encoded.cols; ++x) to[x] = table[from[x]];
  }
}

}  // namespace

Expected<Photo> ReadPhoto(const std::filesystem::path& path) {
  const auto bytes = ReadFile(path);
  if (!bytes) return tl::unexpected(bytes.error());
  Photo photo;
  photo.file = path.string();
  photo.stem = path.stem().string();
  auto stored = DecodeImage(*bytes, photo.file);
  if (!stored) return tl::unexpected(stored.error());
  photo.jpeg_quality = JpegQuality(*bytes);
  photo.tags = ReadCameraTags(*bytes);
  photo.encoded = Upright(std::move(*stored), photo.tags.orientation);
  return photo;
}

cv::Mat LinearRegion(const Photo& photo, const cv::Rect& region) {
  if ((region & cv::Rect({0, 0}, photo.size())) != region || region.empty()) {
    throw std::out_of_range("a region outside the photo");
  }
  cv::Mat linear(region.size(), CV_32FC1);
  if (photo.encoded.depth() == CV_8U) {
    Linearise<std::uint8_t>(photo.encoded(region), linear);
  } else {
    Linearise<std::uint16_t>(photo.encoded(region), linear);
  }
  return linear;
}

}  // namespace laygauge
