#pragma once

#include <opencv2/core.hpp>
#include <vector>

namespace laygauge {

// Cells along a marker's side, with its border of one cell.
constexpr int kMarkerCells = 8;

// The black part of a marker as closed polygons in cells, (0, 0) to (8, 8), x right, y down: outer
// edges and holes turn in opposite ways. Drawn as one path, it has no seams between cells.
// As OpenCV's DICT_APRILTAG_36h11 draws it, border one cell wide; 0 <= id <= 586.
[[nodiscard]] std::vector<std::vector<cv::Point>> MarkerOutline(int id);

}  // namespace laygauge
