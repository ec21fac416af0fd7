#include <fmt/format.h>
#include <tiffio.h>

#include <algorithm>
#include <cstdarg>
#include <cstdio>
#include <cstring>
#include <limits>
#include <memory>
#include <vector>

#include "photo/decode.h"
#include "photo/luma.h"

namespace laygauge {
namespace {

constexpr tmsize_t kMaxBlockBytes = tmsize_t{1} << 30;

struct TiffSource {
  std::string_view bytes;
  toff_t at = 0;
  std::string message;  // the first complaint since it was last emptied
};

TiffSource& SourceOf(thandle_t handle) { return *static_cast<TiffSource*>(handle); }

tmsize_t OnRead(thandle_t handle, void* out, tmsize_t size) {
  TiffSource& source = SourceOf(handle);
  if (source.at >= source.bytes.size() || size <= 0) return 0;
  const size_t count = std::min(static_cast<size_t>(size), source.bytes.size() - source.at);
  std::memcpy(out, source.bytes.data() + source.at, count);
  source.at += count;
  return static_cast<tmsize_t>(count);
}
tmsize_t OnWrite(thandle_t, void*, tmsize_t) { return 0; }
toff_t OnSeek(thandle_t handle, toff_t offset, int whence) {
  TiffSource& source = SourceOf(handle);
  const toff_t base = whence == SEEK_CUR   ? source.at
                      : whence == SEEK_END ? source.bytes.size()
                                           : toff_t{0};
  return source.at = base + offset;
}
int OnClose(thandle_t) { return 0; }
toff_t OnSize(thandle_t handle) { return SourceOf(handle).bytes.size(); }

__attribute__((format(printf, 4, 0))) int OnComplaint(TIFF*, void* user, const char*,
                                                      const char* format, va_list arguments) {
  auto& source = *static_cast<TiffSource*>(user);
  char text[256];
  std::vsnprintf(text, sizeof text, format, arguments);
  if (source.message.empty()) source.message = text;
  return 1;  // said: libtiff shall not print it
}

struct TiffCloser {
  void operator()(TIFF* tiff) const { TIFFClose(tiff); }
};
using TiffHandle = std::unique_ptr<TIFF, TiffCloser>;

TiffHandle Open(TiffSource& source) {
  const std::unique_ptr<TIFFOpenOptions, decltype(&TIFFOpenOptionsFree)> options(
      TIFFOpenOptionsAlloc(), TIFFOpenOptionsFree);
  TIFFOpenOptionsSetMaxSingleMemAlloc(options.get(), kMaxBlockBytes);
  TIFFOpenOptionsSetErrorHandlerExtR(options.get(), OnComplaint, &source);
  TIFFOpenOptionsSetWarningHandlerExtR(options.get(), OnComplaint, &source);
  // "m": no memory mapping, the bytes are in memory.
  return TiffHandle(TIFFClientOpenExt("photo", "rm", &source, OnRead, OnWrite, OnSeek, OnClose,
                                      OnSize, nullptr, nullptr, options.get()));
}

template <class T>
T Tag(TIFF* tiff, std::uint32_t tag) {
  T value{};
  TIFFGetFieldDefaulted(tiff, tag, &value);
  return value;
}

// How the pixels lie in the file.
struct TiffLayout {
  std::uint32_t width = 0;
  std::uint32_t height = 0;
  std::uint16_t bits = 8;
  std::uint16_t channels = 1;
  std::uint16_t photometric = PHOTOMETRIC_MINISBLACK;
  bool planes_apart = false;
  bool tiled = false;
  std::uint32_t block_width = 0;  // of a tile or strip
  std::uint32_t block_height = 0;
  std::vector<std::uint16_t> palette_luma;

