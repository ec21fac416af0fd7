#include "texture/wall_gaps.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <vector>

#include "texture/channel_kernel.h"
#include "texture/contour.h"

namespace laygauge {
namespace {

constexpr double kStepMm = 0.25;    // along the seam
constexpr double kSampleMm = 0.05;  // across it
constexpr double kSideMm = 0.083;   // profiles are means of three, this far apart along the seam
constexpr double kCornerMm = 2;     // of the outline, left out
constexpr int kSmooth = 4;          // stations on either side, for what changes slowly

// Depths from the contour, mm, relative to the seam at wall_mm.
constexpr double kWallTopMm = -0.25;  // the inner loop's middle
constexpr double kSearchMm = 0.3;     // the seam's centre lies this near
constexpr double kFieldMm = 0.55;     // beyond, lines lie undisturbed
constexpr double kDeepestMm = 1.5;

// An open seam is darker than the closed groove between the wall's loops by kOpener and dark in
// itself, and takes more light than a closed one could (sample plates; docs/metrics.md). A sixth
// below its limit it is closed, a sixth above it open, in between the more likely open.
constexpr double kOpener = 0.16;
constexpr double kMinDepth = 0.24;
constexpr double kMinDarknessMm = 0.036;
constexpr double kUnsure = 1.0 / 6;
// Share of the light that the floor of an open seam misses.
constexpr double kFloorDarkness = 0.6;
// White walls light each other, which brightens an open seam: the limits shrink above this
// reflectance as the darkness of gaps does (gaps.cc).
double LimitsScale(double level) {
  constexpr double kInterreflection = 0.63;
  constexpr double kGray = 0.4;
  return std::min(1.0, (1 - kInterreflection * level) / (1 - kInterreflection * kGray));
}

constexpr double kShortMm = 1.25;  // length of an open piece
constexpr double kShortSlackMm = 0.5;
// Of closed seam that the mean width is shrunk by, as if it had been seen besides: where next to
// nothing is open, its width says nothing.
constexpr double kShrinkMm = 5;

struct Station {
  std::vector<float> profile;  // reflectance by depth, NaN where the patch ends
  double wall = 0;
  double field = 0;
  double groove = 0;  // darkest share of light missing in the groove between the loops
  double open = 0;    // how surely the seam is open: 0 no, 1 yes
  double width_mm = 0;
  double seam_depth_mm = 0;
};

struct Seam {
  Contour contour;
  std::vector<Station> stations;
};

// Depths of a profile's samples.
struct Depths {
  double first_mm = 0;
  int count = 0;
  [[nodiscard]] int At(double depth_mm) const {
    return std::clamp(static_cast<int>(std::lround((depth_mm - first_mm) / kSampleMm)), 0,
                      count - 1);
  }
  [[nodiscard]] double Mm(double sample) const { return first_mm + sample * kSampleMm; }
};

std::vector<float> ProfileAt(const Patch& patch, const ContourPoint& at, const Depths& depths) {
  std::vector<float> profile(static_cast<std::size_t>(depths.count));
  const cv::Point2d along(-at.inward.y, at.inward.x);
  for (int i = 0; i < depths.count; ++i) {
    const cv::Point2d centre = at.point_mm + depths.Mm(i) * at.inward;
    float sum = 0;
    for (const double side : {-kSideMm, 0.0, kSideMm}) {
      sum += SampleBilinear(patch.relative, patch.PixelFromCoupon(centre + side * along));
    }
    profile[static_cast<std::size_t>(i)] = sum / 3;
  }
  return profile;
}

// The level of flat line tops: 65 % of the samples are darker (valleys and their flanks).
double FieldLevel(const std::vector<float>& profile, int from) {
  std::vector<float> part(profile.begin() + from, profile.end());
  auto place = part.begin() + static_cast<std::ptrdiff_t>(part.size() * 65 / 100);
  std::nth_element(part.begin(), place, part.end());
  return *place;
}

// Mean over neighbours along the contour of what `value` gives for a station.
template <class Value>
std::vector<double> Smoothed(const Seam& seam, const Value& value) {
  const int count = static_cast<int>(seam.stations.size());
  std::vector<double> means;
  for (int i = 0; i < count; ++i) {
    double sum = 0;
    for (int k = i - kSmooth; k <= i + kSmooth; ++k) {
      const int at = seam.contour.closed ? (k + count) % count : std::clamp(k, 0, count - 1);
      sum += value(seam.stations[static_cast<std::size_t>(at)]);
    }
    means.push_back(sum / (2 * kSmooth + 1));
  }
  return means;
}

// Share of the light missing at the groove between the loops, below its neighbourhood's level.
double GrooveDepth(const Station& station, const Depths& depths, double wall_mm) {
  const auto at = [&](double depth_mm) {
    return static_cast<double>(station.profile[static_cast<std::size_t>(depths.At(depth_mm))]);
  };
  const double level = (at(wall_mm / 2 - 0.2) + at(wall_mm / 2 + 0.2)) / 2;
  double sum = 0;
  constexpr double kHalfMm = 0.05;
  for (const double offset : {-kHalfMm, 0.0, kHalfMm}) {
    sum += at(wall_mm / 2 + offset);
  }
  return 1 - sum / 3 / std::max(level, 1e-6);
}

// The darkest place from `first` to `last` that is darker than its neighbours; -1: there is none.
// What only grows darker towards the field is the flank of a channel along the wall.
int DarkestValley(const std::vector<double>& dark, int first, int last) {
  int darkest = -1;
  // A narrow wall leaves no neighbour outside.
  for (int i = std::max(first, 1); i <= last; ++i) {
    const auto at = static_cast<std::size_t>(i);
    if (dark[at] < dark[at - 1] || dark[at] < dark[at + 1]) continue;
    if (darkest < 0 || dark[at] > dark[static_cast<std::size_t>(darkest)]) darkest = i;
  }
  return darkest;
}

// Where the darkness falls to `half` from `peak` on, in samples; `step` is 1 or -1.
double Crossing(const std::vector<double>& dark, int peak, int step, double half) {
  const int end = step > 0 ? static_cast<int>(dark.size()) : -1;
  double inside = dark[static_cast<std::size_t>(peak)];
  int i = peak + step;
  for (; i != end; i += step) {
    const auto at = static_cast<std::size_t>(i);
    const double outside = dark[at];
    if (outside <= half) {
      return i - step * (half - outside) / (inside - outside);
    }
    inside = outside;
  }
  return i - step;
}

// Light that is missing around `peak`, as the width of a wholly dark channel.
double DarknessMm(const std::vector<double>& dark, int peak) {
  const double least = 0.1 * dark[static_cast<std::size_t>(peak)];
  double sum = 0;
  const int end = static_cast<int>(dark.size());
  for (int i = peak; i < end && dark[static_cast<std::size_t>(i)] > least; ++i) {
    sum += dark[static_cast<std::size_t>(i)];
  }
  for (int i = peak - 1; i >= 0 && dark[static_cast<std::size_t>(i)] > least; --i) {
    sum += dark[static_cast<std::size_t>(i)];
  }
  return sum * kSampleMm;
}

// How surely a value exceeds its limit, 0 to 1.
double Exceeds(double value, double limit) {
  return std::clamp(0.5 + (value / limit - 1) / (2 * kUnsure), 0.0, 1.0);
}

void JudgeStation(Station* station, const Depths& depths, double wall_mm, double closed_width_mm,
                  double scale) {
  std::vector<double> dark;
  const int from = depths.At(wall_mm - 0.2);
  const int to = depths.At(wall_mm + 0.5);
  for (int i = from; i <= to; ++i) {
    const double blend = std::clamp((depths.Mm(i) - wall_mm + 0.15) / 0.4, 0.0, 1.0);
    const double level = station->wall + blend * (station->field - station->wall);
    dark.push_back(1 - station->profile[static_cast<std::size_t>(i)] / std::max(level, 1e-6));
  }
  const int first = depths.At(wall_mm - kSearchMm / 3) - from;
  const int last = depths.At(wall_mm + kSearchMm) - from;
  const int peak = DarkestValley(dark, first, last);
  if (peak < 0) return;
  const double depth = dark[static_cast<std::size_t>(peak)];
  if (!(depth > 0)) {
    return;
  }
  const double darkness_mm = DarknessMm(dark, peak);
  station->open = std::min({Exceeds(depth, scale * kMinDepth),
                            Exceeds(depth - station->groove, scale * kOpener),
                            Exceeds(darkness_mm, scale * kMinDarknessMm)});
  if (station->open == 0) {
    return;
  }
  const double low = Crossing(dark, peak, -1, depth / 2);
  const double high = Crossing(dark, peak, 1, depth / 2);
  const double seen_mm = (high - low) * kSampleMm;
  const double at_half_mm =
      std::sqrt(std::max(0.0, seen_mm * seen_mm - closed_width_mm * closed_width_mm));
  station->width_mm = (at_half_mm + darkness_mm / scale / kFloorDarkness) / 2;
  station->seam_depth_mm = depths.Mm(from + (low + high) / 2);
}

Seam JudgeSeam(const Patch& patch, const Contour& contour, const Depths& depths, double wall_mm) {
  Seam seam{contour, {}};
  for (const ContourPoint& at : contour.points) {
    Station station;
    station.profile = ProfileAt(patch, at, depths);
    if (std::isnan(station.profile.front()) || std::isnan(station.profile.back())) {
      return {contour, {}};
    }
    station.wall = station.profile[static_cast<std::size_t>(depths.At(wall_mm + kWallTopMm))];
    station.field = FieldLevel(station.profile, depths.At(wall_mm + kFieldMm));
    station.groove = GrooveDepth(station, depths, wall_mm);
    seam.stations.push_back(std::move(station));
  }
  const auto wall = Smoothed(seam, [](const Station& s) { return s.wall; });
  const auto field = Smoothed(seam, [](const Station& s) { return s.field; });
  const auto groove = Smoothed(seam, [](const Station& s) { return s.groove; });
  constexpr double kHalfHeightWidths = 2.3548;  // of a Gaussian, in standard deviations
  const double closed_width_mm = kHalfHeightWidths * ChannelSdMm(patch.blur_sd_mm);
  for (std::size_t i = 0; i < seam.stations.size(); ++i) {
    seam.stations[i].wall = wall[i];
    seam.stations[i].field = field[i];
    seam.stations[i].groove = std::clamp(groove[i], -0.05, 0.4);
    JudgeStation(&seam.stations[i], depths, wall_mm, closed_width_mm, LimitsScale(patch.level));
  }
  return seam;
}

// A station is as open as the least open one of the best stretch of `length` stations around it
// (morphological opening): shorter pieces go.
std::vector<double> Opened(const Seam& seam, int length) {
  const int count = static_cast<int>(seam.stations.size());
  const auto at = [&](int i) {
    return static_cast<std::size_t>(seam.contour.closed ? i % count : i);
  };
  std::vector<double> opened(static_cast<std::size_t>(count), 0);
  const int starts = seam.contour.closed ? count : count - length + 1;
  for (int start = 0; start < starts; ++start) {
    double least = 1;
    for (int i = start; i < start + length && least > 0; ++i) {
      least = std::min(least, seam.stations[at(i)].open);
    }
    for (int i = start; i < start + length && least > 0; ++i) {
      opened[at(i)] = std::max(opened[at(i)], least);
    }
  }
  return opened;
}

// Open pieces of about kShortMm are taken for the valleys of lines that end at the wall: half of a
// piece of that length counts, none of one kShortSlackMm shorter, all of one that is as much
// longer.
void DropShortPieces(Seam* seam) {
  const auto stations = [&](double mm) {
    return static_cast<int>(std::lround(mm / seam->contour.step_mm));
  };
  const int shortest = std::max(1, stations(kShortMm - kShortSlackMm));
  const int longest = std::max(shortest, stations(kShortMm + kShortSlackMm));
  std::vector<double> open(seam->stations.size(), 0);
  for (int length = shortest; length <= longest; ++length) {
    const std::vector<double> opened = Opened(*seam, length);
    for (std::size_t i = 0; i < open.size(); ++i) {
      open[i] += opened[i] / (longest - shortest + 1);
    }
  }
  for (std::size_t i = 0; i < open.size(); ++i) {
    seam->stations[i].open = open[i];
  }
}

// Marks the pieces that are more likely open than closed.
void MarkPieces(const Seam& seam, std::vector<Mark>* marks) {
  const auto& stations = seam.stations;
  for (std::size_t i = 0; i < stations.size();) {
    std::size_t end = i;
    while (end < stations.size() && stations[end].open >= 0.5) {
      ++end;
    }
    if (end > i) {
      Mark mark;
      mark.kind = MarkKind::kWallGap;
      for (std::size_t k = i; k < end; ++k) {
        const ContourPoint& at = seam.contour.points[k];
        mark.path_mm.emplace_back(at.point_mm + stations[k].seam_depth_mm * at.inward);
        mark.width_mm += stations[k].width_mm / static_cast<double>(end - i);
      }
      marks->push_back(std::move(mark));
    }
    i = std::max(end, i + 1);
  }
}

struct Total {
  double length_mm = 0;
  double open_mm = 0;
  double width_mm2 = 0;  // widths times open lengths
  double width_squares = 0;
};

Total Sum(const std::vector<Seam>& seams) {
  Total total;
  for (const Seam& seam : seams) {
    const double step_mm = seam.contour.step_mm;
    for (const Station& station : seam.stations) {
      total.length_mm += step_mm;
      total.open_mm += station.open * step_mm;
      total.width_mm2 += station.open * station.width_mm * step_mm;
      total.width_squares += station.open * station.width_mm * station.width_mm * step_mm;
    }
  }
  return total;
}

Finding MeasureWallGaps(const Surface& surface) {
  if (surface.torn.Failed()) {
    const Feature none{
        std::nullopt, std::nullopt,
        fmt::format("{:.0f} % of the field is torn or lifted, and edges there look like an open "
                    "seam",
                    surface.torn.area_pct)};
    return {{none, none, none}, {}};
  }
  const Patch& patch = *surface.patch;
  const double wall_mm = surface.coupon->wall_mm;
  Finding finding;
  Depths depths{std::max(0.05, wall_mm / 2 - 0.25), 0};
  depths.count =
      static_cast<int>(std::lround((wall_mm + kDeepestMm - depths.first_mm) / kSampleMm)) + 1;
  std::vector<Seam> seams;
  for (const Contour& contour : SampleContours(*surface.coupon, kStepMm, wall_mm, kCornerMm)) {
    seams.push_back(JudgeSeam(patch, contour, depths, wall_mm));
    DropShortPieces(&seams.back());
    MarkPieces(seams.back(), &finding.marks);
  }
  const Total total = Sum(seams);
  if (!(total.length_mm > 0) || !(wall_mm > 0.3)) {
    const Feature none{std::nullopt, std::nullopt,
                       "The coupon's walls do not lie wholly in its picture, or its description "
                       "gives no wall_mm: no seam to judge."};
    finding.features.assign(3, none);
    return finding;
  }
  // Open and closed alternate in pieces: their number says how well the share is known.
  const double pieces = static_cast<double>(finding.marks.size());
  const double share = total.open_mm / total.length_mm;
  const double share_sd = std::sqrt(std::max(share * (1 - share), 0.01) / (pieces + 1));
  const double weight_mm = total.open_mm + kShrinkMm;
  const double width_mm = total.width_mm2 / weight_mm;
  const double variance = total.width_squares / weight_mm - width_mm * width_mm;
  const double width_sd =
      std::max(std::sqrt(std::max(0.0, variance) / std::max(1.0, pieces)), 0.005);
  const double mean_mm = total.width_mm2 / total.length_mm;
  finding.features = {{100 * share, 100 * share_sd, ""},
                      {width_mm, width_sd, ""},
                      {mean_mm, std::hypot(share_sd * width_mm, share * width_sd), ""}};
  return finding;
}

}  // namespace

Metric WallGapsMetric() {
  return {"wall_gaps",
          4,
          {{"wall_gap_pct", "share of the seam between field and walls that is open"},
           {"wall_gap_mm", "mean width of the open parts, less where few are open"},
           {"wall_gap_mean_mm", "width averaged over the whole seam"}},
          &MeasureWallGaps};
}

}  // namespace laygauge
