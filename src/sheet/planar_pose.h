#pragma once

#include <vector>

#include "sheet/fit_camera.h"

namespace laygauge {

// Poses (turn and shift; spread and stretch 0) from which a plane with these markers looks as seen
// by an undistorted pinhole: two as a rule, the better one first. `lens`: focal and centre count.
[[nodiscard]] std::vector<PhotoVector> PlanarPoses(const std::vector<MarkerSighting>& markers,
                                                   const LensVector& lens);

// The focal length, px, out of a ladder from 0.5 to 4 image diagonals, at which a pinhole best
// explains the markers together with the prior: a start where no tag tells it.
[[nodiscard]] double GuessFocal(const std::vector<MarkerSighting>& markers, LensVector lens,
                                double diagonal_px, double log_focal_sd);

}  // namespace laygauge
