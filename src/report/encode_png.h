#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <string_view>

namespace laygauge {

// A PNG file's bytes. `image`: CV_8UC1 gray, or CV_8UC4 as Cairo lays out CAIRO_FORMAT_RGB24
// (bytes blue, green, red, unused). Fast rather than small. `px_per_mm` is written as the picture's
// physical scale (pHYs) where it is positive.
[[nodiscard]] std::string EncodePng(const cv::Mat& image, double px_per_mm);

// What the width of a PNG picture shows, mm, by its physical scale; none: not a PNG, or without
// one.
[[nodiscard]] std::optional<double> WidthMmOfPng(std::string_view bytes);

// The name of a coupon's picture in DIR/pictures: "b1-A2.png", of later takes "b1-A2-take2.png";
// with a suffix "b1-A2-found.png".
[[nodiscard]] std::string PictureName(std::string_view batch, std::string_view well, int take = 1,
                                      std::string_view suffix = "");

}  // namespace laygauge
