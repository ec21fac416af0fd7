#include "texture/scars_metric.h"

#include <fmt/core.h>

#include <cmath>
#include <numbers>
#include <string>

#include "texture/tracks.h"

namespace laygauge {
namespace {

constexpr double kEndSdMm = 0.5;      // of a track's end along it: the step of following
constexpr double kDrawnFrom = 0.5;    // chance
constexpr double kScarWidthMm = 0.6;  // as the overlay draws it

Finding Unmeasured(const std::string& reason) {
  const Feature none{std::nullopt, std::nullopt, reason};
  return {{none, none, none}, {}};
}

Finding MeasureScars(const Surface& surface) {
  if (surface.torn.Failed()) {
    return Unmeasured(
        fmt::format("{:.0f} % of the field is torn or lifted, and the edges there look like scars",
                    surface.torn.area_pct));
  }
  const TopView& view = surface.top;
  if (view.searched_cm2 <= 0) {
    return Unmeasured("the patch shows no top surface away from walls");
  }
  const std::vector<Track>& tracks = surface.scars;
  double count = 0;
  double length_mm = 0;
  double length_variance = 0;
  double count_variance = 0;
  Finding finding;
  for (const Track& track : tracks) {
    const double chance = track.chance;
    count += chance;
    count_variance += chance * (1 - chance);
    length_mm += chance * track.length_mm;
    length_variance +=
        chance * 2 * std::pow(kEndSdMm, 2) + std::pow(track.length_mm, 2) * chance * (1 - chance);
    if (chance < kDrawnFrom) continue;
    Mark mark{MarkKind::kScar, {}, false, kScarWidthMm};
    for (const cv::Point2d& p : track.path_px) {
      mark.path_mm.emplace_back(view.CouponPoint(p));
    }
    finding.marks.push_back(std::move(mark));
  }
  const double length_sd = std::sqrt(length_variance);
  finding.features = {{length_mm / view.searched_cm2, length_sd / view.searched_cm2, ""},
                      {length_mm, length_sd, ""},
                      {count, std::sqrt(count_variance), ""}};
  return finding;
}

}  // namespace

Metric ScarsMetric() {
  return {"scars",
          3,
          {{"scar_length_mm_per_cm2", "length of tracks across the lines, by area of top surface"},
           {"scar_length_mm", "length of tracks across the lines, in all"},
           {"scar_count", "tracks across the lines"}},
          &MeasureScars};
}

}  // namespace laygauge
