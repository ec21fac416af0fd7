#pragma once

#include <optional>
#include <vector>

#include "base/error.h"
#include "coupon/coupon_description.h"
#include "coupon/equalize.h"
#include "coupon/light.h"
#include "coupon/locate.h"
#include "coupon/make_patch.h"
#include "coupon/patch.h"
#include "coupon/regions.h"
#include "photo/photo.h"
#include "report/record.h"
#include "sheet/edge_sharpness.h"
#include "sheet/estimate_camera.h"
#include "sheet/sheet_description.h"

namespace laygauge {

// The options of every stage from the camera to the patch, as one.
struct MeasurePhotoOptions {
  // Coarser JPEGs are refused: below, blocks hide and imitate faint lines.
  double least_jpeg_quality = 50;
  double good_jpeg_quality = 75;  // coarser ones are noted
  LightOptions light;
  EdgeSharpnessOptions sharpness;
  LocateOptions locate;
  RegionOptions regions;
  PatchOptions patch;
  EqualizeOptions equalize;
  bool keep_patches = true;  // 3 MB a coupon, for pictures
  void Check() const;        // throws BadOption
};

struct PhotoMeasurement {
  PhotoRecord record;
  // Parallel to record.coupons; none: not measured, or not to be kept.
  std::vector<std::optional<Patch>> patches;
};

// Measures every well of the sheet, on all of OpenCV's threads. A well that cannot be measured is
// `retake` or `empty` in the record, with its reason. The record's batch, scale and score are left
// to the caller.
// Problem: the photo as a whole cannot be measured (too dark, too coarsely coded, no sharp
// edge to judge it by, ...).
[[nodiscard]] Expected<PhotoMeasurement> MeasurePhoto(const Photo& photo,
                                                      const SheetDescription& sheet,
                                                      const CameraEstimate& camera,
                                                      const CouponDescription& coupon,
                                                      const CouponRegions& regions,
                                                      const MeasurePhotoOptions& options);

}  // namespace laygauge
