#include "texture/ridges.h"

#include <algorithm>
#include <cmath>
#include <vector>

#include "texture/line_undulation.h"

namespace laygauge {
namespace {

// Height of a ridge for each % by which it makes valleys vary more than tops, in black, and how
// much of the light in the valleys white plastic makes up (docs/metrics.md, "Ridges").
constexpr double kHeightUm = 9;
constexpr double kInterreflection = 0.35;
constexpr double kFloorUm = 3;      // standard deviation where nothing is seen
constexpr double kMarkedSd = 1.25;  // of the darkness that a mark shows

// Where a valley is darkest against its surroundings, 1 mm and longer.
std::vector<Mark> RidgeMarks(const LinePieces& stations, double limit_um,
                             const LineValleys& valleys, const AlignedField& field) {
  const double link_px = valleys.pitch_mm * field.px_per_mm / 4;
  struct Run {
    float row_px = 0;
    std::size_t first = 0;
  };
  std::vector<Mark> marks;
  std::vector<Run> last;
  std::vector<Run> now;
  const auto place = [&](std::size_t station, float row_px) {
    const double column = valleys.ColumnPx(static_cast<int>(station) * kPieceStride);
    const cv::Vec2d mm = field.coupon_from_aligned * cv::Vec3d(column, row_px, 1);
    return cv::Point2f(static_cast<float>(mm[0]), static_cast<float>(mm[1]));
  };
  const auto finish = [&](const Run& run, std::size_t end) {
    constexpr std::size_t kMinStations = 2;
    if (end - run.first >= kMinStations) {
      marks.push_back({MarkKind::kRidge,
                       {place(run.first, run.row_px), place(end, run.row_px)},
                       false,
                       valleys.pitch_mm / 2});
    }
  };
  for (std::size_t s = 0; s < stations.size(); ++s) {
    now.clear();
    std::size_t k = 0;
    for (const LinePiece& piece : stations[s]) {
      if (piece.darkness_um < limit_um) {
        continue;
      }
      while (k < last.size() && last[k].row_px < piece.row_px - link_px) {
        finish(last[k++], s);
      }
      if (k < last.size() && last[k].row_px <= piece.row_px + link_px) {
        now.push_back({piece.row_px, last[k++].first});
      } else {
        now.push_back({piece.row_px, s});
      }
    }
    for (; k < last.size(); ++k) {
      finish(last[k], s);
    }
    std::swap(last, now);
  }
  return marks;
}

Finding MeasureRidges(const Surface& surface) {
  if (!surface.lines) {
    return {{{std::nullopt, std::nullopt, surface.no_lines_reason}}, {}};
  }
  const LinePieces pieces = FindLinePieces(surface.valleys, surface.aligned.px_per_mm);
  const LineUndulation undulation = MeasureLineUndulation(pieces);
  const double belief = RidgeBelief(undulation);
  const double um_per_pct =
      kHeightUm / (1 - kInterreflection * std::clamp(surface.patch->level, 0.0, 1.0));
  const double height_um = belief * um_per_pct * undulation.dark_pct;
  const double sd_um = std::hypot(belief * um_per_pct * undulation.dark_pct_sd, kFloorUm);
  Finding finding{{{height_um, sd_um, ""}}, {}};
  if (belief > 0.5) {
    finding.marks =
        RidgeMarks(pieces, kMarkedSd * undulation.valley_um, surface.valleys, surface.aligned);
  }
  return finding;
}

}  // namespace

Metric RidgesMetric() {
  return {"ridges",
          2,
          {{"ridge_um", "height of raised line edges, from what they make of the light"}},
          &MeasureRidges};
}

}  // namespace laygauge
