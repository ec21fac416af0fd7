#include "report/png.h"

#include <png.h>

#include <cmath>
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

}  // namespace laygauge
