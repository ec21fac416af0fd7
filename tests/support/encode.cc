#include "support/encode.h"

#include <cstdio>
#include <cstdlib>
#include <cstring>

// After cstdio, which it needs.
#include <jpeglib.h>
#include <png.h>
#include <tiffio.h>
#include <unistd.h>

#include <filesystem>
#include <fstream>
#include <sstream>

namespace laygauge::support {
namespace {

void Append16(std::string& out, std::uint16_t value) {
  out += static_cast<char>(value & 0xff);
  out += static_cast<char>(value >> 8);
}
void Append32(std::string& out, std::uint32_t value) {
  Append16(out, static_cast<std::uint16_t>(value & 0xffff));
  Append16(out, static_cast<std::uint16_t>(value >> 16));
}
void AppendEntry(std::string& out, std::uint16_t tag, std::uint16_t type, std::uint32_t count,
                 std::uint32_t value_or_offset) {
  Append16(out, tag);
  Append16(out, type);
  Append32(out, count);
  Append32(out, value_or_offset);
}

}  // namespace

std::string EncodeJpeg(const cv::Mat& pixels, const JpegChoices& choices) {
  jpeg_compress_struct info{};
  jpeg_error_mgr errors{};
  info.err = jpeg_std_error(&errors);  // exits the test on a mistake in it
  jpeg_create_compress(&info);
  unsigned char* buffer = nullptr;
  unsigned long size = 0;
  jpeg_mem_dest(&info, &buffer, &size);
  info.image_width = static_cast<JDIMENSION>(pixels.cols);
  info.image_height = static_cast<JDIMENSION>(pixels.rows);
  info.input_components = choices.cmyk ? 4 : pixels.channels();
  info.in_color_space = choices.cmyk ? JCS_CMYK : pixels.channels() == 1 ? JCS_GRAYSCALE : JCS_RGB;
  jpeg_set_defaults(&info);
  if (choices.rgb) jpeg_set_colorspace(&info, JCS_RGB);
  jpeg_set_quality(&info, choices.quality, TRUE);
  if (choices.progressive) jpeg_simple_progression(&info);
  jpeg_start_compress(&info, TRUE);
  if (!choices.exif.empty()) {
    jpeg_write_marker(&info, JPEG_APP0 + 1, reinterpret_cast<const JOCTET*>(choices.exif.data()),
                      static_cast<unsigned>(choices.exif.size()));
  }
  for (int y = 0; y < pixels.rows; ++y) {
    std::vector<unsigned char> row(pixels.ptr(y), pixels.ptr(y) + pixels.cols * pixels.elemSize());
    if (choices.cmyk) {
      std::vector<unsigned char> inks;
      for (const unsigned char value : row) inks.insert(inks.end(), 4, value);
      row = inks;
    }
    unsigned char* begin = row.data();
    jpeg_write_scanlines(&info, &begin, 1);
  }
  jpeg_finish_compress(&info);
  jpeg_destroy_compress(&info);
  std::string bytes(reinterpret_cast<char*>(buffer), size);
  std::free(buffer);
  return bytes;
}

namespace {

struct PngWriter {
  png_structp png = png_create_write_struct(PNG_LIBPNG_VER_STRING, nullptr, nullptr, nullptr);
  png_infop info = png_create_info_struct(png);
  std::string bytes;
  PngWriter() {
    png_set_write_fn(
        png, &bytes,
        [](png_structp self, png_bytep data, size_t size) {
          static_cast<std::string*>(png_get_io_ptr(self))
              ->append(reinterpret_cast<char*>(data), size);
        },
        nullptr);
  }
  ~PngWriter() { png_destroy_write_struct(&png, &info); }
  PngWriter(const PngWriter&) = delete;
  PngWriter& operator=(const PngWriter&) = delete;

