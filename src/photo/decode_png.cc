#include <png.h>

#include <algorithm>
#include <csetjmp>
#include <cstdio>
#include <cstring>
#include <vector>

#include "photo/decode.h"
#include "photo/luma.h"

namespace laygauge {
namespace {

constexpr png_alloc_size_t kMaxChunkBytes = 64U << 20;
constexpr png_uint_32 kMaxSide = 1'000'000;

struct PngSource {
  std::string_view rest;
  std::jmp_buf jump;
  char message[256];
};

[[noreturn]] void OnError(png_structp png, png_const_charp message) {
  auto* source = static_cast<PngSource*>(png_get_error_ptr(png));
  std::snprintf(source->message, sizeof source->message, "%s", message);
  std::longjmp(source->jump, 1);
}

// Of auxiliary chunks only: what concerns the pixels is an error.
void OnWarning(png_structp /*png*/, png_const_charp /*message*/) {}

void OnRead(png_structp png, png_bytep out, size_t size) {
  auto* source = static_cast<PngSource*>(png_get_io_ptr(png));
  if (size > source->rest.size()) png_error(png, "the file ends too early");
  std::memcpy(out, source->rest.data(), size);
  source->rest.remove_prefix(size);
}

// libpng reports by longjmp: no function that it may leave holds an object with a destructor.
class PngReader {
 public:
  explicit PngReader(std::string_view bytes) : source_{bytes, {}, {}} {
    png_ = png_create_read_struct(PNG_LIBPNG_VER_STRING, &source_, OnError, OnWarning);
    if (png_) info_ = png_create_info_struct(png_);
    if (!info_) throw std::bad_alloc();
  }
  ~PngReader() { png_destroy_read_struct(&png_, &info_, nullptr); }
  PngReader(const PngReader&) = delete;
  PngReader& operator=(const PngReader&) = delete;

  bool ReadHeader() {
    if (setjmp(source_.jump)) return false;
    png_set_read_fn(png_, &source_, OnRead);
    png_set_user_limits(png_, kMaxSide, kMaxSide);
    png_set_chunk_malloc_max(png_, kMaxChunkBytes);
    png_read_info(png_, info_);
    png_set_palette_to_rgb(png_);
    png_set_expand_gray_1_2_4_to_8(png_);
    png_set_strip_alpha(png_);
    png_set_swap(png_);  // 16-bit samples are big-endian in the file
    png_read_update_info(png_, info_);
    return true;
  }

  [[nodiscard]] int width() const { return static_cast<int>(png_get_image_width(png_, info_)); }
  [[nodiscard]] int height() const { return static_cast<int>(png_get_image_height(png_, info_)); }
  [[nodiscard]] int bits() const { return png_get_bit_depth(png_, info_); }
  [[nodiscard]] size_t row_bytes() const { return png_get_rowbytes(png_, info_); }
  [[nodiscard]] const char* message() const { return source_.message; }

  // `row`: row_bytes() large. Interlaced pictures come as seven thinner ones, whose pixels are
  // put into their places here, so that no colour image is held.
  bool ReadPixels(png_bytep row, cv::Mat& luma) {
    if (setjmp(source_.jump)) return false;
    const bool interlaced = png_get_interlace_type(png_, info_) == PNG_INTERLACE_ADAM7;
    for (int pass = 0; pass < (interlaced ? PNG_INTERLACE_ADAM7_PASSES : 1); ++pass) {
      const int rows = interlaced ? static_cast<int>(PNG_PASS_ROWS(height(), pass)) : height();
      const int columns = interlaced ? static_cast<int>(PNG_PASS_COLS(width(), pass)) : width();
      if (columns == 0) continue;
      for (int y = 0; y < rows; ++y) {
        png_read_row(png_, row, nullptr);
        const int to_y = interlaced ? PNG_ROW_FROM_PASS_ROW(y, pass) : y;
        const int to_x = interlaced ? PNG_COL_FROM_PASS_COL(0, pass) : 0;
        const int step = interlaced ? 1 << PNG_PASS_COL_SHIFT(pass) : 1;
        LumaRow(SamplesOf(row), columns, luma.ptr(to_y, to_x), step);
      }
    }
    png_read_end(png_, nullptr);
    return true;
  }

 private:
  [[nodiscard]] SampleRow SamplesOf(png_const_bytep row) const {
    const int channels = png_get_channels(png_, info_);
    const int sample_bytes = bits() / 8;
    SampleRow samples;
    samples.samples = channels >= 3 ? 3 : 1;
    samples.stride = channels;
    samples.bits = bits();
    for (int i = 0; i < samples.samples; ++i) samples.first[i] = row + i * sample_bytes;
    return samples;
  }

  PngSource source_;
  png_structp png_ = nullptr;
  png_infop info_ = nullptr;
};

}  // namespace

Expected<cv::Mat> DecodePng(std::string_view bytes, const std::string& file) {
  PngReader reader(bytes);
  if (!reader.ReadHeader()) return tl::unexpected(DamagedImage("PNG", reader.message(), file));
  if (auto fits = CheckImageSize(reader.width(), reader.height(), file); !fits) {
    return tl::unexpected(fits.error());
  }
  cv::Mat luma(reader.height(), reader.width(), reader.bits() == 16 ? CV_16UC1 : CV_8UC1);
  std::vector<png_byte> row(reader.row_bytes());
  if (!reader.ReadPixels(row.data(), luma)) {
    return tl::unexpected(DamagedImage("PNG", reader.message(), file));
  }
  return luma;
}

}  // namespace laygauge