  [[nodiscard]] bool IsColour() const { return photometric == PHOTOMETRIC_RGB; }
};

Expected<TiffLayout> Refuse(std::string_view what, const std::string& file) {
  return tl::unexpected(UnsupportedImage(what, file));
}

std::vector<std::uint16_t> PaletteLuma(TIFF* tiff) {
  std::uint16_t* red = nullptr;
  std::uint16_t* green = nullptr;
  std::uint16_t* blue = nullptr;
  if (!TIFFGetField(tiff, TIFFTAG_COLORMAP, &red, &green, &blue)) return {};
  std::vector<std::uint16_t> luma(256);
  for (size_t i = 0; i < luma.size(); ++i) luma[i] = Luma<std::uint16_t>(red[i], green[i], blue[i]);
  return luma;
}

// A block's sides. A strip may be declared higher than the picture.
void ReadBlocks(TIFF* tiff, TiffLayout& layout) {
  layout.tiled = TIFFIsTiled(tiff) != 0;
  layout.block_width = layout.width;
  if (layout.tiled) {
    layout.block_width = Tag<std::uint32_t>(tiff, TIFFTAG_TILEWIDTH);
    layout.block_height = Tag<std::uint32_t>(tiff, TIFFTAG_TILELENGTH);
  } else {
    layout.block_height = std::min(Tag<std::uint32_t>(tiff, TIFFTAG_ROWSPERSTRIP), layout.height);
  }
}

Expected<TiffLayout> ReadLayout(TIFF* tiff, const std::string& file) {
  TiffLayout layout;
  layout.width = Tag<std::uint32_t>(tiff, TIFFTAG_IMAGEWIDTH);
  layout.height = Tag<std::uint32_t>(tiff, TIFFTAG_IMAGELENGTH);
  if (auto fits = CheckImageSize(layout.width, layout.height, file); !fits) {
    return tl::unexpected(fits.error());
  }
  constexpr std::uint32_t kDngVersion = 50706;
  const void* version = nullptr;
  if (TIFFGetField(tiff, kDngVersion, &version) ||
      (Tag<std::uint32_t>(tiff, TIFFTAG_SUBFILETYPE) & FILETYPE_REDUCEDIMAGE) != 0) {
    return Refuse("a camera's raw file", file);
  }
  layout.bits = Tag<std::uint16_t>(tiff, TIFFTAG_BITSPERSAMPLE);
  layout.channels = Tag<std::uint16_t>(tiff, TIFFTAG_SAMPLESPERPIXEL);
  layout.planes_apart = Tag<std::uint16_t>(tiff, TIFFTAG_PLANARCONFIG) == PLANARCONFIG_SEPARATE;
  const auto format = Tag<std::uint16_t>(tiff, TIFFTAG_SAMPLEFORMAT);
  if ((layout.bits != 8 && layout.bits != 16) ||
      (format != SAMPLEFORMAT_UINT && format != SAMPLEFORMAT_VOID)) {
    return Refuse(fmt::format("a TIFF of {} bits{}", layout.bits,
                              format == SAMPLEFORMAT_IEEEFP ? " (floating point)" : ""),
                  file);
  }
  if (!TIFFGetField(tiff, TIFFTAG_PHOTOMETRIC, &layout.photometric)) {
    return tl::unexpected(DamagedImage("TIFF", "it does not say what its colours are", file));
  }
  if (layout.photometric == PHOTOMETRIC_YCBCR &&
      Tag<std::uint16_t>(tiff, TIFFTAG_COMPRESSION) == COMPRESSION_JPEG &&
      TIFFSetField(tiff, TIFFTAG_JPEGCOLORMODE, JPEGCOLORMODE_RGB)) {
    layout.photometric = PHOTOMETRIC_RGB;  // the codec converts
  }
  if (layout.photometric == PHOTOMETRIC_PALETTE && layout.bits == 8) {
    layout.palette_luma = PaletteLuma(tiff);
    if (layout.palette_luma.empty()) {
      return tl::unexpected(DamagedImage("TIFF", "its palette is missing", file));
    }
  } else if (layout.photometric != PHOTOMETRIC_RGB &&
             layout.photometric != PHOTOMETRIC_MINISBLACK &&
             layout.photometric != PHOTOMETRIC_MINISWHITE) {
    return Refuse("a TIFF with colours other than gray, palette or RGB", file);
  }
  if (layout.channels < (layout.IsColour() ? 3 : 1)) {
    return tl::unexpected(DamagedImage("TIFF", "colours are missing", file));
  }
  ReadBlocks(tiff, layout);
  if (layout.block_width == 0 || layout.block_height == 0) {
    return tl::unexpected(DamagedImage("TIFF", "its parts have no pixels", file));
  }
  return layout;
}

// Reads tile or strip after tile or strip and turns each to luma.
class TiffPixels {
 public:
  TiffPixels(TIFF* tiff, const TiffLayout& layout)
      : tiff_(tiff),
        layout_(layout),
        luma_(static_cast<int>(layout.height), static_cast<int>(layout.width),
              layout.bits == 16 || !layout.palette_luma.empty() ? CV_16UC1 : CV_8UC1) {}

