#pragma once

#include <functional>
#include <opencv2/core.hpp>

#include "photo/photo.h"
#include "sheet/camera.h"

namespace laygauge {

// A rectangle of pixels in a plane parallel to the sheet: where a picture of a coupon's top is to
// be sampled.
struct PlaneFrame {
  cv::Size size_px;
  double px_per_mm = 20;
  cv::Point2d origin_px;  // the pixel that lies at center_mm
  cv::Point2d center_mm;  // on the sheet, x right, y down
  double turn_deg = 0;    // of the frame's x axis, counter-clockwise seen from above
  double height_mm = 0;   // of the plane above the paper

  [[nodiscard]] cv::Point2d SheetFromFrame(cv::Point2d pixel) const;
};

// `photo` seen in `frame`, linear light 0..1, CV_32FC1, through lens and pose, in one resampling.
//
// The photograph is interpolated by a cubic spline (Unser, "Splines: a perfect fit for signal and
// image processing", IEEE Signal Processing Magazine 16(6), 1999, DOI 10.1109/79.799930): with its
// prefilter it keeps 99 % of the amplitude at a third of the sampling rate, where the third
// harmonic of 0.4 mm lines lies at 20 px/mm, and does so wherever between two pixels a sample
// falls; convolution with a plain 4-tap cubic loses up to a tenth there, more or less by position,
// which would print a moire of its own on the lines. In linear light, because only there does a
// mean over area mean what a sensor would have seen.
//
// If the photo is finer than the frame, it is blurred first to the frame's resolution (no
// aliasing). The mapping is exact on a grid of 32 pixels and bilinear between (error below 0.002
// px at 10 px/mm and more). Outside the photo its edge is repeated; ask IsInPhoto.
//
// `finish` may change each stretch of a row, as long as it is in the cache: up to kStretch_px
// pixels from `first`, whose column is a multiple of kStretch_px.
constexpr int kStretch_px = 32;
using FinishStretch = std::function<void(const cv::Point& first, int count, float* values)>;
[[nodiscard]] cv::Mat Rectify(const Photo& photo, const View& view, const PlaneFrame& frame,
                              const FinishStretch& finish = {});

// Standard deviation, mm, of the blur that Rectify adds where the photo shows `photo_px_per_mm` and
// the frame has `px_per_mm`; 0 where the photo is no finer than the frame.
[[nodiscard]] double ResamplingBlurSdMm(double photo_px_per_mm, double px_per_mm);

// The same without linearising: encoded luma 0..1 by bilinear interpolation, CV_32FC1. A tenth of
// the time; for finding things, not for measuring brightness.
[[nodiscard]] cv::Mat RectifyEncoded(const Photo& photo, const View& view, const PlaneFrame& frame);

// Whether the photo shows the point, at least `border_px` from its edge.
[[nodiscard]] bool IsInPhoto(const Photo& photo, const View& view, const cv::Point2d& sheet_mm,
                             double height_mm, double border_px);

}  // namespace laygauge
