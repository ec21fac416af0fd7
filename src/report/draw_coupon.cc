#include "report/draw_coupon.h"

#include <cairo.h>
#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <memory>
#include <numbers>
#include <opencv2/imgproc.hpp>

#include "photo/srgb.h"

namespace laygauge {
namespace {

constexpr double kOwnLevelLinear = 0.30;  // where the coupon's own level is shown, 0..1
constexpr int kLineHeightPx = 22;
constexpr double kFontPx = 15;
// A mark must not hide what it marks: a fine line, over a veil as wide as the find.
constexpr double kFineLinePx = 1.5;
constexpr double kVeil = 0.2;

struct Ink {
  MarkKind kind;
  const char* name;
  double red, green, blue;
};

// Colours that stay apart for colour-blind readers (after Okabe & Ito 2008, "Color universal
// design").
constexpr std::array<Ink, 6> kInks{{
    {MarkKind::kGap, "gaps", 0.90, 0.62, 0.00},
    {MarkKind::kRidge, "ridges", 0.94, 0.89, 0.26},
    {MarkKind::kScar, "scars", 0.84, 0.37, 0.00},
    {MarkKind::kBlob, "blobs", 0.80, 0.47, 0.65},
    {MarkKind::kWallGap, "wall gaps", 0.34, 0.71, 0.91},
    {MarkKind::kFailure, "failure", 0.90, 0.10, 0.10},
}};

struct CairoDestroy {
  void operator()(cairo_t* cr) const { cairo_destroy(cr); }
  void operator()(cairo_surface_t* surface) const { cairo_surface_destroy(surface); }
};
using Context = std::unique_ptr<cairo_t, CairoDestroy>;
using SurfaceHandle = std::unique_ptr<cairo_surface_t, CairoDestroy>;

void TracePath(cairo_t* cr, const Patch& patch, const Mark& mark) {
  // Cairo's pixel centres are at halves, ours at whole numbers.
  for (size_t i = 0; i < mark.path_mm.size(); ++i) {
    const cv::Point2d at = patch.PixelFromCoupon(mark.path_mm[i]) + cv::Point2d(0.5, 0.5);
    if (i == 0) {
      cairo_move_to(cr, at.x, at.y);
    } else {
      cairo_line_to(cr, at.x, at.y);
    }
  }
  if (mark.closed) cairo_close_path(cr);
}

void DrawMark(cairo_t* cr, const Patch& patch, const Mark& mark, const Ink& ink) {
  if (mark.path_mm.empty()) return;
  cairo_new_path(cr);
  TracePath(cr, patch, mark);
  cairo_set_line_cap(cr, CAIRO_LINE_CAP_ROUND);
  cairo_set_line_join(cr, CAIRO_LINE_JOIN_ROUND);
  cairo_set_source_rgba(cr, ink.red, ink.green, ink.blue, kVeil);
  if (mark.closed) {
    cairo_fill_preserve(cr);
  } else if (const double width_px = mark.width_mm * patch.px_per_mm; width_px > 2 * kFineLinePx) {
    cairo_set_line_width(cr, width_px);
    cairo_stroke_preserve(cr);
  }
  cairo_set_source_rgba(cr, ink.red, ink.green, ink.blue, 0.85);
  cairo_set_line_width(cr, kFineLinePx);
  cairo_stroke(cr);
}

void DrawOutline(cairo_t* cr, const Patch& patch, const CouponDescription& coupon) {
  cairo_set_source_rgba(cr, 0.0, 0.62, 0.45, 0.9);
  cairo_set_line_width(cr, 1.2);
  cairo_new_path(cr);
  for (const cv::Point2d& corner : coupon.outline_mm) {
    const cv::Point2d at = patch.PixelFromCoupon(corner) + cv::Point2d(0.5, 0.5);
    cairo_line_to(cr, at.x, at.y);
  }
  cairo_close_path(cr);
  cairo_stroke(cr);
  for (const Hole& hole : coupon.holes) {
    const cv::Point2d at = patch.PixelFromCoupon({hole.x_mm, hole.y_mm}) + cv::Point2d(0.5, 0.5);
    cairo_arc(cr, at.x, at.y, hole.diameter_mm / 2 * patch.px_per_mm, 0, 2 * std::numbers::pi);
    cairo_stroke(cr);
  }
}

void DrawFieldBorder(cv::Mat& picture, const Patch& patch) {
  const cv::Mat field = patch.regions == static_cast<int>(Region::kField);
  std::vector<std::vector<cv::Point>> borders;
  cv::findContours(field, borders, cv::RETR_LIST, cv::CHAIN_APPROX_NONE);
  for (const auto& border : borders) {
    for (size_t i = 0; i < border.size(); ++i) {
      if (i / 6 % 2 == 0) picture.at<cv::Vec4b>(border[i]) = cv::Vec4b(200, 200, 80, 0);
    }
  }
}

void DrawText(cairo_t* cr, double x_px, double y_px, const std::string& text) {
  cairo_move_to(cr, x_px, y_px);
  cairo_show_text(cr, text.c_str());
}

void DrawLegend(cairo_t* cr, const std::vector<Mark>& marks, double y_px) {
  double x_px = 12;
  for (const Ink& ink : kInks) {
    const auto count = std::count_if(marks.begin(), marks.end(),
                                     [&](const Mark& mark) { return mark.kind == ink.kind; });
    cairo_set_source_rgb(cr, ink.red, ink.green, ink.blue);
    cairo_rectangle(cr, x_px, y_px - 11, 12, 12);
    cairo_fill(cr);
    cairo_set_source_rgb(cr, 0.9, 0.9, 0.9);
    const std::string text = fmt::format("{} {}", count, ink.name);
    DrawText(cr, x_px + 17, y_px, text);
    cairo_text_extents_t extents;
    cairo_text_extents(cr, text.c_str(), &extents);
    x_px += 17 + extents.x_advance + 18;
  }
}

}  // namespace

cv::Mat PictureOfPatch(const Patch& patch) {
  // A table over relative reflectance in steps finer than the 8-bit result.
  constexpr int kSteps = 4096;
  const double full = 1 / kOwnLevelLinear;  // relative reflectance that shows as white
  cv::Mat table(1, kSteps, CV_8UC1);
  for (int i = 0; i < kSteps; ++i) {
    const double linear = static_cast<double>(i) / (kSteps - 1);
    table.at<uchar>(i) = cv::saturate_cast<uchar>(255 * SrgbFromLinear(linear));
  }
  cv::Mat picture(patch.relative.size(), CV_8UC1);
  for (int row = 0; row < picture.rows; ++row) {
    const float* from = patch.relative.ptr<float>(row);
    uchar* to = picture.ptr<uchar>(row);
    for (int col = 0; col < picture.cols; ++col) {
      const double step = from[col] / full * (kSteps - 1);
      to[col] = table.at<uchar>(static_cast<int>(std::clamp(step, 0.0, kSteps - 1.0)));
    }
  }
  return picture;
}

cv::Mat PictureToJudge(const Patch& patch) {
  constexpr double kSeenAroundMm = 0.2;
  constexpr int kAroundGray = 60;
  std::vector<std::vector<cv::Point>> outlines;  // without the holes
  const cv::Mat on_coupon = patch.regions != static_cast<int>(Region::kOff);
  cv::findContours(on_coupon, outlines, cv::RETR_EXTERNAL, cv::CHAIN_APPROX_NONE);
  cv::Mat seen(patch.regions.size(), CV_8UC1, cv::Scalar(0));
  cv::drawContours(seen, outlines, -1, cv::Scalar(255), cv::FILLED);
  const int reach_px = cvRound(kSeenAroundMm * patch.px_per_mm);
  cv::dilate(seen, seen,
             cv::getStructuringElement(cv::MORPH_RECT, {2 * reach_px + 1, 2 * reach_px + 1}));
  cv::Mat picture = PictureOfPatch(patch);
  picture.setTo(cv::Scalar(kAroundGray), seen == 0);
  return picture;
}

cv::Mat PictureOfFindings(const Patch& patch, const CouponDescription& coupon,
                          const std::vector<Mark>& marks, const std::vector<std::string>& caption) {
  const cv::Mat gray = PictureOfPatch(patch);
  const int caption_px = kLineHeightPx * static_cast<int>(caption.size() + 1) + 12;
  cv::Mat picture(gray.rows + caption_px, gray.cols, CV_8UC4, cv::Scalar(32, 32, 32, 0));
  cv::cvtColor(gray, picture.rowRange(0, gray.rows), cv::COLOR_GRAY2BGRA);
  DrawFieldBorder(picture, patch);

  const SurfaceHandle surface(cairo_image_surface_create_for_data(picture.data, CAIRO_FORMAT_RGB24,
                                                                  picture.cols, picture.rows,
                                                                  static_cast<int>(picture.step)));
  const Context cr(cairo_create(surface.get()));
  DrawOutline(cr.get(), patch, coupon);
  for (const Mark& mark : marks) {
    const auto ink = std::find_if(kInks.begin(), kInks.end(), [&](const Ink& candidate) {
      return candidate.kind == mark.kind;
    });
    DrawMark(cr.get(), patch, mark, *ink);
  }
  cairo_select_font_face(cr.get(), "sans-serif", CAIRO_FONT_SLANT_NORMAL, CAIRO_FONT_WEIGHT_NORMAL);
  cairo_set_font_size(cr.get(), kFontPx);
  cairo_set_source_rgb(cr.get(), 0.95, 0.95, 0.95);
  double y_px = gray.rows + kLineHeightPx;
  for (const std::string& line : caption) {
    DrawText(cr.get(), 12, y_px, line);
    y_px += kLineHeightPx;
  }
  DrawLegend(cr.get(), marks, y_px);
  cairo_surface_flush(surface.get());
  return picture;
}

}  // namespace laygauge
