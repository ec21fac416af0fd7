#pragma once

#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "coupon/light.h"
#include "coupon/locate.h"
#include "grade/scale.h"
#include "photo/photo.h"
#include "report/result.h"
#include "sheet/edge_sharpness.h"
#include "sheet/estimate_camera.h"
#include "texture/metric.h"

namespace laygauge {

struct NamedFeature {
  std::string name;
  Feature feature;
};

// Everything measured on one coupon in one photo.
struct CouponRecord {
  std::string well;
  CouponStatus status = CouponStatus::kEmpty;
  std::string note;
  std::optional<Placement> placement;
  double level = 0;       // the field's mean reflectance, 1 = paper white
  double noise_sd = 0;    // Patch::noise_sd
  double blur_sd_mm = 0;  // Patch::blur_sd_mm, the working resolution
  std::vector<NamedFeature> features;
  std::vector<Mark> marks;
  std::optional<Score> score;  // of this photo alone
  std::string fault;
  std::string fault_evidence;
};

// A coupon's features as the scale reads them.
[[nodiscard]] FeatureTable FeaturesOf(const CouponRecord& coupon);

// Everything measured in one photo, with what made it.
struct PhotoRecord {
  std::string file;  // without its folder
  std::string stem;
  std::string batch;
  std::string take;
  std::string operator_name;
  std::string filament;
  cv::Size size_px;
  CameraTags tags;
  std::string sheet;
  double bar_mm = 0;  // the scale bar's length that was used
  std::string coupon;
  CameraEstimate camera;
  Light light;
  SheetSharpness sharpness;
  double px_per_mm = 20;  // of the patches
  std::string scale_name;
  std::string scale_hash;
  std::vector<std::pair<std::string, double>> options;  // of the stages, as used
  std::vector<std::string> notes;
  std::vector<CouponRecord> coupons;
};

// DIR/records/<photo>.json (docs/formats.md).
[[nodiscard]] std::string FormatRecord(const PhotoRecord& record);

}  // namespace laygauge
