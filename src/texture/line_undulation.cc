#include "texture/line_undulation.h"

#include <algorithm>
#include <cmath>

namespace laygauge {
namespace {

constexpr double kTileMm = 9;         // slower changes than this are taken off
constexpr double kLinkPitches = 0.3;  // a line's wander from station to station

// How much of a line's variation is left 1 mm on, over that 0.5 mm on: of lines that wander, and
// of ridges (sample plates; docs/metrics.md, "Ridges").
constexpr double kWanderKept = 0.84;
constexpr double kRidgeKept = 0.59;

// Ridges are believed between the first value (not at all) and the second (fully).
struct Ramp {
  double none = 0;
  double full = 0;
  [[nodiscard]] double operator()(double value) const {
    return std::clamp((value - none) / (full - none), 0.0, 1.0);
  }
};
constexpr Ramp kShort{0.25, 0.6};    // valley_share
constexpr Ramp kVisible{0.25, 0.6};  // dark_pct: less is lost in the noise

// Smoothed by 1 2 1, %.
float SmoothPct(const float* at) { return 25 * at[-1] + 50 * at[0] + 25 * at[1]; }

float TopPct(const float* profile, float from_px, float to_px) {
  float top = 0;
  const auto end = std::lround(to_px);
  for (auto at = std::lround(from_px); at <= end; ++at) {
    top = std::max(top, SmoothPct(profile + at));
  }
  return top;
}

void LinkToNext(std::vector<LinePiece>* pieces, const std::vector<LinePiece>& next, float link_px) {
  std::size_t k = 0;
  for (LinePiece& piece : *pieces) {
    while (k < next.size() && next[k].row_px < piece.row_px - link_px) {
      ++k;
    }
    if (k < next.size() && next[k].row_px <= piece.row_px + link_px) {
      piece.next = static_cast<int>(k);
    }
  }
}

template <class Visit>
void ForEach(LinePieces* stations, const Visit& visit) {
  for (auto& pieces : *stations) {
    for (LinePiece& piece : pieces) {
      visit(&piece);
    }
  }
}

void TakeOffTileMeans(LinePieces* stations) {
  struct Mean {
    double bottom_pct = 0;
    double top_pct = 0;
    double darkness_um = 0;
    double count = 0;
  };
  std::vector<Mean> means;
  ForEach(stations, [&](LinePiece* piece) {
    const auto tile = static_cast<std::size_t>(piece->tile);
    means.resize(std::max(means.size(), tile + 1));
    means[tile].bottom_pct += piece->bottom_pct;
    means[tile].top_pct += piece->top_pct;
    means[tile].darkness_um += piece->darkness_um;
    ++means[tile].count;
  });
  ForEach(stations, [&](LinePiece* piece) {
    const Mean& mean = means[static_cast<std::size_t>(piece->tile)];
    piece->bottom_pct -= static_cast<float>(mean.bottom_pct / mean.count);
    piece->top_pct -= static_cast<float>(mean.top_pct / mean.count);
    piece->darkness_um -= static_cast<float>(mean.darkness_um / mean.count);
  });
}

// 2.5 robust standard deviations: what is beyond is a scar's or a blob's doing.
float ClipLimit(const LinePieces& stations, float LinePiece::*value) {
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
  constexpr float kSdForMedian = 1.4826F;  // normal distribution
  return 2.5F * kSdForMedian * *middle;
}

// Covariance of a value with the same line's one and two stations further on: 0.5 and 1 mm.
// Pixels' noise, different at each station, drops out.
struct Kept {
  double near = 0;
  double far = 0;
  [[nodiscard]] double Short() const {
    return (kWanderKept * near - far) / (kWanderKept - kRidgeKept);
  }
};

Kept KeptAlong(const LinePieces& stations, std::size_t from, std::size_t to,
               float LinePiece::*value, float limit) {
  const auto clipped = [&](const LinePiece& piece) {
    return static_cast<double>(std::clamp(piece.*value, -limit, limit));
  };
  Kept sum;
  double near_count = 0;
  double far_count = 0;
  for (std::size_t s = from; s < to; ++s) {
    for (const LinePiece& piece : stations[s]) {
      if (piece.next < 0) {
        continue;
      }
      const LinePiece& near = stations[s + 1][static_cast<std::size_t>(piece.next)];
      sum.near += clipped(piece) * clipped(near);
      ++near_count;
      if (near.next >= 0) {
        sum.far += clipped(piece) * clipped(stations[s + 2][static_cast<std::size_t>(near.next)]);
        ++far_count;
      }
    }
  }
  return {sum.near / std::max(1.0, near_count), sum.far / std::max(1.0, far_count)};
}

}  // namespace

LinePieces FindLinePieces(const LineValleys& valleys, double px_per_mm) {
  const double pitch_px = valleys.pitch_mm * px_per_mm;
  const double tile_px = kTileMm * px_per_mm;
  const int tiles_across = static_cast<int>(std::ceil(valleys.profiles.cols / tile_px)) + 1;
  LinePieces stations;
  for (std::size_t s = 0; s < valleys.stations.size(); s += kPieceStride) {
    auto& pieces = stations.emplace_back();
    const auto* profile = valleys.profiles.ptr<float>(static_cast<int>(s));
    const auto& list = valleys.stations[s];
    const int along = static_cast<int>(valleys.ColumnPx(static_cast<int>(s)) / tile_px);
    for (std::size_t i = 0; i + 1 < list.size(); ++i) {
      const float row = list[i].row_px;
      const double width_px = list[i + 1].row_px - row;
      if (width_px < 0.65 * pitch_px || width_px > 1.35 * pitch_px) {
        continue;
      }
      pieces.push_back({row, SmoothPct(profile + std::lround(row)),
                        TopPct(profile, row, list[i + 1].row_px), list[i].darkness_um,
                        along * tiles_across + static_cast<int>(row / tile_px)});
    }
  }
  for (std::size_t s = 0; s + 1 < stations.size(); ++s) {
    LinkToNext(&stations[s], stations[s + 1], static_cast<float>(kLinkPitches * pitch_px));
  }
  TakeOffTileMeans(&stations);
  return stations;
}

LineUndulation MeasureLineUndulation(const LinePieces& pieces) {
  const std::size_t count = pieces.size();
  LineUndulation found;
  const Kept darkness = KeptAlong(pieces, 0, count, &LinePiece::darkness_um,
                                  ClipLimit(pieces, &LinePiece::darkness_um));
  found.valley_um = std::sqrt(std::max(0.0, darkness.Short()));
  found.valley_share = darkness.near > 0 ? darkness.Short() / darkness.near : 0;
  const float bottom_limit = ClipLimit(pieces, &LinePiece::bottom_pct);
  const float top_limit = ClipLimit(pieces, &LinePiece::top_pct);
  const double share = std::clamp(found.valley_share, 0.0, 1.0);
  const auto dark_variance = [&](std::size_t from, std::size_t to) {
    return share * (KeptAlong(pieces, from, to, &LinePiece::bottom_pct, bottom_limit).near -
                    KeptAlong(pieces, from, to, &LinePiece::top_pct, top_limit).near);
  };
  const double variance = dark_variance(0, count);
  found.dark_pct = std::sqrt(std::max(0.0, variance));
  constexpr std::size_t kParts = 4;
  double squares = 0;
  for (std::size_t part = 0; part < kParts; ++part) {
    const double difference =
        dark_variance(part * count / kParts, (part + 1) * count / kParts) - variance;
    squares += difference * difference;
  }
  const double variance_sd = std::sqrt(squares / (kParts - 1) / kParts);
  // A root's standard deviation, held finite where the root is near 0.
  found.dark_pct_sd = variance_sd / std::max({2 * found.dark_pct, std::sqrt(variance_sd), 1e-6});
  return found;
}

double RidgeBelief(const LineUndulation& undulation) {
  return kShort(undulation.valley_share) * kVisible(undulation.dark_pct);
}

}  // namespace laygauge
