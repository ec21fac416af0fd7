#include "texture/gaps.h"

#include <fmt/core.h>

#include <algorithm>
#include <array>
#include <cmath>

#include "texture/line_undulation.h"
#include "texture/open_channels.h"

namespace laygauge {
namespace {

// Of a valley between touching lines, found on the sample plates (docs/metrics.md, "Gaps").
constexpr double kDeepUm = 25;               // in black, lit evenly
constexpr double kInterreflectionUm = 16.5;  // less in white: light from wall to wall
constexpr double kProbeGain = 1.0;
constexpr double kTiltGain = 0.7;  // shadow that light from one side casts
constexpr double kMinUm = 12;
// Beyond these the probe shows a mirrored lamp, not shading.
constexpr double kProbeLowUm = -8;
constexpr double kProbeHighUm = 42;
// As dark as this, the probe is dark because line tops mirror a lamp, and its tilt only says where.
constexpr double kMirrorUm = 40;

// A valley between two ridges is darker by up to twice what ridges make the valleys vary.
constexpr double kRidgeShadow = 2;

// How well the darkness of a closed valley is known (docs/metrics.md, "Gaps").
constexpr double kClosedSdUm = 3;

constexpr double kLinkMm = 0.1;  // across the lay, from station to station
constexpr int kTiles = 4;        // by 4: for the standard deviation

// What ridges add to the darkness of closed valleys.
double RidgeShadowUm(const Surface& surface) {
  if (!surface.lines) {
    return 0;
  }
  const LineUndulation undulation =
      MeasureLineUndulation(FindLinePieces(surface.valleys, surface.aligned.px_per_mm));
  return kRidgeShadow * RidgeBelief(undulation) * undulation.valley_um;
}

OpenChannels FindChannels(const Surface& surface) {
  const double lay_deg =
      surface.lines ? surface.lines->lay_deg : surface.coupon->lay_deg.value_or(0);
  const GrooveShading shading = MeasureGrooveShading(*surface.patch, *surface.coupon, lay_deg);
  const double closed_um =
      ClosedValleyDarknessUm(shading, surface.patch->level) + RidgeShadowUm(surface);
  return FindOpenChannels(surface.valleys, closed_um, kClosedSdUm,
                          kLinkMm * surface.aligned.px_per_mm);
}

struct Tile {
  double open_mm2 = 0;
  double area_mm2 = 0;
};
using Tiles = std::array<Tile, static_cast<std::size_t>(kTiles* kTiles)>;

Tiles MeasureTiles(const std::vector<OpenValley>& open, const LineValleys& valleys,
                   double px_per_mm) {
  Tiles tiles;
  const int stations = valleys.profiles.rows;
  const int rows = valleys.profiles.cols;
  const auto tile = [&](int station, int row) -> Tile& {
    const int index = row * kTiles / rows * kTiles + station * kTiles / stations;
    return tiles[static_cast<std::size_t>(index)];
  };
  for (int station = 0; station < stations; ++station) {
    const auto* profile = valleys.profiles.ptr<float>(station);
    for (int band = 0; band < kTiles; ++band) {
      const int from = (band * rows + kTiles - 1) / kTiles;
      const int to = ((band + 1) * rows + kTiles - 1) / kTiles;
      const auto inside = std::count_if(profile + from, profile + to,
                                        [](float value) { return !std::isnan(value); });
      tile(station, from).area_mm2 += static_cast<double>(inside) / px_per_mm * valleys.step_mm;
    }
  }
  for (const OpenValley& valley : open) {
    tile(valley.station, static_cast<int>(valley.row_px)).open_mm2 +=
        valley.width_mm * valleys.step_mm;
  }
  return tiles;
}

double AreaMm2(const Tiles& tiles) {
  double area = 0;
  for (const Tile& tile : tiles) {
    area += tile.area_mm2;
  }
  return area;
}

// Standard deviation that the tiles' scatter gives to the open area of all of them.
double ScatterMm2(const Tiles& tiles, double open_mm2) {
  const double share = open_mm2 / AreaMm2(tiles);
  double squares = 0;
  int used = 0;
  for (const Tile& tile : tiles) {
    const double difference = tile.open_mm2 - share * tile.area_mm2;
    squares += difference * difference;
    used += tile.area_mm2 > 0 ? 1 : 0;
  }
  return used > 1 ? std::sqrt(squares * used / (used - 1)) : open_mm2;
}

Mark GapMark(const std::vector<OpenValley>& path, const Surface& surface) {
  Mark mark;
  mark.kind = MarkKind::kGap;
  for (const OpenValley& valley : path) {
    mark.width_mm += valley.width_mm / static_cast<double>(path.size());
  }
  const auto add = [&](const OpenValley& valley, double stations_on) {
    const double column =
        surface.valleys.ColumnPx(valley.station) + stations_on * surface.valleys.column_step_px;
    const cv::Vec2d mm = surface.aligned.coupon_from_aligned * cv::Vec3d(column, valley.row_px, 1);
    mark.path_mm.emplace_back(static_cast<float>(mm[0]), static_cast<float>(mm[1]));
  };
  constexpr std::size_t kEvery = 4;  // stations: 1 mm
  add(path.front(), -0.5);
  for (std::size_t i = kEvery; i + kEvery < path.size(); i += kEvery) {
    add(path[i], 0);
  }
  add(path.back(), 0.5);
  return mark;
}

Finding WithoutGaps(const std::string& reason) {
  const Feature none{std::nullopt, std::nullopt, reason};
  return {{none, none, none, none, none}, {}};
}

Finding MeasureGaps(const Surface& surface) {
  if (surface.torn.Failed()) {
    return WithoutGaps(
        fmt::format("{:.0f} % of the field is torn or lifted, and gaps cannot be told from tears",
                    surface.torn.area_pct));
  }
  const OpenChannels found = FindChannels(surface);
  const Tiles tiles = MeasureTiles(found.valleys, surface.valleys, surface.aligned.px_per_mm);
  const double area_mm2 = AreaMm2(tiles);
  constexpr double kMinAreaMm2 = 25;
  if (area_mm2 < kMinAreaMm2) {
    return WithoutGaps("The coupon's field is smaller than 25 mm2: too little to judge its gaps.");
  }
  Finding finding;
  for (const auto& path : found.plain) {
    finding.marks.push_back(GapMark(path, surface));
  }
  // Counts scatter as their root (Poisson); lengths as the counts do.
  const double count_sd = std::sqrt(std::max(1.0, found.count.mean));
  const auto length_sd = [&](double mm) { return std::max(mm / count_sd, kMinChannelMm); };
  // Beside the scatter on the coupon stands what is not known of a closed valley.
  const auto feature = [](const ChannelSum& sum, double scatter, double per) {
    return Feature{sum.mean / per, std::hypot(scatter, sum.sd) / per, ""};
  };
  const double cm2 = area_mm2 / 100;
  finding.features = {feature(found.area_mm2, ScatterMm2(tiles, found.area_mm2.mean), cm2),
                      feature(found.count, count_sd, cm2),
                      feature(found.length_mm, length_sd(found.length_mm.mean), cm2),
                      feature(found.wide_mm, kClosedSdUm / 1000, 1),
                      feature(found.long_mm, length_sd(found.long_mm.mean), cm2)};
  return finding;
}

}  // namespace

double ClosedValleyDarknessUm(const GrooveShading& shading, double level) {
  const double probe = std::clamp(shading.darkness_um, kProbeLowUm, kProbeHighUm);
  const double matte = std::clamp(1 - probe / kMirrorUm, 0.0, 1.0);
  return std::max(kMinUm, kDeepUm - kInterreflectionUm * level + kProbeGain * probe +
                              kTiltGain * matte * shading.tilt_um);
}

Metric GapsMetric() {
  return {"gaps",
          4,
          {{"gap_area_pct", "share of the field that open channels between lines take"},
           {"gaps_per_cm2", "open channels of 1.25 mm and more"},
           {"gap_length_mm_per_cm2", "their length together"},
           {"gap_wide_mm", "width that one in ten of all valleys exceeds"},
           {"gap_long_mm_per_cm2", "length of those of 5 mm and more"}},
          &MeasureGaps};
}

}  // namespace laygauge
