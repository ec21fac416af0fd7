#pragma once

#include <opencv2/core.hpp>

#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/edge_sharpness.h"
#include "sheet/sheet_description.h"

namespace laygauge {

// What sensor and file add to one pixel of an equalised patch: a variance that grows with the
// light (read-out plus photon noise; Janesick 2007, "Photon Transfer"), linear light.
struct PhotoNoise {
  double variance_in_dark = 0;
  double variance_by_light = 0;  // a unit of linear light

  // Standard deviation of relative reflectance where the mean is `linear_light` > 0.
  [[nodiscard]] double RelativeSd(double linear_light) const;
};

// From what is flat on the sheet (the insides of the sharpness squares, the paper beside them, the
// grays), filtered as patches will be: so a phone's sharpening and the file's rounding are in it.
// The paper's own texture is in it too. On lines, JPEG's rounding differs from that on flat areas.
// `working_sd_mm`, `max_gain`: as in EqualizeOptions.
// Problem: none of these can be read.
[[nodiscard]] Expected<PhotoNoise> MeasureNoise(const Photo& photo, const View& view,
                                                const SheetDescription& sheet,
                                                const SheetSharpness& sharpness,
                                                double working_sd_mm, double max_gain);

}  // namespace laygauge
