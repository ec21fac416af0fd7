#pragma once

#include <Eigen/Core>
#include <string>
#include <vector>

#include "base/error.h"
#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/slanted_edge.h"

namespace laygauge {

// A straight edge of something black printed on the sheet, in the sheet's frame.
struct KnownEdge {
  std::string target;  // "sharpness square 2"
  std::string side;    // "right", "bottom", "left", "top"
  Eigen::Vector2d middle_mm = Eigen::Vector2d::Zero();
  Eigen::Vector2d outward = Eigen::Vector2d::UnitX();  // from black to paper
  Eigen::Vector2d along = Eigen::Vector2d::UnitY();
  double length_mm = 0;
};

// The four edges of a square turned by turn_deg counter-clockwise seen from above.
[[nodiscard]] std::vector<KnownEdge> EdgesOfSquare(const std::string& target,
                                                   const Eigen::Vector2d& center_mm, double side_mm,
                                                   double turn_deg);

// The pixels beside an edge.
struct EdgeStrip {
  std::vector<EdgeSample> samples;
  double px_per_mm = 0;  // across the edge
  double turn_deg = 0;   // between the edge and the nearer of the pixel rows and columns, 0..45
};

// All pixels within half_width_mm of the edge and no nearer to its ends than trim_mm. Distances
// on the sheet come from a cubic in the pixel's place, fitted to the view about the edge (within
// 0.001 px of it at the distortion that cameras have).
// Problem: part of the strip lies outside the photo.
[[nodiscard]] Expected<EdgeStrip> ReadEdge(const Photo& photo, const View& view,
                                           const KnownEdge& edge, double half_width_mm,
                                           double trim_mm);

}  // namespace laygauge
