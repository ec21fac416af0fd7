#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <vector>

#include "base/error.h"
#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/sheet_description.h"

namespace laygauge {

struct LightOptions {
  int degree = 4;                     // of the polynomial in x and y together
  double keep_off_mm = 1.2;           // paper is sampled this far from anything printed
  double darkest_paper = 0.04;        // linear light; darker paper is refused
  double allowed_gamma_error = 0.25;  // the tone curve's exponent, off 1, before a warning
  void Check() const;                 // throws BadOption
};

// What the gray patches say about the camera's tone curve. Reported, not corrected: a home
// printer's grays are nominal, and the phone's curve differs by scene.
struct ToneCheck {
  double gamma = 1;              // measured reflectance ~ nominal ^ gamma
  double scale = 1;              // measured reflectance over nominal, at white
  double residual_sd = 0;        // of ln(reflectance) about that law
  std::vector<double> measured;  // reflectance, in the order of sheet.grays; NaN: not in the photo
};

// The light that falls on the sheet, with the lens's vignetting: linear light that white paper
// would show at each place of the sheet.
struct Light {
  cv::Point2d page_mm;  // the page's size
  int degree = 0;
  std::vector<double> coefficients;   // of ln(light), terms x^i y^j, i + j <= degree
  double residual_sd = 0;             // robust, of ln(paper) about the field
  double unevenness = 0;              // over the wells: brightest over darkest place, minus 1
  double clipped_pct = 0;             // share of the paper samples at full scale
  double used_pct = 0;                // share of the paper samples that the fit rests on
  std::optional<ToneCheck> tone;      // none: fewer than 3 gray patches in the photo
  std::vector<std::string> warnings;  // a sentence each

  [[nodiscard]] double At(double x_mm, double y_mm) const;
};

// Paper is sampled wherever the sheet prints nothing. Coupons that stick out of their wells,
// their shadows, smudges, and whatever lies beyond a torn edge drop out of the fit (Tukey's
// biweight, stricter on the dark side: all of these darken). Over-exposed paper counts as a lower
// bound; where most of it is, the gray patches raise the whole field to their nominal reflectance.
// Problem: paper not in the photo, or too dark.
[[nodiscard]] Expected<Light> EstimateLight(const Photo& photo, const View& view,
                                            const SheetDescription& sheet,
                                            const LightOptions& options);

}  // namespace laygauge
