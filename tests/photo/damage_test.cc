#include <gtest/gtest.h>
#include <tiff.h>

#include <random>

#include "photo/camera_tags.h"
#include "photo/decode.h"
#include "support/encode.h"

namespace laygauge {
namespace {

using support::EncodeJpeg;
using support::EncodePng;
using support::EncodeTiff;
using support::InApp1;
using support::MakeExif;

cv::Mat Picture(int type) {
  cv::Mat picture(40, 56, type);
  cv::RNG(1).fill(picture, cv::RNG::UNIFORM, 0, 256);
  return picture;
}

// Random damage as cards, cables and disks do it: bytes changed, a part lost, a part repeated.
std::string Damaged(std::string bytes, std::mt19937& random) {
  const auto below = [&](size_t bound) { return random() % bound; };
  switch (below(4)) {
    case 0:
      bytes.resize(below(bytes.size()));
      break;
    case 1: {
      const size_t begin = below(bytes.size());
      bytes.erase(begin, 1 + below(40));
      break;
    }
    case 2: {
      const size_t begin = below(bytes.size());
      bytes.insert(below(bytes.size()), bytes.substr(begin, 1 + below(40)));
      break;
    }
    default:
      for (size_t count = 1 + below(8); count > 0; --count) {
        // Half of the changes near the start, where headers and tags are.
        const size_t reach = below(2) == 0 ? std::min<size_t>(300, bytes.size()) : bytes.size();
        bytes[below(reach)] = static_cast<char>(below(3) == 0 ? 0xff : below(256));
      }
  }
  return bytes;
}

// Every file is either decoded or refused with a reason; the sanitizers watch the rest.
void DamageManyTimes(const std::string& whole) {
  constexpr int kTimes = 1500;
  std::mt19937 random(20260311);
  int refused = 0;
  for (int i = 0; i < kTimes; ++i) {
    SCOPED_TRACE(i);
    const std::string bytes = Damaged(whole, random);
    static_cast<void>(ReadCameraTags(bytes));
    const auto decoded = DecodeImage(bytes, "photo");
    if (decoded) {
      EXPECT_FALSE(decoded->empty());
      EXPECT_TRUE(decoded->type() == CV_8UC1 || decoded->type() == CV_16UC1);
    } else {
      ++refused;
      EXPECT_EQ(decoded.error().message.rfind("photo: ", 0), 0U) << decoded.error().message;
    }
  }
  // At least what was cut off (a quarter of all) must have been noticed.
  EXPECT_GT(refused, kTimes / 5);
}

TEST(Damage, Jpeg) {
  DamageManyTimes(EncodeJpeg(Picture(CV_8UC3), {.quality = 80, .exif = InApp1(MakeExif({}))}));
}
TEST(Damage, ProgressiveJpeg) {
  DamageManyTimes(EncodeJpeg(Picture(CV_8UC3), {.quality = 80, .progressive = true}));
}
TEST(Damage, Png) { DamageManyTimes(EncodePng(Picture(CV_8UC4), {.exif = MakeExif({})})); }
TEST(Damage, InterlacedPng16) {
  DamageManyTimes(EncodePng(Picture(CV_16UC3), {.interlaced = true}));
}
TEST(Damage, Tiff) { DamageManyTimes(EncodeTiff(Picture(CV_8UC3))); }
TEST(Damage, CompressedTiff) {
  DamageManyTimes(EncodeTiff(Picture(CV_16UC3), {.compression = COMPRESSION_LZW}));
  DamageManyTimes(EncodeTiff(Picture(CV_8UC1), {.compression = COMPRESSION_ADOBE_DEFLATE}));
}
TEST(Damage, TiledTiffWithPlanesApart) {
  DamageManyTimes(EncodeTiff(Picture(CV_16UC3), {.tiled = true, .planes_apart = true}));
}

}  // namespace
}  // namespace laygauge
