#include "texture/scars_metric.h"

#include <fmt/core.h>

#include <cmath>
#include <numbers>
#include <string>

#include "texture/tracks.h"

namespace laygauge {
namespace {

constexpr double kEndSdMm = 0.5;      // of a track's end along it: the step of following
constexpr double kScarWidthMm = 0.6;  // as the overlay draws it

// The chance that a track of this strength is found again in another photograph.
double ChanceAgain(double sigmas) {
  return 0.5 * std::erfc(-(sigmas - TrackOptions{}.min_sigmas) / std::numbers::sqrt2);
}

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
  double length_mm = 0;
  double length_variance = 0;
  double count_variance = 0;
  Finding finding;
  for (const Track& track : tracks) {
    const double again = ChanceAgain(track.sigmas);
    length_mm += track.length_mm;
    length_variance +=
        2 * std::pow(kEndSdMm, 2) + std::pow(track.length_mm, 2) * again * (1 - again);
    count_variance += again * (1 - again);
    Mark mark{MarkKind::kScar, {}, false, kScarWidthMm};
    for (const cv::Point2d& p : track.path_px) {
      mark.path_mm.emplace_back(view.CouponPoint(p));
    }
    finding.marks.push_back(std::move(mark));
  }
  const double length_sd = std::sqrt(length_variance);
  finding.features = {{length_mm / view.searched_cm2, length_sd / view.searched_cm2, ""},
                      {length_mm, length_sd, ""},
                      {static_cast<double>(tracks.size()), std::sqrt(count_variance), ""}};
  return finding;
}

}  // namespace

Metric ScarsMetric() {
  return {"scars",
          1,
          {{"scar_length_mm_per_cm2", "length of tracks across the lines, by area of top surface"},
           {"scar_length_mm", "length of tracks across the lines, in all"},
           {"scar_count", "tracks across the lines"}},
          &MeasureScars};
}

}  // namespace laygauge
