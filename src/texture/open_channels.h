#pragma once

#include <vector>

#include "texture/line_valleys.h"

namespace laygauge {

// A valley that may be open.
struct OpenValley {
  int station = 0;
  float row_px = 0;
  float darkness_um = 0;
  int before = -1;      // the same channel's valley at the station before; -1: none
  double width_mm = 0;  // 0: closed
};

// A sum over the channels: its mean over what a closed valley's darkness may be, and the standard
// deviation that this alone gives it.
struct ChannelSum {
  double mean = 0;
  double sd = 0;
};

struct OpenChannels {
  std::vector<OpenValley> valleys;  // those that may be open; widths are means
  ChannelSum area_mm2;
  ChannelSum count;
  ChannelSum length_mm;
  ChannelSum long_mm;  // of channels of kLongChannelMm and more
  ChannelSum wide_mm;  // the width that one in kWidestOf of the field's valleys exceeds
  // Those that are open at the likeliest darkness, and somewhere plainly wide: for drawing.
  std::vector<std::vector<OpenValley>> plain;
};

// A scar or a grain of noise is shorter along the lay.
inline constexpr double kMinChannelMm = 1.25;
inline constexpr double kLongChannelMm = 5;
inline constexpr int kWidestOf = 10;

// Valleys darker than a closed one, linked along the lay to channels of kMinChannelMm and more. A
// valley of darkness D is open by (D - closed) / 0.9 (docs/metrics.md, "Gaps").
// `closed_um`, `closed_sd_um`: darkness of a closed valley, and how well it is known (normal);
// each sum is the mean over nine values up to two standard deviations to either side, weighted by
// the normal density, so that no valley moves it by a step when it crosses a threshold.
// `link_px`: how far a channel may move across the lay from station to station.
[[nodiscard]] OpenChannels FindOpenChannels(const LineValleys& valleys, double closed_um,
                                            double closed_sd_um, double link_px);

}  // namespace laygauge
