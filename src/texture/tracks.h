#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "texture/top_view.h"

namespace laygauge {

struct TrackOptions {
  double flatten_mm = 1.0;      // window along the lay whose mean is taken out
  double detect_length_mm = 5;  // of the straight pieces that are summed
  double follow_length_mm = 3;  // of the pieces that a found track is followed with
  double step_mm = 0.6;         // between them
  double min_angle_deg = 15;    // to the lay; below, gaps and wander look alike
  double min_sigmas = 6;        // of a sum against all sums of its direction, to be followed
  double follow_sigmas = 2.0;   // a followed track ends below
  double half_width_mm = 1.3;   // what belongs to a track: its stripes and the window's shadow
  double max_hidden_mm = 9;  // a track goes on behind a hole or another track of at most this width
  void Check() const;        // throws BadOption: field, value, rule
};

// A straight or gently bent track across the lines, or what may be one.
struct Track {
  std::vector<cv::Point2d> path_px;  // in the view
  double length_mm = 0;              // on the searched top; what a hole hides is not counted
  double sigmas = 0;                 // of its strongest piece
  double strength = 0;               // of the whole, less its strongest 1.6 mm: see FindTracks
  // More than 0 to 1: that it is one, and is found in another photograph. Who counts by it does not
  // jump where a track at the limit comes or goes.
  double chance = 0;
};

// Straight pieces of a fixed length are summed at all places and directions (Duda and Hart, "Use
// of the Hough transformation to detect lines and curves in pictures", CACM 15, 1972, of local
// lines: Donoho and Huo, "Beamlets and multiscale image analysis", 2002), on the view without its
// lines, clipped at 2.5 of its own deviations so that no short defect weighs as much as a track.
// The strongest is followed both ways and wiped out; what then still stands out is the next.
//
// Two sums tell a track from chance, each in units of the spread of such sums: `sigmas` of its
// strongest piece, and `strength` of its whole path without the 1.6 mm that give most, so that one
// lump or one short gap is no track. `chance` rises evenly from 0 to 1 as their mean goes from 5.7
// to 7.1; it is no more than sigmas - min_sigmas. On the sample plates the mean stays below 5.5
// without a scar and is above 7 of every scar, 4 mm of one beside a hole included.
[[nodiscard]] std::vector<Track> FindTracks(const TopView& view, const TrackOptions& options = {});

}  // namespace laygauge
