#include "texture/gaps.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "texture/line_undulation.h"

namespace laygauge {
namespace {

// Of a valley between touching lines, found on the sample plates (docs/metrics.md, "Gaps").
constexpr double kDeepUm = 25.5;           // in black, lit evenly
constexpr double kInterreflectionUm = 16;  // less in white: light from wall to wall
constexpr double kProbeGain = 1.0;
constexpr double kTiltGain = 0.75;  // shadow that light from one side casts
constexpr double kMinUm = 12;
// Beyond these the probe shows a mirrored lamp, not shading.
constexpr double kProbeLowUm = -8;
constexpr double kProbeHighUm = 42;
// As dark as this, the probe is dark because line tops mirror a lamp, and its tilt only says where.
constexpr double kMirrorUm = 40;

// A valley between two ridges is darker by up to twice what ridges make the valleys vary.
constexpr double kRidgeShadow = 2;

// Light that a channel takes for each width of it: its floor is not wholly dark.
constexpr double kOpenDarkness = 0.9;

constexpr double kMinOpenUm = 4;       // of a channel's every part
constexpr double kMinWidestUm = 10;    // of its widest part: twice what noise of the sample
                                       // plates makes of a closed valley
constexpr double kMinLengthMm = 0.75;  // a scar or a grain of noise is shorter along the lay
constexpr double kLongMm = 5;
constexpr double kLinkMm = 0.1;  // across the lay, from station to station
constexpr int kTiles = 4;        // by 4: for the standard deviation

struct ChannelPoint {
  int station = 0;
  float row_px = 0;
  double width_um = 0;
};

struct Channel {
  std::vector<ChannelPoint> points;  // one a station
  double widest_um = 0;
};

// Channels that still reach the last station, and the row where.
struct Growing {
  float row_px = 0;
  std::size_t channel = 0;
};

// Joins what is open at neighbouring stations.
std::vector<Channel> LinkOpenValleys(const LineValleys& valleys, double closed_um, double link_px) {
  std::vector<Channel> channels;
  std::vector<Growing> last;
  std::vector<Growing> now;
  for (std::size_t station = 0; station < valleys.stations.size(); ++station) {
    now.clear();
    std::size_t k = 0;
    for (const LineValley& valley : valleys.stations[station]) {
      const double width_um = (valley.darkness_um - closed_um) / kOpenDarkness;
      if (width_um < kMinOpenUm) {
        continue;
      }
      while (k < last.size() && last[k].row_px < valley.row_px - link_px) {
        ++k;
      }
      std::size_t channel = channels.size();
      if (k < last.size() && last[k].row_px <= valley.row_px + link_px) {
        channel = last[k++].channel;
      } else {
        channels.emplace_back();
      }
      channels[channel].points.push_back({static_cast<int>(station), valley.row_px, width_um});
      channels[channel].widest_um = std::max(channels[channel].widest_um, width_um);
      now.push_back({valley.row_px, channel});
    }
    std::swap(last, now);
  }
  return channels;
}

double LengthMm(const Channel& channel, const LineValleys& valleys) {
  return static_cast<double>(channel.points.size()) * valleys.step_mm;
}

// What ridges add to the darkness of closed valleys.
double RidgeShadowUm(const Surface& surface) {
  if (!surface.lines) {
    return 0;
  }
  const LineUndulation undulation =
      MeasureLineUndulation(FindLinePieces(surface.valleys, surface.aligned.px_per_mm));
  return kRidgeShadow * RidgeBelief(undulation) * undulation.valley_um;
}

std::vector<Channel> FindChannels(const Surface& surface) {
  const double lay_deg =
      surface.lines ? surface.lines->lay_deg : surface.coupon->lay_deg.value_or(0);
  const GrooveShading shading = MeasureGrooveShading(*surface.patch, *surface.coupon, lay_deg);
  const double closed_um =
      ClosedValleyDarknessUm(shading, surface.patch->level) + RidgeShadowUm(surface);
  std::vector<Channel> channels =
      LinkOpenValleys(surface.valleys, closed_um, kLinkMm * surface.aligned.px_per_mm);
  std::erase_if(channels, [&](const Channel& channel) {
    return LengthMm(channel, surface.valleys) < kMinLengthMm || channel.widest_um < kMinWidestUm;
  });
  return channels;
}

struct Tile {
  double open_mm2 = 0;
  double area_mm2 = 0;
};
using Tiles = std::array<Tile, static_cast<std::size_t>(kTiles* kTiles)>;

Tiles MeasureTiles(const std::vector<Channel>& channels, const LineValleys& valleys,
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
  for (const Channel& channel : channels) {
    for (const ChannelPoint& point : channel.points) {
      tile(point.station, static_cast<int>(point.row_px)).open_mm2 +=
          point.width_um / 1000 * valleys.step_mm;
    }
  }
  return tiles;
}

// Share of the tiles together, %, with the standard deviation that their scatter gives it.
Feature ShareOfTiles(const Tiles& tiles) {
  double open = 0;
  double area = 0;
  for (const Tile& tile : tiles) {
    open += tile.open_mm2;
    area += tile.area_mm2;
  }
  const double share = open / area;
  double squares = 0;
  int used = 0;
  for (const Tile& tile : tiles) {
    const double difference = tile.open_mm2 - share * tile.area_mm2;
    squares += difference * difference;
    used += tile.area_mm2 > 0 ? 1 : 0;
  }
  Feature feature{100 * share, std::nullopt, ""};
  if (used > 1) {
    feature.sd = 100 * std::sqrt(squares * used / (used - 1)) / area;
  }
  return feature;
}

Mark GapMark(const Channel& channel, const Surface& surface) {
  const auto& points = channel.points;
  Mark mark;
  mark.kind = MarkKind::kGap;
  for (const ChannelPoint& point : points) {
    mark.width_mm += point.width_um / 1000 / static_cast<double>(points.size());
  }
  const auto add = [&](const ChannelPoint& point, double stations_on) {
    const double column =
        surface.valleys.ColumnPx(point.station) + stations_on * surface.valleys.column_step_px;
    const cv::Vec2d mm = surface.aligned.coupon_from_aligned * cv::Vec3d(column, point.row_px, 1);
    mark.path_mm.emplace_back(static_cast<float>(mm[0]), static_cast<float>(mm[1]));
  };
  constexpr std::size_t kEvery = 4;  // stations: 1 mm
  add(points.front(), -0.5);
  for (std::size_t i = kEvery; i + kEvery < points.size(); i += kEvery) {
    add(points[i], 0);
  }
  add(points.back(), 0.5);
  return mark;
}

// Width that a twentieth of the channels' length exceeds; 0 without channels.
double WideMm(const std::vector<Channel>& channels) {
  std::vector<double> widths_um;
  for (const Channel& channel : channels) {
    for (const ChannelPoint& point : channel.points) {
      widths_um.push_back(point.width_um);
    }
  }
  if (widths_um.empty()) {
    return 0;
  }
  const auto place = widths_um.end() - 1 - static_cast<std::ptrdiff_t>(widths_um.size() / 20);
  std::nth_element(widths_um.begin(), place, widths_um.end());
  return *place / 1000;
}

Finding MeasureGaps(const Surface& surface) {
  const std::vector<Channel> channels = FindChannels(surface);
  const Tiles tiles = MeasureTiles(channels, surface.valleys, surface.aligned.px_per_mm);
  double area_mm2 = 0;
  for (const Tile& tile : tiles) {
    area_mm2 += tile.area_mm2;
  }
  Finding finding;
  constexpr double kMinAreaMm2 = 25;
  if (area_mm2 < kMinAreaMm2) {
    const Feature none{std::nullopt, std::nullopt,
                       "The coupon's field is smaller than 25 mm2: too little to judge its gaps."};
    finding.features.assign(5, none);
    return finding;
  }
  double length_mm = 0;
  double long_mm = 0;
  for (const Channel& channel : channels) {
    const double channel_mm = LengthMm(channel, surface.valleys);
    length_mm += channel_mm;
    long_mm += channel_mm >= kLongMm ? channel_mm : 0;
    finding.marks.push_back(GapMark(channel, surface));
  }
  const double cm2 = area_mm2 / 100;
  const auto count = static_cast<double>(channels.size());
  // Counts scatter as their root (Poisson); lengths as the counts do.
  const double count_sd = std::sqrt(std::max(1.0, count));
  finding.features = {ShareOfTiles(tiles),
                      {count / cm2, count_sd / cm2, ""},
                      {length_mm / cm2, std::max(length_mm / count_sd, kMinLengthMm) / cm2, ""},
                      {WideMm(channels), kMinOpenUm / 1000, ""},
                      {long_mm / cm2, std::max(long_mm / count_sd, kMinLengthMm) / cm2, ""}};
  return finding;
}

}  // namespace

double ClosedValleyDarknessUm(const GrooveShading& shading, double level) {
  const double probe = std::clamp(shading.darkness_um, kProbeLowUm, kProbeHighUm);
  const double matte = std::clamp(1 - probe / kMirrorUm, 0.0, 1.0);
  return std::max(kMinUm, kDeepUm - kInterreflectionUm * level + kProbeGain * probe +
                              kTiltGain * matte * shading.tilt_um);
}

Feature MeasureGapArea(const Surface& surface) {
  return ShareOfTiles(
      MeasureTiles(FindChannels(surface), surface.valleys, surface.aligned.px_per_mm));
}

Metric GapsMetric() {
  return {"gaps",
          2,
          {{"gap_area_pct", "share of the field that open channels between lines take"},
           {"gaps_per_cm2", "open channels of 0.75 mm and more"},
           {"gap_length_mm_per_cm2", "their length together"},
           {"gap_wide_mm", "width that a twentieth of that length exceeds"},
           {"gap_long_mm_per_cm2", "length of those of 5 mm and more"}},
          &MeasureGaps};
}

}  // namespace laygauge
