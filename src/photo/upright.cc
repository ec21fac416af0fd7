#include "photo/upright.h"

#include <stdexcept>

namespace laygauge {
namespace {

enum class Mirror { kNone, kColumns, kRows, kBoth };

cv::Mat Mirrored(cv::Mat image, Mirror mirror) {
  if (mirror == Mirror::kNone) return image;
  const int code = mirror == Mirror::kRows ? 0 : mirror == Mirror::kColumns ? 1 : -1;
  cv::flip(image, image, code);
  return image;
}

cv::Mat Transposed(const cv::Mat& image) {
  cv::Mat turned;
  cv::transpose(image, turned);
  return turned;
}

}  // namespace

cv::Mat Upright(cv::Mat stored, int orientation) {
  switch (orientation) {
    case 1:
      return stored;
    case 2:
      return Mirrored(std::move(stored), Mirror::kColumns);
    case 3:
      return Mirrored(std::move(stored), Mirror::kBoth);
    case 4:
      return Mirrored(std::move(stored), Mirror::kRows);
    case 5:
      return Transposed(stored);
    case 6:
      return Mirrored(Transposed(stored), Mirror::kColumns);
    case 7:
      return Mirrored(Transposed(stored), Mirror::kBoth);
    case 8:
      return Mirrored(Transposed(stored), Mirror::kRows);
    default:
      throw std::invalid_argument("EXIF orientation outside 1..8");
  }
}

}  // namespace laygauge
