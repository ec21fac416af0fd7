#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <vector>

namespace laygauge {

struct AlignedField;

// One line's valley at one station along the lay.
struct LineValley {
  float row_px = 0;       // of the aligned field
  float darkness_um = 0;  // light that it takes, as the width of a wholly dark channel
};

// The field cut across the lay at stations, each the mean over a short length of lines.
struct LineValleys {
  double step_mm = 0;    // from station to station
  double length_mm = 0;  // of lines, averaged at one station: two steps
  double pitch_mm = 0;   // as found, or kUsualPitchMm
  cv::Mat profiles;      // CV_32FC1, one row a station, columns across the lay; NaN off the field
  std::vector<std::vector<LineValley>> stations;  // valleys of each, ascending

  // Column of the aligned field in the middle of a station.
  [[nodiscard]] double ColumnPx(int station) const { return column0_px + column_step_px * station; }
  double column0_px = 0;
  double column_step_px = 0;
};

// How far apart valleys are sought where no lines are found, mm: the usual pitch of a 0.4 mm nozzle
// (common practice).
inline constexpr double kUsualPitchMm = 0.4;

// Valleys are local minima at least 0.45 pitch apart; their darkness is ChannelKernel's.
// `pitch_mm`: none where no lines are found. `blur_sd_mm`: Patch's.
[[nodiscard]] LineValleys FindLineValleys(const AlignedField& field, std::optional<double> pitch_mm,
                                          double blur_sd_mm);

}  // namespace laygauge
