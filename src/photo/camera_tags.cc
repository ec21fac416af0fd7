#include "photo/camera_tags.h"

#include <cmath>
#include <exiv2/exiv2.hpp>
#include <mutex>

namespace laygauge {
namespace {

const Exiv2::Exifdatum* FindTag(const Exiv2::ExifData& tags, const char* key) {
  const auto found = tags.findKey(Exiv2::ExifKey(key));
  return found == tags.end() || found->count() <= 0 ? nullptr : &*found;
}

// Only printable ASCII, which EXIF prescribes: what follows a NUL is padding.
std::optional<std::string> TextTag(const Exiv2::ExifData& tags, const char* key) {
  const Exiv2::Exifdatum* tag = FindTag(tags, key);
  if (!tag || tag->typeId() != Exiv2::asciiString) return std::nullopt;
  std::string text = tag->toString();
  text.resize(std::min(text.find('\0'), text.size()));
  while (!text.empty() && text.back() == ' ') text.pop_back();
  for (char& letter : text) {
    if (letter < 0x20 || letter > 0x7e) letter = '?';
  }
  if (text.empty()) return std::nullopt;
  return text;
}

// Cameras write 0 for an unknown length.
std::optional<double> LengthTag(const Exiv2::ExifData& tags, const char* key) {
  const Exiv2::Exifdatum* tag = FindTag(tags, key);
  if (!tag) return std::nullopt;
  double value = 0;
  if (tag->typeId() == Exiv2::unsignedRational || tag->typeId() == Exiv2::signedRational) {
    const Exiv2::Rational ratio = tag->toRational();
    value = static_cast<double>(ratio.first) / static_cast<double>(ratio.second);
  } else if (tag->typeId() == Exiv2::unsignedShort || tag->typeId() == Exiv2::unsignedLong) {
    value = static_cast<double>(tag->toLong());
  }
  constexpr double kLongestLens = 10000;  // mm: beyond, the tag is damaged
  if (!std::isfinite(value) || value <= 0 || value > kLongestLens) return std::nullopt;
  return value;
}

int OrientationTag(const Exiv2::ExifData& tags) {
  const Exiv2::Exifdatum* tag = FindTag(tags, "Exif.Image.Orientation");
  if (!tag || tag->typeId() != Exiv2::unsignedShort) return 1;
  const long value = tag->toLong();
  return value >= 1 && value <= 8 ? static_cast<int>(value) : 1;
}

void PrepareExiv2() {
  static std::once_flag once;
  std::call_once(once, [] {
    Exiv2::LogMsg::setLevel(Exiv2::LogMsg::mute);
    Exiv2::XmpParser::initialize();
  });
}

}  // namespace

CameraTags ReadCameraTags(std::string_view image_bytes) {
  PrepareExiv2();
  CameraTags result;
  try {
    const auto image =
        Exiv2::ImageFactory::open(reinterpret_cast<const Exiv2::byte*>(image_bytes.data()),
                                  static_cast<long>(image_bytes.size()));
    image->readMetadata();
    const Exiv2::ExifData& tags = image->exifData();
    result.make = TextTag(tags, "Exif.Image.Make");
    result.model = TextTag(tags, "Exif.Image.Model");
    result.focal_length_mm = LengthTag(tags, "Exif.Photo.FocalLength");
    result.focal_length_35mm = LengthTag(tags, "Exif.Photo.FocalLengthIn35mmFilm");
    result.taken_at = TextTag(tags, "Exif.Photo.DateTimeOriginal");
    result.orientation = OrientationTag(tags);
  } catch (const std::exception&) {
    return {};
  }
  return result;
}

}  // namespace laygauge
