#include <csetjmp>
#include <cstdio>

// After cstdio, which it needs.
#include <jerror.h>
#include <jpeglib.h>

#include "photo/decode.h"

namespace laygauge {
namespace {

// Real progressive files have some ten scans; thousands are made to keep a reader busy.
constexpr int kMaxScans = 200;
constexpr long kMaxCodecBytes = 1L << 30;
// Some cameras leave a few bytes before the end-of-image marker.
constexpr int kMaxStrayBytesAtEnd = 64;

struct JpegErrors {
  jpeg_error_mgr base;  // first: libjpeg hands back a pointer to it
  std::jmp_buf jump;
  char message[JMSG_LENGTH_MAX];
};

[[noreturn]] void GiveUp(j_common_ptr info) {
  auto* errors = reinterpret_cast<JpegErrors*>(info->err);
  errors->base.format_message(info, errors->message);
  std::longjmp(errors->jump, 1);
}

// libjpeg fills what it could not decode with gray and only warns.
void OnMessage(j_common_ptr info, int level) {
  if (level >= 0) return;
  const jpeg_error_mgr& error = *info->err;
  if (error.msg_code == JWRN_ADOBE_XFORM || error.msg_code == JWRN_JFIF_MAJOR) return;
  if (error.msg_code == JWRN_EXTRANEOUS_DATA && error.msg_parm.i[1] == JPEG_EOI &&
      error.msg_parm.i[0] <= kMaxStrayBytesAtEnd) {
    return;
  }
  GiveUp(info);
}

void OnProgress(j_common_ptr info) {
  const auto* decompress = reinterpret_cast<const jpeg_decompress_struct*>(info);
  if (decompress->input_scan_number <= kMaxScans) return;
  auto* errors = reinterpret_cast<JpegErrors*>(info->err);
  std::snprintf(errors->message, sizeof errors->message, "it has more than %d scans", kMaxScans);
  std::longjmp(errors->jump, 1);
}

// libjpeg reports by longjmp: no function that it may leave holds an object with a destructor.
class JpegReader {
 public:
  JpegReader() {
    info_.err = jpeg_std_error(&errors_.base);
    errors_.base.error_exit = GiveUp;
    errors_.base.emit_message = OnMessage;
    progress_.progress_monitor = OnProgress;
  }
  ~JpegReader() { jpeg_destroy_decompress(&info_); }
  JpegReader(const JpegReader&) = delete;
  JpegReader& operator=(const JpegReader&) = delete;

  bool ReadHeader(std::string_view bytes) {
    if (setjmp(errors_.jump)) return false;
    jpeg_create_decompress(&info_);
    info_.progress = &progress_;
    info_.mem->max_memory_to_use = kMaxCodecBytes;
    jpeg_mem_src(&info_, reinterpret_cast<const unsigned char*>(bytes.data()), bytes.size());
    jpeg_read_header(&info_, TRUE);
    return true;
  }

  [[nodiscard]] bool IsReadable() const {
    return info_.jpeg_color_space == JCS_GRAYSCALE || info_.jpeg_color_space == JCS_YCbCr ||
           info_.jpeg_color_space == JCS_RGB;
  }
  [[nodiscard]] int width() const { return static_cast<int>(info_.image_width); }
  [[nodiscard]] int height() const { return static_cast<int>(info_.image_height); }
  [[nodiscard]] const char* message() const { return errors_.message; }

  // Gray output: the colour planes are not transformed back.
  bool ReadPixels(unsigned char* out, size_t row_bytes) {
    if (setjmp(errors_.jump)) return false;
    info_.out_color_space = JCS_GRAYSCALE;
    jpeg_start_decompress(&info_);
    while (info_.output_scanline < info_.output_height) {
      constexpr JDIMENSION kRows = 16;
      JSAMPROW rows[kRows];
      const JDIMENSION count = std::min(kRows, info_.output_height - info_.output_scanline);
      for (JDIMENSION i = 0; i < count; ++i) {
        rows[i] = out + (info_.output_scanline + i) * row_bytes;
      }
      jpeg_read_scanlines(&info_, rows, count);
    }
    jpeg_finish_decompress(&info_);
    return true;
  }

 private:
  jpeg_decompress_struct info_{};
  jpeg_progress_mgr progress_{};
  JpegErrors errors_{};
};

}  // namespace

Expected<cv::Mat> DecodeJpeg(std::string_view bytes, const std::string& file) {
  JpegReader reader;
  if (!reader.ReadHeader(bytes)) {
    return tl::unexpected(DamagedImage("JPEG", reader.message(), file));
  }
  if (auto fits = CheckImageSize(reader.width(), reader.height(), file); !fits) {
    return tl::unexpected(fits.error());
  }
  if (!reader.IsReadable()) {
    return tl::unexpected(UnsupportedImage(
        "a JPEG of other colours than gray, YCbCr or RGB (as CMYK, for print)", file));
  }
  cv::Mat luma(reader.height(), reader.width(), CV_8UC1);
  if (!reader.ReadPixels(luma.data, luma.step)) {
    return tl::unexpected(DamagedImage("JPEG", reader.message(), file));
  }
  return luma;
}

}  // namespace laygauge
