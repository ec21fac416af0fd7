#pragma once

#include <vector>

#include "texture/line_valleys.h"

namespace laygauge {

// How valleys and tops of the lines vary along the lay within about a millimetre: the lumps of
// surplus plastic. What varies over several millimetres, as lines do that wander, is left out.
struct LineUndulation {
  double valley_um = 0;     // standard deviation of the valleys' darkness
  double valley_share = 0;  // of the whole variance of that darkness that is within a millimetre
  // Root of that share of the variance of the valleys' brightness less that of the tops', % of the
  // coupon's own.
  double dark_pct = 0;
  double dark_pct_sd = 0;  // of dark_pct, from four parts of the field
};

// A valley and the line beside it at one station. Values are less their mean over a tile.
struct LinePiece {
  float row_px = 0;
  float bottom_pct = 0;   // brightness of the valley, % of the coupon's own
  float top_pct = 0;      // of the brightest place up to the next valley
  float darkness_um = 0;  // LineValley's
  int tile = 0;
  int next = -1;  // the same line's piece at the next station; none: -1
};

using LinePieces = std::vector<std::vector<LinePiece>>;

// Stations that share no pixel: every kPieceStride-th of `valleys`.
inline constexpr int kPieceStride = 2;

[[nodiscard]] LinePieces FindLinePieces(const LineValleys& valleys, double px_per_mm);

[[nodiscard]] LineUndulation MeasureLineUndulation(const LinePieces& pieces);

// How far the undulation is ridges' doing, 0 to 1. docs/metrics.md, "Ridges".
[[nodiscard]] double RidgeBelief(const LineUndulation& undulation);

}  // namespace laygauge
