#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "coupon/patch.h"

namespace laygauge {

// Defects drawn onto a made-up patch, so that a test knows where they are. Points in the coupon's
// frame, mm.

// A groove between two raised edges, as a nozzle leaves it: reflectance `edge` on two stripes
// 0.2 mm wide (two standard deviations of a Gaussian) and 0.36 mm apart, `groove` between them.
struct TrackToDraw {
  std::vector<cv::Point2d> path_mm;
  double edge = -0.15;
  double groove = 0.05;
};
void DrawTrack(const TrackToDraw& track, Patch& patch);

// An open channel: a Gaussian valley of `depth`, `width_mm` wide (two standard deviations), along
// the lay.
struct ChannelToDraw {
  cv::Point2d centre_mm;
  double length_mm = 3;
  double lay_deg = 45;
  double width_mm = 0.15;
  double depth = 0.3;
};
void DrawChannel(const ChannelToDraw& channel, Patch& patch);

// Channels of 1 to 6 mm at chance places all over the coupon, in the valleys between lines.
void DrawChannels(int count, double pitch_mm, double lay_deg, std::uint64_t seed, Patch& patch);

// A lump: a Gaussian bump of height 1 and standard deviation `radius_mm`, lit by small slopes:
// `lit` times its slope towards the light (bright side, dark side) plus `shine` times its height.
struct BlobToDraw {
  cv::Point2d centre_mm;
  double radius_mm = 0.3;
  double light_deg = 180;  // where the light comes from, counter-clockwise from +x
  double lit = 0.12;       // mm: reflectance by slope per mm
  double shine = 0;
};
void DrawBlob(const BlobToDraw& blob, Patch& patch);

}  // namespace laygauge
