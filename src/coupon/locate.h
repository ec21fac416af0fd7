#pragma once

#include <optional>
#include <string>

#include "coupon/coupon_description.h"
#include "coupon/light.h"
#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/sheet_description.h"

namespace laygauge {

struct LocateOptions {
  double reach_mm = 4.5;        // the centre may be this far off the well's
  double turn_reach_deg = 9;    // and the coupon turned this far, either way
  double fewest_outline = 0.8;  // share of the outline that must be seen
  double fewest_holes = 0.75;   // share of each hole's edge that must be seen
  void Check() const;           // throws BadOption
};

// Where a coupon lies.
struct Placement {
  double center_x_mm = 0;  // on the sheet, of the coupon's origin
  double center_y_mm = 0;
  double turn_deg = 0;  // counter-clockwise seen from above, -180..180
  double center_sd_mm = 0;
  double turn_sd_deg = 0;
  double outline_seen = 0;  // share of the outline's length on which its edge was found
  double holes_seen = 0;    // the same of the worst hole; 0 without holes
  double quality = 0;       // 0..1: the smaller of the two
};

enum class WellState {
  kCoupon,   // placement is there
  kEmpty,    // bare paper
  kUnclear,  // something lies there, or the photo does not show it well: reason says why
};

struct WellFinding {
  WellState state = WellState::kUnclear;
  std::optional<Placement> placement;
  std::string reason;  // of kUnclear; for kCoupon what is to be noted, mostly nothing
};

// Finds the coupon in a well. Coarse to fine: the drawing's edges are tried at all positions and
// turns within reach (and a quarter, a half and three quarters further, which is noted) on the
// gradient of a reduced picture, then on the full one; the best is refined by FitEdges.
[[nodiscard]] WellFinding LocateCoupon(const Photo& photo, const View& view, const Light& light,
                                       const SheetDescription& sheet, const Well& well,
                                       const CouponDescription& coupon,
                                       const LocateOptions& options);

}  // namespace laygauge
