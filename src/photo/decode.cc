#include "photo/decode.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>

namespace laygauge {
namespace {

using namespace std::string_view_literals;

struct Signature {
  size_t offset;
  std::string_view bytes;
  std::string_view name;
};

// First bytes as the formats' specifications (or file(1)'s public table) give them.
constexpr std::array kOtherKinds{
    Signature{4, "ftyphei", "an HEIC picture"},
    Signature{4, "ftyphev", "an HEIC picture"},
    Signature{4, "ftypmif1", "an HEIC picture"},
    Signature{4, "ftypmsf1", "an HEIC picture"},
    Signature{4, "ftypavif", "an AVIF picture"},
    Signature{4, "ftypcrx", "a camera's raw file"},
    Signature{4, "ftyp", "a film"},
    Signature{8, "WEBPVP8", "a WebP picture"},
    Signature{0, "GIF8", "a GIF picture"},
    Signature{0, "BM", "a BMP picture"},
    Signature{0, "8BPS", "a PSD picture"},
    Signature{0, "\0\0\0\x0CjP  "sv, "a JPEG 2000 picture"},
    Signature{0, "\xFF\x4F\xFF\x51", "a JPEG 2000 picture"},
    Signature{0, "\0\0\0\x0CJXL "sv, "a JPEG XL picture"},
    Signature{0, "\xFF\x0A", "a JPEG XL picture"},
    Signature{0, "FUJIFILMCCD-RAW", "a camera's raw file"},
    Signature{0, "IIRO", "a camera's raw file"},
    Signature{0, "IIU\0"sv, "a camera's raw file"},
    Signature{0, "%PDF", "a PDF document"},
    Signature{0, "PK\x03\x04", "a ZIP archive"},
    Signature{0, "{", "a JSON or other text"},
    Signature{0, "<", "a web page or other text"},
};

bool Starts(std::string_view bytes, size_t offset, std::string_view with) {
  return bytes.size() >= offset && bytes.substr(offset).starts_with(with);
}

bool IsTiff(std::string_view bytes) {
  return bytes.starts_with("II*\0"sv) || bytes.starts_with("MM\0*"sv) ||
         bytes.starts_with("II+\0"sv) || bytes.starts_with("MM\0+"sv);
}

}  // namespace

Expected<cv::Mat> DecodeImage(std::string_view bytes, const std::string& file) {
  if (bytes.empty()) {
    return BadInput(fmt::format("{}: the file is empty; copy it again from the camera", file));
  }
  if (bytes.starts_with("\xFF\xD8\xFF")) return DecodeJpeg(bytes, file);
  if (bytes.starts_with("\x89PNG\r\n\x1A\n")) return DecodePng(bytes, file);
  if (IsTiff(bytes)) return DecodeTiff(bytes, file);
  const auto* known = std::find_if(kOtherKinds.begin(), kOtherKinds.end(), [&](const auto& kind) {
    return Starts(bytes, kind.offset, kind.bytes);
  });
  if (known == kOtherKinds.end()) {
    return BadInput(fmt::format("{}: is not a picture; give a JPEG, PNG or TIFF photograph", file));
  }
  return BadInput(
      fmt::format("{}: is {}, not a JPEG, PNG or TIFF; convert it to one of these, or give the "
                  "photograph itself",
                  file, known->name));
}

Done CheckImageSize(std::int64_t width, std::int64_t height, const std::string& file) {
  if (width <= 0 || height <= 0) {
    return tl::unexpected(DamagedImage("picture", "it has no pixels", file));
  }
  if (width > kMaxPixels / height) {
    return BadInput(
        fmt::format("{}: is {} x {} pixels large; at most {} megapixels are read: make it smaller",
                    file, width, height, kMaxPixels / 1'000'000));
  }
  return {};
}

Problem DamagedImage(std::string_view kind, std::string_view reason, const std::string& file) {
  return {ProblemKind::kBadInput,
          fmt::format("{}: the {} is damaged or cut short ({}); copy it again from the camera",
                      file, kind, reason)};
}

Problem UnsupportedImage(std::string_view what, const std::string& file) {
  return {ProblemKind::kBadInput,
          fmt::format("{}: {} is not read here; save it as an ordinary gray or RGB picture of 8 or "
                      "16 bits",
                      file, what)};
}

}  // namespace laygauge
