#include "photo/jpeg_quality.h"

#include <cstddef>
#include <cstdint>

namespace laygauge {
namespace {

// ITU-T T.81, table B.1.
constexpr int kStartOfScan = 0xDA;
constexpr int kDefineTables = 0xDB;

constexpr double kTableK1Sum = 3688;
constexpr size_t kTableValues = 64;

int Byte(std::string_view bytes, size_t i) { return static_cast<std::uint8_t>(bytes[i]); }

// The sum of table 0, which luma uses by convention; T.81 B.2.4.1: a byte of precision and number,
// then 64 values of one or two bytes, for each table.
std::optional<int> LumaTableSum(std::string_view tables) {
  while (!tables.empty()) {
    const size_t width = Byte(tables, 0) >> 4 == 0 ? 1 : 2;
    if (tables.size() < 1 + kTableValues * width) return std::nullopt;
    if ((Byte(tables, 0) & 15) == 0) {
      int sum = 0;
      for (size_t i = 1; i <= kTableValues * width; i += width) {
        sum += width == 1 ? Byte(tables, i) : 256 * Byte(tables, i) + Byte(tables, i + 1);
      }
      return sum;
    }
    tables.remove_prefix(1 + kTableValues * width);
  }
  return std::nullopt;
}

double QualityOfSum(int sum) {
  const double percent = 100 * sum / kTableK1Sum;
  return percent <= 100 ? 100 - percent / 2 : 5000 / percent;
}

}  // namespace

std::optional<double> JpegQuality(std::string_view image_bytes) {
  if (!image_bytes.starts_with("\xFF\xD8")) return std::nullopt;
  // Segments: 0xFF, the marker, two bytes of length that count themselves.
  size_t at = 2;
  while (at + 4 <= image_bytes.size() && Byte(image_bytes, at) == 0xFF) {
    const int marker = Byte(image_bytes, at + 1);
    if (marker == 0xFF) {  // fill byte
      ++at;
      continue;
    }
    const auto length =
        static_cast<size_t>(256 * Byte(image_bytes, at + 2) + Byte(image_bytes, at + 3));
    if (marker == kStartOfScan || length < 2 || at + 2 + length > image_bytes.size()) break;
    if (marker == kDefineTables) {
      const auto sum = LumaTableSum(image_bytes.substr(at + 4, length - 2));
      if (sum && *sum > 0) return QualityOfSum(*sum);
    }
    at += 2 + length;
  }
  return std::nullopt;
}

}  // namespace laygauge
