#pragma once

#include <cstdint>
#include <opencv2/core.hpp>
#include <string>
#include <string_view>

#include "base/error.h"

namespace laygauge {

// Every decoder turns a whole file in memory into luma as stored (not yet upright), CV_8UC1 or
// CV_16UC1, still encoded. `file` is the name for messages. Problem: damaged, cut short, a kind
// of picture that it does not read, or larger than kMaxPixels. Damage that a codec would only
// warn of is refused too: made-up pixels must not be measured.
[[nodiscard]] Expected<cv::Mat> DecodeJpeg(std::string_view bytes, const std::string& file);
[[nodiscard]] Expected<cv::Mat> DecodePng(std::string_view bytes, const std::string& file);
[[nodiscard]] Expected<cv::Mat> DecodeTiff(std::string_view bytes, const std::string& file);

// Told apart by the first bytes; what is none of the three is named if it is known.
[[nodiscard]] Expected<cv::Mat> DecodeImage(std::string_view bytes, const std::string& file);

constexpr std::int64_t kMaxPixels = 400'000'000;

[[nodiscard]] Done CheckImageSize(std::int64_t width, std::int64_t height, const std::string& file);

// "FILE: the JPEG is damaged or cut short (REASON); copy it again ..."
[[nodiscard]] Problem DamagedImage(std::string_view kind, std::string_view reason,
                                   const std::string& file);
// "FILE: WHAT is not read here; save it as ..."
[[nodiscard]] Problem UnsupportedImage(std::string_view what, const std::string& file);

}  // namespace laygauge
