#pragma once

#include <string>
#include <vector>

#include "base/error.h"
#include "photo/photo.h"
#include "sheet/refine_corners.h"

namespace laygauge {

struct FindMarkersOptions {
  // The photo is reduced by a whole number, to about this many pixels on its longer side, before
  // markers are sought; where too few are found, once more reduced half as much.
  int reduced_size_px = 1000;
  int fewest_markers = 4;
  RefineCornersOptions refine = {};

  void Check() const;  // throws BadOption: field, value, rule
};

// A tag of family 36h11 (Wang & Olson 2016, "AprilTag 2: Efficient and robust fiducial detection",
// IROS, doi 10.1109/IROS.2016.7759617), drawn as OpenCV draws it: the original family's drawing
// turned by half a turn.
struct FoundMarker {
  int id = 0;
  SquareCorners corners_px;
  double scatter_px = 0;  // root mean square of the edge points round the sides' lines
};

struct FoundMarkers {
  std::vector<FoundMarker> markers;  // by id
  std::vector<std::string> notes;    // on markers left out, one sentence each
};

// Finds the markers on a reduced image, and their corners at full resolution.
// Problem (unmeasurable): fewer than `fewest_markers`; a mirrored photo; a marker that is there
// twice.
[[nodiscard]] Expected<FoundMarkers> FindMarkers(const Photo& photo,
                                                 const FindMarkersOptions& options = {});

}  // namespace laygauge
