#include "sheet/draw_sheet.h"

#include <cairo-pdf.h>
#include <cairo.h>
#include <fmt/format.h>

#include <memory>
#include <numbers>
#include <stdexcept>

#include "photo/srgb.h"
#include "sheet/marker_outline.h"

namespace laygauge {
namespace {

constexpr double kPointsPerMm = 72 / 25.4;
constexpr double kBlack = 0;
constexpr double kInk = 0.35;    // encoded gray of letters
constexpr double kFrame = 0.62;  // encoded gray of the wells' frames
constexpr double kFrameLine_mm = 0.25;
constexpr double kWellName_mm = 3.4;
constexpr double kNote_mm = 2.2;

enum class Anchor { kLeft, kMiddle };

struct Destroyer {
  void operator()(cairo_t* cairo) const { cairo_destroy(cairo); }
  void operator()(cairo_surface_t* surface) const { cairo_surface_destroy(surface); }
};

cairo_status_t Append(void* to, const unsigned char* bytes, unsigned size) {
  static_cast<std::string*>(to)->append(reinterpret_cast<const char*>(bytes), size);
  return CAIRO_STATUS_SUCCESS;
}

// A page in millimetres.
class Page {
 public:
  Page(double width_mm, double height_mm, const std::string& title)
      : surface_(cairo_pdf_surface_create_for_stream(Append, &bytes_, width_mm * kPointsPerMm,
                                                     height_mm * kPointsPerMm)),
        cairo_(cairo_create(surface_.get())) {
    cairo_pdf_surface_set_metadata(surface_.get(), CAIRO_PDF_METADATA_TITLE, title.c_str());
    cairo_scale(cairo_.get(), kPointsPerMm, kPointsPerMm);
    // Built into Cairo: independent of the fonts that are installed.
    cairo_select_font_face(cairo_.get(), "@cairo:", CAIRO_FONT_SLANT_NORMAL,
                           CAIRO_FONT_WEIGHT_NORMAL);
    cairo_font_options_t* options = cairo_font_options_create();
    cairo_font_options_set_hint_style(options, CAIRO_HINT_STYLE_NONE);
    cairo_font_options_set_hint_metrics(options, CAIRO_HINT_METRICS_OFF);
    cairo_set_font_options(cairo_.get(), options);
    cairo_font_options_destroy(options);
  }
  Page(const Page&) = delete;
  Page& operator=(const Page&) = delete;

  void Box(double x_mm, double y_mm, double width_mm, double height_mm, double gray) {
    SetGray(gray);
    cairo_rectangle(cairo_.get(), x_mm - width_mm / 2, y_mm - height_mm / 2, width_mm, height_mm);
    cairo_fill(cairo_.get());
  }

  void Frame(double x_mm, double y_mm, double width_mm, double height_mm) {
    SetGray(kFrame);
    cairo_set_line_width(cairo_.get(), kFrameLine_mm);
    cairo_rectangle(cairo_.get(), x_mm - width_mm / 2, y_mm - height_mm / 2, width_mm, height_mm);
    cairo_stroke(cairo_.get());
  }

  // `tilt_deg`: counter-clockwise as seen.
  void TiltedSquare(double x_mm, double y_mm, double side_mm, double tilt_deg) {
    cairo_save(cairo_.get());
    cairo_translate(cairo_.get(), x_mm, y_mm);
    cairo_rotate(cairo_.get(), -tilt_deg * std::numbers::pi / 180);
    Box(0, 0, side_mm, side_mm, kBlack);
    cairo_restore(cairo_.get());
  }

  void Marker(const SheetMarker& marker) {
    const double cell_mm = marker.side_mm / kMarkerCells;
    const double left = marker.x_mm - marker.side_mm / 2;
    const double top = marker.y_mm - marker.side_mm / 2;
    SetGray(kBlack);
    cairo_new_path(cairo_.get());  // text leaves a point
    for (const auto& outline : MarkerOutline(marker.id)) {
      for (const cv::Point& corner : outline) {
        cairo_line_to(cairo_.get(), left + corner.x * cell_mm, top + corner.y * cell_mm);
      }
      cairo_close_path(cairo_.get());
      cairo_new_sub_path(cairo_.get());
    }
    cairo_fill(cairo_.get());
  }

