#include "report/encode_png.h"

#include <fmt/format.h>
#include <png.h>

#include <cmath>
#include <cstring>
#include <stdexcept>
#include <vector>

namespace laygauge {
namespace {

struct PngWriter {
  png_structp png = nullptr;
  png_infop info = nullptr;

  PngWriter() {
    const auto on_error = [](png_structp, png_const_charp message) {
      throw std::runtime_error(message);
    };
    const auto on_warning = [](png_structp, png_const_charp) {};
    png = png_create_write_struct(PNG_LIBPNG_VER_STRING, nullptr, on_error, on_warning);
    if (png != nullptr) info = png_create_info_struct(png);
    if (info == nullptr) throw std::bad_alloc();
  }
  ~PngWriter() { png_destroy_write_struct(&png, &info); }
  PngWriter(const PngWriter&) = delete;
  PngWriter& operator=(const PngWriter&) = delete;
};

}  // namespace

std::string EncodePng(const cv::Mat& image, double px_per_mm) {
  CV_Assert(image.type() == CV_8UC1 || image.type() == CV_8UC4);
  const bool colour = image.type() == CV_8UC4;
  std::string bytes;
  PngWriter writer;
  const auto write = [](png_structp png, png_bytep data, png_size_t size) {
    static_cast<std::string*>(png_get_io_ptr(png))->append(reinterpret_cast<char*>(data), size);
  };
  png_set_write_fn(writer.png, &bytes, write, [](png_structp) {});
  png_set_IHDR(writer.png, writer.info, static_cast<png_uint_32>(image.cols),
               static_cast<png_uint_32>(image.rows), 8,
               colour ? PNG_COLOR_TYPE_RGB : PNG_COLOR_TYPE_GRAY, PNG_INTERLACE_NONE,
               PNG_COMPRESSION_TYPE_DEFAULT, PNG_FILTER_TYPE_DEFAULT);
  if (px_per_mm > 0) {
    const auto px_per_m = static_cast<png_uint_32>(std::lround(px_per_mm * 1000));
    png_set_pHYs(writer.png, writer.info, px_per_m, px_per_m, PNG_RESOLUTION_METER);
  }
  png_set_compression_level(writer.png, 2);
  png_set_filter(writer.png, 0, PNG_FILTER_SUB);
  png_write_info(writer.png, writer.info);
  if (colour) {
    png_set_bgr(writer.png);
    png_set_filler(writer.png, 0, PNG_FILLER_AFTER);
  }
  for (int row = 0; row < image.rows; ++row) {
    png_write_row(writer.png, const_cast<png_bytep>(image.ptr<png_byte>(row)));
  }
  png_write_end(writer.png, writer.info);
  return bytes;
}

std::optional<double> WidthMmOfPng(std::string_view bytes) {
  // PNG (ISO/IEC 15948): signature, then chunks of length, type, data and check sum.
  constexpr std::string_view kSignature = "\x89PNG\r\n\x1a\n";
  if (!bytes.starts_with(kSignature)) return std::nullopt;
  const auto number_at = [&](size_t at) {
    double number = 0;
    for (size_t i = at; i < at + 4; ++i) {
      number = number * 256 + static_cast<unsigned char>(bytes[i]);
    }
    return number;
  };
  double width_px = 0;
  for (size_t at = kSignature.size(); at + 12 <= bytes.size();) {
    const double length = number_at(at);
    if (length > static_cast<double>(bytes.size() - at - 12)) return std::nullopt;
    const std::string_view type = bytes.substr(at + 4, 4);
    if (type == "IHDR" && length >= 4) width_px = number_at(at + 8);
    if (type == "pHYs" && length == 9 && bytes[at + 16] == PNG_RESOLUTION_METER) {
      const double px_per_m = number_at(at + 8);
      if (px_per_m > 0 && width_px > 0) return width_px / px_per_m * 1000;
    }
    at += static_cast<size_t>(length) + 12;
  }
  return std::nullopt;
}

std::string PictureName(std::string_view batch, std::string_view well, int take,
                        std::string_view suffix) {
  std::string name = fmt::format("{}-{}", batch, well);
  for (char& letter : name) {
    if (letter == '/' || letter == '\\' || letter == '\0') letter = '_';
  }
  if (take > 1) name += fmt::format("-take{}", take);
  return fmt::format("{}{}.png", name, suffix);
}

}  // namespace laygauge
