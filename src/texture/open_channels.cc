#include "texture/open_channels.h"

#include <algorithm>
#include <array>
#include <cmath>

namespace laygauge {
namespace {

// Light that a channel takes for each width of it: its floor is not wholly dark.
constexpr double kOpenDarkness = 0.9;
constexpr double kUmPerMm = 1000;
constexpr double kPlainUm = 10;

constexpr int kSteps = 4;  // to either side, half a standard deviation each

double WidthMm(double darkness_um, double closed_um) {
  return (darkness_um - closed_um) / kOpenDarkness / kUmPerMm;
}

// Those darker than `least_um`, in the order of stations and rows, each with the nearest one at the
// station before.
std::vector<OpenValley> FindDarkValleys(const LineValleys& valleys, double least_um,
                                        double link_px) {
  std::vector<OpenValley> dark;
  std::size_t k = 0;  // at the station before
  for (std::size_t station = 0; station < valleys.stations.size(); ++station) {
    const std::size_t first = dark.size();
    for (const LineValley& valley : valleys.stations[station]) {
      if (valley.darkness_um <= least_um) {
        continue;
      }
      OpenValley found{static_cast<int>(station), valley.row_px, valley.darkness_um};
      const auto distance = [&](std::size_t i) { return std::abs(dark[i].row_px - valley.row_px); };
      while (k + 1 < first && distance(k + 1) <= distance(k)) {
        ++k;
      }
      if (k < first && distance(k) <= link_px) {
        found.before = static_cast<int>(k++);
      }
      dark.push_back(found);
    }
    k = first;
  }
  return dark;
}

// What is open together at one darkness of closed valleys.
struct Channels {
  std::vector<int> of_valley;  // -1: closed
  std::vector<int> stations;   // of each channel
  int least = 0;               // stations that make a channel
  // A valley's channel; -1: it is in none that is long enough.
  [[nodiscard]] int At(std::size_t valley) const {
    const int channel = of_valley[valley];
    return channel >= 0 && stations[static_cast<std::size_t>(channel)] >= least ? channel : -1;
  }
};

Channels Connect(const std::vector<OpenValley>& valleys, double closed_um, double step_mm) {
  Channels channels;
  channels.least = static_cast<int>(std::ceil(kMinChannelMm / step_mm - 1e-6));
  channels.of_valley.assign(valleys.size(), -1);
  for (std::size_t i = 0; i < valleys.size(); ++i) {
    const OpenValley& valley = valleys[i];
    if (valley.darkness_um <= closed_um) {
      continue;
    }
    int channel =
        valley.before < 0 ? -1 : channels.of_valley[static_cast<std::size_t>(valley.before)];
    if (channel < 0) {
      channel = static_cast<int>(channels.stations.size());
      channels.stations.push_back(0);
    }
    channels.of_valley[i] = channel;
    ++channels.stations[static_cast<std::size_t>(channel)];
  }
  return channels;
}

struct Sums {
  double area_mm2 = 0;
  double count = 0;
  double length_mm = 0;
  double long_mm = 0;
};

// Adds `weight` times the widths to the valleys' own.
Sums SumChannels(const Channels& channels, double closed_um, double weight, double step_mm,
                 std::vector<OpenValley>* valleys) {
  Sums sums;
  for (std::size_t i = 0; i < valleys->size(); ++i) {
    if (channels.At(i) >= 0) {
      OpenValley& valley = (*valleys)[i];
      const double width_mm = WidthMm(valley.darkness_um, closed_um);
      valley.width_mm += weight * width_mm;
      sums.area_mm2 += width_mm * step_mm;
    }
  }
  for (const int stations : channels.stations) {
    if (stations >= channels.least) {
      const double channel_mm = stations * step_mm;
      sums.count += 1;
      sums.length_mm += channel_mm;
      sums.long_mm += channel_mm >= kLongChannelMm ? channel_mm : 0;
    }
  }
  return sums;
}

// Darkness that `exceeding` of the valleys in channels exceed; 0 if there are not so many.
double DarkestUm(const std::vector<OpenValley>& valleys, const Channels& channels,
                 std::size_t exceeding) {
  std::vector<float> darkness;
  for (std::size_t i = 0; i < valleys.size(); ++i) {
    if (channels.At(i) >= 0) {
      darkness.push_back(valleys[i].darkness_um);
    }
  }
  if (darkness.size() <= exceeding) {
    return 0;
  }
  const auto place = darkness.end() - 1 - static_cast<std::ptrdiff_t>(exceeding);
  std::nth_element(darkness.begin(), place, darkness.end());
  return *place;
}

// The channels that are wide enough somewhere, each from its first station to its last.
std::vector<std::vector<OpenValley>> PlainChannels(const std::vector<OpenValley>& valleys,
                                                   const Channels& channels, double closed_um) {
  std::vector<std::vector<OpenValley>> plain(channels.stations.size());
  for (std::size_t i = 0; i < valleys.size(); ++i) {
    const int channel = channels.At(i);
    if (channel >= 0) {
      auto& path = plain[static_cast<std::size_t>(channel)];
      path.push_back(valleys[i]);
      path.back().width_mm = WidthMm(valleys[i].darkness_um, closed_um);
    }
  }
  std::erase_if(plain, [](const std::vector<OpenValley>& path) {
    return std::none_of(path.begin(), path.end(), [](const OpenValley& valley) {
      return valley.width_mm >= kPlainUm / kUmPerMm;
    });
  });
  return plain;
}

// Mean and standard deviation of weighted values.
class Spread {
 public:
  void Add(double weight, double value) {
    mean_ += weight * value;
    square_ += weight * value * value;
  }
  [[nodiscard]] ChannelSum Result() const {
    return {mean_, std::sqrt(std::max(0.0, square_ - mean_ * mean_))};
  }

