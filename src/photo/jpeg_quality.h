#pragma once

#include <optional>
#include <string_view>

namespace laygauge {

// How finely a JPEG file's luma is coded, on the 1..100 of the Independent JPEG Group's coders:
// its quantisation table's sum S relative to that of ITU-T T.81 (1992) table K.1, 3688, is
// p = 100 S / 3688 per cent; quality is 100 - p / 2 up to p = 100, then 5000 / p
// (jpeg_quality_scaling in libjpeg's jcparam.c). Tables of other shapes get the quality of equal
// sum. None: not a JPEG, or no table before its first scan.
[[nodiscard]] std::optional<double> JpegQuality(std::string_view image_bytes);

}  // namespace laygauge