  std::string Write(const cv::Mat& pixels, int color_type, bool interlaced) {
    const int bits = pixels.depth() == CV_16U ? 16 : 8;
    png_set_IHDR(png, info, static_cast<png_uint_32>(pixels.cols),
                 static_cast<png_uint_32>(pixels.rows), bits, color_type,
                 interlaced ? PNG_INTERLACE_ADAM7 : PNG_INTERLACE_NONE, PNG_COMPRESSION_TYPE_BASE,
                 PNG_FILTER_TYPE_BASE);
    png_write_info(png, info);
    if (bits == 16) png_set_swap(png);
    std::vector<png_bytep> rows;
    for (int y = 0; y < pixels.rows; ++y) rows.push_back(const_cast<png_bytep>(pixels.ptr(y)));
    png_write_image(png, rows.data());
    png_write_end(png, info);
    return bytes;
  }
};

}  // namespace

std::string EncodePng(const cv::Mat& pixels, const PngChoices& choices) {
  constexpr int kTypes[] = {PNG_COLOR_TYPE_GRAY, PNG_COLOR_TYPE_GRAY_ALPHA, PNG_COLOR_TYPE_RGB,
                            PNG_COLOR_TYPE_RGB_ALPHA};
  PngWriter writer;
  std::string exif = choices.exif;
  if (!exif.empty()) {
    png_set_eXIf_1(writer.png, writer.info, static_cast<png_uint_32>(exif.size()),
                   reinterpret_cast<png_bytep>(exif.data()));
  }
  return writer.Write(pixels, kTypes[pixels.channels() - 1], choices.interlaced);
}

std::string EncodePalettePng(const cv::Mat& indices, const std::vector<cv::Vec3b>& palette) {
  PngWriter writer;
  std::vector<png_color> colors;
  for (const cv::Vec3b& color : palette) colors.push_back({color[0], color[1], color[2]});
  png_set_PLTE(writer.png, writer.info, colors.data(), static_cast<int>(colors.size()));
  return writer.Write(indices, PNG_COLOR_TYPE_PALETTE, false);
}

std::string EncodePngHeader(int width, int height) {
  PngWriter writer;
  png_set_IHDR(writer.png, writer.info, static_cast<png_uint_32>(width),
               static_cast<png_uint_32>(height), 8, PNG_COLOR_TYPE_GRAY, PNG_INTERLACE_NONE,
               PNG_COMPRESSION_TYPE_BASE, PNG_FILTER_TYPE_BASE);
  png_write_info(writer.png, writer.info);
  png_write_chunk(writer.png, reinterpret_cast<png_const_bytep>("IDAT"),
                  reinterpret_cast<png_const_bytep>("x"), 1);
  return writer.bytes;
}

namespace {

void WriteTiffPixels(TIFF* tiff, const cv::Mat& pixels, const TiffChoices& choices) {
  std::vector<cv::Mat> planes{pixels};
  if (choices.planes_apart) cv::split(pixels, planes);
  for (size_t plane = 0; plane < planes.size(); ++plane) {
    const auto sample = static_cast<std::uint16_t>(plane);
    if (!choices.tiled) {
      for (int y = 0; y < pixels.rows; ++y) {
        TIFFWriteScanline(tiff, planes[plane].ptr(y), static_cast<std::uint32_t>(y), sample);
      }
      continue;
    }
    cv::Mat padded;
    cv::copyMakeBorder(planes[plane], padded, 0, 16, 0, 16, cv::BORDER_REPLICATE);
    for (int y = 0; y < pixels.rows; y += 16) {
      for (int x = 0; x < pixels.cols; x += 16) {
        cv::Mat tile = padded(cv::Rect(x, y, 16, 16)).clone();
        TIFFWriteTile(tiff, tile.data, static_cast<std::uint32_t>(x), static_cast<std::uint32_t>(y),
                      0, sample);
      }
    }
  }
}

}  // namespace

std::string EncodeTiff(const cv::Mat& pixels, const TiffChoices& choices) {
  const std::string path =
      (std::filesystem::temp_directory_path() / ("laygauge-" + std::to_string(getpid()) + ".tif"))
          .string();
  TIFF* tiff = TIFFOpen(path.c_str(), "w");
  const int channels = pixels.channels();
  TIFFSetField(tiff, TIFFTAG_IMAGEWIDTH, pixels.cols);
  TIFFSetField(tiff, TIFFTAG_IMAGELENGTH, pixels.rows);
  TIFFSetField(tiff, TIFFTAG_BITSPERSAMPLE, pixels.depth() == CV_16U ? 16 : 8);
  TIFFSetField(tiff, TIFFTAG_SAMPLESPERPIXEL, channels);
  TIFFSetField(tiff, TIFFTAG_PHOTOMETRIC,
               channels >= 3           ? PHOTOMETRIC_RGB
               : choices.white_is_zero ? PHOTOMETRIC_MINISWHITE
                                       : PHOTOMETRIC_MINISBLACK);
  if (channels == 2 || channels == 4) {
    const std::uint16_t kind = EXTRASAMPLE_UNASSALPHA;
    TIFFSetField(tiff, TIFFTAG_EXTRASAMPLES, 1, &kind);
  }
  TIFFSetField(tiff, TIFFTAG_PLANARCONFIG,
               choices.planes_apart ? PLANARCONFIG_SEPARATE : PLANARCONFIG_CONTIG);
  TIFFSetField(tiff, TIFFTAG_COMPRESSION, choices.compression);
  if (choices.orientation > 0) TIFFSetField(tiff, TIFFTAG_ORIENTATION, choices.orientation);
  if (choices.tiled) {
    TIFFSetField(tiff, TIFFTAG_TILEWIDTH, 16);
    TIFFSetField(tiff, TIFFTAG_TILELENGTH, 16);
  } else {
    TIFFSetField(tiff, TIFFTAG_ROWSPERSTRIP, choices.rows_per_strip);
  }
  WriteTiffPixels(tiff, pixels, choices);
  TIFFClose(tiff);
  std::ifstream in(path, std::ios::binary);
  std::ostringstream bytes;
  bytes << in.rdbuf();
  std::filesystem::remove(path);
  return bytes.str();
}

std::string MakeExif(const ExifChoices& choices) {
  constexpr std::uint16_t kAscii = 2, kShort = 3, kLong = 4, kRational = 5;
  const std::string make("Invented\0", 9);
  const std::string model("Camera 1\0", 9);
  const std::string taken("2026:03:11 10:01:00\0", 20);
  constexpr std::uint32_t kFirst = 8, kFirstEntries = 4, kSubEntries = 3;
  const std::uint32_t sub = kFirst + 2 + 12 * kFirstEntries + 4;
  const std::uint32_t data = sub + 2 + 12 * kSubEntries + 4;
  std::string out("II*\0", 4);
  Append32(out, kFirst);
  Append16(out, kFirstEntries);
  AppendEntry(out, 0x010f, kAscii, 9, data);
  AppendEntry(out, 0x0110, kAscii, 9, data + 9);
  AppendEntry(out, 0x0112, kShort, 1, static_cast<std::uint32_t>(choices.orientation));
  AppendEntry(out, 0x8769, kLong, 1, sub);
  Append32(out, 0);
  Append16(out, kSubEntries);
  AppendEntry(out, 0x9003, kAscii, 20, data + 18);
  AppendEntry(out, 0x920a, kRational, 1, data + 38);
  AppendEntry(out, 0xa405, kShort, 1, choices.focal_35mm);
  Append32(out, 0);
  out += make + model + taken;
  Append32(out, choices.focal_numerator);
  Append32(out, choices.focal_denominator);
  return out;
}

std::string InApp1(const std::string& exif) { return std::string("Exif\0\0", 6) + exif; }

}  // namespace laygauge::support
