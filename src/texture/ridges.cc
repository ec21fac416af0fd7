#include "texture/ridges.h"

#include <algorithm>
#include <cmath>
#include <vector>

#include "texture/gaps.h"

namespace laygauge {
namespace {

// Height of a ridge for each um by which it makes the valleys' darkness vary, from the sample
// plates (docs/metrics.md, "Ridges").
constexpr double kHeightForDarkness = 10;

// Ridges are believed between the first value (not at all) and the second (fully).
struct Ramp {
  double none = 0;
  double full = 0;
  [[nodiscard]] double operator()(double value) const {
    return std::clamp((value - none) / (full - none), 0.0, 1.0);
  }
};
constexpr Ramp kSomeShallow{0.72, 0.62};  // the shallowest twentieth of valleys over their median
constexpr Ramp kTopsVary{0.16, 0.20};     // see Belief()
constexpr Ramp kClosed{1.2, 0.5};         // gap area, %

constexpr double kMinDarknessUm = 2.5;  // median: below, there are no valleys to speak of
constexpr double kTileMm = 3;           // slower changes than this are taken off
constexpr std::size_t kStride = 2;      // stations that share no pixel
constexpr double kLinkPitches = 0.3;    // a line's wander from station to station

// A line between two valleys at one station.
struct LinePiece {
  float row_px = 0;
  float top = 0;       // reflectance of its middle
  float darkness = 0;  // mean of its two valleys', um
  std::size_t tile = 0;
};

using Stations = std::vector<std::vector<LinePiece>>;

Stations FindPieces(const LineValleys& valleys, double px_per_mm) {
  const double pitch_px = valleys.pitch_mm * px_per_mm;
  const double tile_px = kTileMm * px_per_mm;
  const auto tiles_across =
      static_cast<std::size_t>(std::ceil(valleys.profiles.cols / tile_px)) + 1;
  Stations stations;
  for (std::size_t s = 0; s < valleys.stations.size(); s += kStride) {
    auto& pieces = stations.emplace_back();
    const auto* profile = valleys.profiles.ptr<float>(static_cast<int>(s));
    const auto& list = valleys.stations[s];
    const auto along = static_cast<std::size_t>(valleys.ColumnPx(static_cast<int>(s)) / tile_px);
    for (std::size_t i = 0; i + 1 < list.size(); ++i) {
      const double width_px = list[i + 1].row_px - list[i].row_px;
      if (width_px < 0.65 * pitch_px || width_px > 1.35 * pitch_px) {
        continue;
      }
      const float middle = (list[i].row_px + list[i + 1].row_px) / 2;
      const float floor = std::floor(middle);
      const float* at = profile + static_cast<std::ptrdiff_t>(floor);
      // Mean of three samples about the middle, between samples by straight lines.
      const float top = (at[-1] + at[0] + at[1] + (middle - floor) * (at[2] - at[-1])) / 3;
      if (std::isfinite(top)) {
        pieces.push_back({middle, top, (list[i].darkness_um + list[i + 1].darkness_um) / 2,
                          along * tiles_across + static_cast<std::size_t>(middle / tile_px)});
      }
    }
  }
  return stations;
}

// Takes each tile's mean off `top` and `darkness`.
void TakeOffTileMeans(Stations* stations) {
  struct Mean {
    double top = 0;
    double darkness = 0;
    double count = 0;
  };
  std::vector<Mean> means;
  for (const auto& pieces : *stations) {
    for (const LinePiece& piece : pieces) {
      if (piece.tile >= means.size()) {
        means.resize(piece.tile + 1);
      }
      Mean& mean = means[piece.tile];
      mean.top += piece.top;
      mean.darkness += piece.darkness;
      ++mean.count;
    }
  }
  for (auto& pieces : *stations) {
    for (LinePiece& piece : pieces) {
      const Mean& mean = means[piece.tile];
      piece.top -= static_cast<float>(mean.top / mean.count);
      piece.darkness -= static_cast<float>(mean.darkness / mean.count);
    }
  }
}

// Takes off `top` what follows `darkness` in proportion: blur that carries valleys to the tops.
void TakeOffBlur(Stations* stations) {
  double cross = 0;
  double square = 1e-9;
  for (const auto& pieces : *stations) {
    for (const LinePiece& piece : pieces) {
      cross += static_cast<double>(piece.top) * piece.darkness;
      square += static_cast<double>(piece.darkness) * piece.darkness;
    }
  }
  for (auto& pieces : *stations) {
    for (LinePiece& piece : pieces) {
      piece.top -= static_cast<float>(cross / square) * piece.darkness;
    }
  }
}

double ClipLimit(const Stations& stations, float LinePiece::*value) {
  std::vector<float> sizes;
  for (const auto& pieces : stations) {
    for (const LinePiece& piece : pieces) {
      sizes.push_back(std::abs(piece.*value));
    }
  }
  if (sizes.empty()) {
    return 0;
  }
  auto middle = sizes.begin() + static_cast<std::ptrdiff_t>(sizes.size() / 2);
  std::nth_element(sizes.begin(), middle, sizes.end());
  constexpr double kSdForMedian = 1.4826;  // normal distribution
  return 2.5 * kSdForMedian * *middle;
}

// Standard deviation of `value` that neighbouring stations of a line share: their covariance's
// root. Noise of the pixels, different at each station, drops out; outliers (scars) are clipped.
double SharedSd(const Stations& stations, float LinePiece::*value, double link_px) {
  const auto limit = static_cast<float>(ClipLimit(stations, value));
  double sum = 0;
  double count = 0;
  for (std::size_t s = 0; s + 1 < stations.size(); ++s) {
    const auto& next = stations[s + 1];
    std::size_t k = 0;
    for (const LinePiece& piece : stations[s]) {
      while (k < next.size() && next[k].row_px < piece.row_px - link_px) {
        ++k;
      }
      if (k < next.size() && next[k].row_px <= piece.row_px + link_px) {
        sum += static_cast<double>(std::clamp(piece.*value, -limit, limit)) *
               static_cast<double>(std::clamp(next[k].*value, -limit, limit));
        ++count;
      }
    }
  }
  return count > 0 ? std::sqrt(std::max(0.0, sum / count)) : 0;
}

struct Darkness {
  double shallow_um = 0;  // a twentieth of the valleys is shallower
  double median_um = 0;
};

Darkness DarknessOf(const LineValleys& valleys) {
  std::vector<float> all;
  for (const auto& list : valleys.stations) {
    for (const LineValley& valley : list) {
      all.push_back(valley.darkness_um);
    }
  }
  if (all.empty()) {
    return {};
  }
  const auto at = [&](double share) {
    auto place =
        all.begin() + static_cast<std::ptrdiff_t>(share * static_cast<double>(all.size() - 1));
    std::nth_element(all.begin(), place, all.end());
    return static_cast<double>(*place);
  };
  return {at(0.05), at(0.5)};
}

// Height, um, of the ridges that make the valleys of these stations vary.
double Height(const Stations& stations, double link_px) {
  return kHeightForDarkness * SharedSd(stations, &LinePiece::darkness, link_px);
}

// How far the variation is ridges' doing, 0..1, rather than gaps', wandering lines' or none.
// Ridges make tops vary (by % of brightness, for each um by which the valleys' darkness varies),
// and fill some valleys to the top; wandering lines do neither.
double Belief(const Stations& stations, const Darkness& darkness, double gap_area_pct,
              double link_px) {
  const double tops_pct = 100 * SharedSd(stations, &LinePiece::top, link_px);
  const double valleys = std::max(1.0, SharedSd(stations, &LinePiece::darkness, link_px));
  const double shallow = darkness.shallow_um / darkness.median_um;
  constexpr double kShallowGain = 0.25;
  return kTopsVary(tops_pct / valleys + kShallowGain * (0.5 - shallow)) * kSomeShallow(shallow) *
         kClosed(gap_area_pct);
}

// Standard deviation of the height over four parts of the field, of their mean.
double SdOverParts(const Stations& stations, double link_px) {
  constexpr std::size_t kParts = 4;
  double sum = 0;
  double squares = 0;
  for (std::size_t part = 0; part < kParts; ++part) {
    const auto from = static_cast<std::ptrdiff_t>(part * stations.size() / kParts);
    const auto to = static_cast<std::ptrdiff_t>((part + 1) * stations.size() / kParts);
    const double height = Height({stations.begin() + from, stations.begin() + to}, link_px);
    sum += height;
    squares += height * height;
  }
  const double variance = (squares - sum * sum / kParts) / (kParts - 1);
  return std::sqrt(std::max(0.0, variance) / kParts);
}

// Where a line's top differs most from its surroundings, 1 mm and longer.
std::vector<Mark> RidgeMarks(const Stations& stations, const LineValleys& valleys,
                             const AlignedField& field, double link_px) {
  const double limit = 2 * SharedSd(stations, &LinePiece::top, link_px);
  struct Run {
    float row_px = 0;
    std::size_t first = 0;
  };
  std::vector<Mark> marks;
  std::vector<Run> last;
  std::vector<Run> now;
  const auto place = [&](std::size_t station, float row_px) {
    const double column = valleys.ColumnPx(static_cast<int>(station * kStride));
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
      if (std::abs(piece.top) < limit) {
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
  const LineValleys& valleys = surface.valleys;
  const double link_px = kLinkPitches * valleys.pitch_mm * surface.aligned.px_per_mm;
  const Darkness darkness = DarknessOf(valleys);
  Stations stations = FindPieces(valleys, surface.aligned.px_per_mm);
  TakeOffTileMeans(&stations);
  TakeOffBlur(&stations);
  const double height_um = Height(stations, link_px);
  const double sd_um = SdOverParts(stations, link_px);
  if (darkness.median_um < kMinDarknessUm) {
    return {{{0.0, sd_um, ""}}, {}};
  }
  const double belief =
      Belief(stations, darkness, MeasureGapArea(surface).value.value_or(0), link_px);
  Finding finding{{{belief * height_um, sd_um, ""}}, {}};
  if (belief > 0.5) {
    finding.marks = RidgeMarks(stations, valleys, surface.aligned, link_px);
  }
  return finding;
}

}  // namespace

Metric RidgesMetric() {
  return {"ridges",
          1,
          {{"ridge_um", "height of raised line edges, from what they make of the light"}},
          &MeasureRidges};
}

}  // namespace laygauge