  void Text(double x_mm, double baseline_mm, double size_mm, Anchor anchor,
            const std::string& text) {
    SetGray(kInk);
    cairo_set_font_size(cairo_.get(), size_mm);
    cairo_text_extents_t extents;
    cairo_text_extents(cairo_.get(), text.c_str(), &extents);
    const double begin = anchor == Anchor::kLeft ? x_mm : x_mm - extents.x_advance / 2;
    cairo_move_to(cairo_.get(), begin, baseline_mm);
    cairo_show_text(cairo_.get(), text.c_str());
  }

  std::string Finish() {
    cairo_show_page(cairo_.get());
    cairo_surface_finish(surface_.get());
    for (const cairo_status_t status :
         {cairo_status(cairo_.get()), cairo_surface_status(surface_.get())}) {
      if (status != CAIRO_STATUS_SUCCESS) {
        throw std::runtime_error(fmt::format("drawing: {}", cairo_status_to_string(status)));
      }
    }
    return std::move(bytes_);
  }

 private:
  void SetGray(double encoded) { cairo_set_source_rgb(cairo_.get(), encoded, encoded, encoded); }

  std::string bytes_;
  std::unique_ptr<cairo_surface_t, Destroyer> surface_;
  std::unique_ptr<cairo_t, Destroyer> cairo_;
};

void DrawWell(Page& page, const Well& well, double floor_reflectance) {
  if (floor_reflectance < 1) {
    page.Box(well.x_mm, well.y_mm, well.width_mm, well.height_mm,
             SrgbFromLinear(floor_reflectance));
  }
  page.Frame(well.x_mm, well.y_mm, well.width_mm, well.height_mm);
  page.Text(well.x_mm - well.width_mm / 2, well.y_mm - well.height_mm / 2 - 0.9, kWellName_mm,
            Anchor::kLeft, well.name);
}

// The bar with a stop at each end, for the jaws of a calliper, and what to do with it.
void DrawScaleBar(Page& page, const ScaleBar& bar) {
  constexpr double kThick_mm = 0.8;
  constexpr double kStopWidth_mm = 0.4;
  constexpr double kStopHeight_mm = 2.4;
  const double middle = (bar.x0_mm + bar.x1_mm) / 2;
  page.Box(middle, bar.y_mm, bar.length_mm(), kThick_mm, kBlack);
  for (const double x : {bar.x0_mm + kStopWidth_mm / 2, bar.x1_mm - kStopWidth_mm / 2}) {
    page.Box(x, bar.y_mm, kStopWidth_mm, kStopHeight_mm, kBlack);
  }
  page.Text(middle, bar.y_mm - 2, kNote_mm, Anchor::kMiddle,
            fmt::format("this bar: {:.2f} mm", bar.length_mm()));
  page.Text(middle, bar.y_mm + 3.4, kNote_mm, Anchor::kMiddle, "print at 100 %");
  page.Text(middle, bar.y_mm + 6.0, kNote_mm, Anchor::kMiddle,
            fmt::format("not {:.2f}? use --bar-mm", bar.length_mm()));
}

void DrawSheetName(Page& page, const SheetDescription& sheet) {
  if (sheet.grays.empty()) return;
  const GrayPatch& first = sheet.grays.front();
  const GrayPatch& last = sheet.grays.back();
  page.Text((first.x_mm + last.x_mm) / 2, first.y_mm + first.side_mm / 2 + 3.6, kNote_mm,
            Anchor::kMiddle, fmt::format("sheet {} version {}", sheet.name, sheet.version));
}

}  // namespace

std::string DrawSheet(const SheetDescription& sheet) {
  Page page(sheet.page_width_mm, sheet.page_height_mm,
            fmt::format("laygauge sheet {} version {}", sheet.name, sheet.version));
  for (const Well& well : sheet.wells) DrawWell(page, well, sheet.well_floor_reflectance);
  for (const SheetMarker& marker : sheet.markers) page.Marker(marker);
  for (const SharpnessSquare& square : sheet.sharpness_squares) {
    page.TiltedSquare(square.x_mm, square.y_mm, square.side_mm, square.tilt_deg);
  }
  for (const GrayPatch& gray : sheet.grays) {
    page.Box(gray.x_mm, gray.y_mm, gray.side_mm, gray.side_mm, SrgbFromLinear(gray.reflectance));
  }
  DrawScaleBar(page, sheet.scale_bar);
  DrawSheetName(page, sheet);
  return page.Finish();
}

}  // namespace laygauge
