#pragma once

#include <Eigen/Core>
#include <string>
#include <vector>

#include "base/error.h"
#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/point_spread.h"
#include "sheet/sheet_description.h"
#include "sheet/slanted_edge.h"

namespace laygauge {

struct EdgeSharpnessOptions {
  double half_width_mm = 1.1;   // of the strip that is read on either side of an edge
  double corner_trim_mm = 1.2;  // left out at either end
  double bins_per_px = 4;       // ISO 12233's sampling of the edge spread
  double min_contrast = 0.05;   // bright minus dark, linear light
  double max_offset_mm = 0.6;   // farther from where the sheet puts it: not this edge
  double max_residual = 0.08;   // of the contrast, rms: dirty, covered or torn beyond
  double min_square_edges = 4;  // fewer usable edges of squares: the markers' are read too
  double min_marker_turn_deg =
      1;  // a marker's edge nearer to the pixel rows is left out if others are

  void Check() const;  // throws BadOption
};

// One edge of a square, measured across it on the sheet.
struct EdgeSharpness {
  std::string target;  // "sharpness square 2", "marker 7"
  std::string side;    // "right", "bottom", "left", "top": of the sheet's frame
  Eigen::Vector2d at_mm = Eigen::Vector2d::Zero();  // its middle
  bool across_x = false;    // measured along the sheet's x axis (a left or right side) or its y
  double turn_deg = 0;      // between the edge and the nearer of the pixel rows and columns, 0..45
  double px_per_mm = 0;     // across the edge
  EdgeFit fit;              // linear light; spread as the model sees it
  double mtf50_per_mm = 0;  // ISO 12233, from the edge spread itself
  std::vector<double> modulation;  // at kReportedCyclesPerMm
  Shoot shoot;
  double rise_mm = 0;  // 10 to 90 % of the contrast, of the fit
};

// A millimetre's worth of cycles at which EdgeSharpness::modulation is given.
inline constexpr double kReportedCyclesPerMm[] = {1, 2, 3, 4, 5, 6};

// The point spread at a place, along the axes of whatever lies there.
struct LocalSpread {
  PointSpread along_x;
  PointSpread along_y;
  double px_per_mm = 0;  // of the photo
};

// How sharp a photo of a sheet is, and where. Blur is taken as a plane over the sheet for each of
// its axes (a tilted focal plane shows as a slope); the sharpening as one for the photo, in pixels.
struct SheetSharpness {
  std::vector<EdgeSharpness> edges;
  std::vector<std::string> skipped;  // what could not be used, and why: one sentence each
  bool from_markers = false;         // too few edges of squares: markers' are among `edges`
  double sharpening = 0;             // PointSpread's
  double halo_sd_px = 0;

  // c[0] + c[1] x + c[2] y on the sheet, held within the range of what was measured.
  struct Plane {
    Eigen::Vector3d coefficients = Eigen::Vector3d::Zero();
    double low = 0;
    double high = 0;
    [[nodiscard]] double At(double x_mm, double y_mm) const;
  };
  Plane blur_x_mm;
  Plane blur_y_mm;
  Plane pixel_mm;
  Plane paper;  // linear light beside the edges

  // For something that lies turned counter-clockwise (seen from above) by turn_deg.
  [[nodiscard]] LocalSpread At(double x_mm, double y_mm, double turn_deg) const;
};

// The slanted-edge method (ISO 12233:2014, edge-based spatial frequency response) at the sheet's
// tilted squares, in linear light. The tilt's sense is found from the photo: sheets exist with
// either. Departures: distances are measured on the sheet, across an edge whose course the view
// predicts (a cubic map about each edge) and the pixels refine; the plateaus come from a fit
// (PointSpread), so that over- and undershoot are measured against them; see ModulationTransfer.
// Squares that lie partly outside the photo, are covered or dirty are left out and named; if fewer
// than min_square_edges edges remain, the outer edges of the markers are read as well.
// Problem: no usable edge at all.
[[nodiscard]] Expected<SheetSharpness> MeasureSharpness(const Photo& photo, const View& view,
                                                        const SheetDescription& sheet,
                                                        const EdgeSharpnessOptions& options = {});

}  // namespace laygauge
