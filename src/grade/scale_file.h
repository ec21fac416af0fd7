#pragma once

#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

#include "base/embedded.h"
#include "base/error.h"
#include "grade/scale.h"

namespace laygauge {

inline constexpr int kScaleFormat = 1;

// The scale file (docs/scale.md): JSON, every key known and present, weights >= 0. Its `content`
// is the XXH3 128-bit hash (Collet, xxHash 0.8) of everything else in it, so that a file changed
// by hand or by accident is not taken for the calibration that it describes. A bare scale, without
// graded coupons, is what a first calibration starts from: it may be written by hand, and its
// `content` be empty.
[[nodiscard]] Expected<Scale> ParseScale(std::string_view text, const std::string& file);
[[nodiscard]] Expected<Scale> ReadScale(const std::filesystem::path& path);
[[nodiscard]] std::string FormatScale(const Scale& scale);

// Names the scale in results: equal hashes, equal numbers. 32 hexadecimal digits.
[[nodiscard]] std::string ScaleContentHash(const Scale& scale);

// Compiled in from calibration/scales.
[[nodiscard]] const std::vector<EmbeddedFile>& EmbeddedScales();
[[nodiscard]] const Scale& ShippedScale();

}  // namespace laygauge