 private:
  double mean_ = 0;
  double square_ = 0;
};

std::array<double, 2 * kSteps + 1> NormalWeights() {
  std::array<double, 2 * kSteps + 1> weights{};
  double total = 0;
  for (int i = -kSteps; i <= kSteps; ++i) {
    auto& weight = weights[static_cast<std::size_t>(i + kSteps)];
    weight = std::exp(-0.125 * i * i);
    total += weight;
  }
  for (double& weight : weights) {
    weight /= total;
  }
  return weights;
}

}  // namespace

OpenChannels FindOpenChannels(const LineValleys& valleys, double closed_um, double closed_sd_um,
                              double link_px) {
  OpenChannels found;
  found.valleys = FindDarkValleys(valleys, closed_um - kSteps * closed_sd_um / 2, link_px);
  std::size_t all = 0;
  for (const auto& station : valleys.stations) {
    all += station.size();
  }
  Spread area;
  Spread count;
  Spread length;
  Spread in_long;
  Spread wide;
  double darkest_um = 0;
  const auto weights = NormalWeights();
  for (int i = -kSteps; i <= kSteps; ++i) {
    const double at_um = closed_um + i * closed_sd_um / 2;
    const double weight = weights[static_cast<std::size_t>(i + kSteps)];
    const Channels channels = Connect(found.valleys, at_um, valleys.step_mm);
    const Sums sums = SumChannels(channels, at_um, weight, valleys.step_mm, &found.valleys);
    area.Add(weight, sums.area_mm2);
    count.Add(weight, sums.count);
    length.Add(weight, sums.length_mm);
    in_long.Add(weight, sums.long_mm);
    if (i == -kSteps) {
      darkest_um = DarkestUm(found.valleys, channels, all / kWidestOf);
    }
    wide.Add(weight, std::max(0.0, WidthMm(darkest_um, at_um)));
    if (i == 0) {
      found.plain = PlainChannels(found.valleys, channels, at_um);
    }
  }
  found.area_mm2 = area.Result();
  found.count = count.Result();
  found.length_mm = length.Result();
  found.long_mm = in_long.Result();
  found.wide_mm = wide.Result();
  return found;
}

}  // namespace laygauge