  // False: the reason is in the source's message, or the blocks do not fit into memory.
  bool Read() {
    const tmsize_t block_bytes = layout_.tiled ? TIFFTileSize(tiff_) : TIFFStripSize(tiff_);
    const int planes = layout_.planes_apart && layout_.IsColour() ? 3 : 1;
    if (block_bytes <= 0 || block_bytes > kMaxBlockBytes || block_bytes < NeededBytes()) {
      return false;
    }
    block_bytes_ = block_bytes;
    block_.resize(static_cast<size_t>(block_bytes) * static_cast<size_t>(planes));
    for (std::uint32_t y = 0; y < layout_.height; y += layout_.block_height) {
      for (std::uint32_t x = 0; x < layout_.width; x += layout_.block_width) {
        for (int plane = 0; plane < planes; ++plane) {
          if (!ReadBlock(x, y, plane)) return false;
        }
        ConvertBlock(x, y);
      }
    }
    return true;
  }
  [[nodiscard]] const cv::Mat& luma() const { return luma_; }

 private:
  [[nodiscard]] size_t PixelBytes() const {
    return size_t{layout_.bits} / 8 * (layout_.planes_apart ? 1U : layout_.channels);
  }
  [[nodiscard]] tmsize_t NeededBytes() const {
    return static_cast<tmsize_t>(PixelBytes() * layout_.block_width * layout_.block_height);
  }

  bool ReadBlock(std::uint32_t x, std::uint32_t y, int plane) {
    const auto sample = static_cast<std::uint16_t>(plane);
    char* out = block_.data() + block_bytes_ * plane;
    if (layout_.tiled) {
      const std::uint32_t tile = TIFFComputeTile(tiff_, x, y, 0, sample);
      return TIFFReadEncodedTile(tiff_, tile, out, block_bytes_) == block_bytes_;
    }
    const std::uint32_t strip = TIFFComputeStrip(tiff_, y, sample);
    const std::uint32_t rows = std::min(layout_.block_height, layout_.height - y);
    const auto wanted = static_cast<tmsize_t>(PixelBytes() * layout_.width * rows);
    return TIFFReadEncodedStrip(tiff_, strip, out, wanted) == wanted;
  }

  [[nodiscard]] SampleRow SamplesOf(std::uint32_t row) const {
    SampleRow samples;
    samples.samples = layout_.IsColour() ? 3 : 1;
    samples.stride = layout_.planes_apart ? 1 : layout_.channels;
    samples.bits = layout_.bits;
    samples.inverted = layout_.photometric == PHOTOMETRIC_MINISWHITE;
    const char* begin = block_.data() + size_t{row} * layout_.block_width * PixelBytes();
    for (int i = 0; i < samples.samples; ++i) {
      samples.first[i] =
          begin + (layout_.planes_apart ? block_bytes_ * i : tmsize_t{layout_.bits / 8} * i);
    }
    return samples;
  }

  void ConvertBlock(std::uint32_t x, std::uint32_t y) {
    const std::uint32_t rows = std::min(layout_.block_height, layout_.height - y);
    const auto columns = static_cast<int>(std::min(layout_.block_width, layout_.width - x));
    for (std::uint32_t row = 0; row < rows; ++row) {
      const SampleRow samples = SamplesOf(row);
      unsigned char* out = luma_.ptr(static_cast<int>(y + row), static_cast<int>(x));
      if (layout_.palette_luma.empty()) {
        LumaRow(samples, columns, out, 1);
        continue;
      }
      const auto* index = static_cast<const std::uint8_t*>(samples.first[0]);
      auto* wide = reinterpret_cast<std::uint16_t*>(out);
      for (int i = 0; i < columns; ++i) wide[i] = layout_.palette_luma[index[i * samples.stride]];
    }
  }

  TIFF* tiff_;
  const TiffLayout& layout_;
  cv::Mat luma_;
  std::vector<char> block_;
  tmsize_t block_bytes_ = 0;
};

}  // namespace

Expected<cv::Mat> DecodeTiff(std::string_view bytes, const std::string& file) {
  TiffSource source{bytes, 0, {}};
  const TiffHandle tiff = Open(source);
  if (!tiff) return tl::unexpected(DamagedImage("TIFF", source.message, file));
  const auto layout = ReadLayout(tiff.get(), file);
  if (!layout) return tl::unexpected(layout.error());
  // Complaints about tags matter little; about pixels, everything.
  source.message.clear();
  TiffPixels pixels(tiff.get(), *layout);
  if (!pixels.Read() || !source.message.empty()) {
    if (source.message.empty()) source.message = "its parts do not fit together";
    return tl::unexpected(DamagedImage("TIFF", source.message, file));
  }
  return pixels.luma();
}

}  // namespace laygauge
