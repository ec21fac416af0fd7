#pragma once

#include <string>

#include "base/error.h"
#include "coupon/patch.h"
#include "coupon/photo_noise.h"
#include "sheet/edge_sharpness.h"

namespace laygauge {

struct EqualizeOptions {
  // The resolution that all patches are brought to: a Gaussian point spread, standard deviation.
  // 0.060 mm passes 45 % of a line pitch of 0.3 mm, 64 % of 0.4 mm, 89 % of 0.8 mm.
  double working_blur_sd_mm = 0.060;
  // Above 1, detail of a photo blurrier than that is amplified, with its noise, up to this.
  double max_gain = 2;

  void Check() const;  // throws BadOption
};

// What the photo and the sheet tell about the place where a coupon lies.
struct PatchPlace {
  std::string where;            // for messages: "plate.jpg, well A1"
  LocalSpread spread;           // SheetSharpness::At(x, y, turn)
  double paper_light = 0;       // linear light of paper there: SheetSharpness::paper
  double resampling_sd_mm = 0;  // blur that rectification added, for a photo finer than the patch
  PhotoNoise noise;             // MeasureNoise
};

// The patch at the working resolution: `relative` filtered (DesignEqualizer) and brought back to a
// field mean of 1, `level`, blur_sd_mm and noise_sd to match. The filter is linear and has unit
// gain for what is uniform, so it may come before or after the division by light and level. The
// coupon's top is nearer to the camera than the paper where the spread was measured; at 2.5 mm in
// 200 mm that makes the spread 1.3 % smaller, which is left.
// Problem: blurrier than can be restored: along either axis the modulation at the frequency where
// the working resolution leaves 10 % is below 10 % / max_gain.
[[nodiscard]] Expected<Patch> Equalize(const Patch& patch, const PatchPlace& place,
                                       const EqualizeOptions& options = {});

}  // namespace laygauge
