#include "sheet/marker_outline.h"

#include <map>
#include <opencv2/aruco.hpp>
#include <tuple>
#include <utility>

namespace laygauge {
namespace {

struct PointLess {
  bool operator()(cv::Point a, cv::Point b) const {
    return std::tie(a.y, a.x) < std::tie(b.y, b.x);
  }
};
// Edges between cells: begin and step, directed so that black lies at the right hand.
using Edges = std::multimap<cv::Point, cv::Point, PointLess>;

bool IsBlack(const cv::Mat& cells, int x, int y) {
  return x >= 0 && y >= 0 && x < cells.cols && y < cells.rows && cells.at<uchar>(y, x) == 0;
}

Edges BlackEdges(const cv::Mat& cells) {
  Edges edges;
  for (int y = 0; y < cells.rows; ++y) {
    for (int x = 0; x < cells.cols; ++x) {
      if (!IsBlack(cells, x, y)) continue;
      if (!IsBlack(cells, x, y - 1)) edges.insert({{x, y}, {1, 0}});
      if (!IsBlack(cells, x + 1, y)) edges.insert({{x + 1, y}, {0, 1}});
      if (!IsBlack(cells, x, y + 1)) edges.insert({{x + 1, y + 1}, {-1, 0}});
      if (!IsBlack(cells, x - 1, y)) edges.insert({{x, y + 1}, {0, -1}});
    }
  }
  return edges;
}

// Takes out the next edge at `from`. Where two black cells touch at a corner only, the turn to the
// right stays with the same cell.
cv::Point TakeNext(Edges& edges, cv::Point from, cv::Point step) {
  const cv::Point right(-step.y, step.x);
  const auto [first, last] = edges.equal_range(from);
  auto next = first;
  for (auto edge = first; edge != last; ++edge) {
    if (edge->second == right) next = edge;
  }
  const cv::Point taken = next->second;
  edges.erase(next);
  return taken;
}

}  // namespace

std::vector<std::vector<cv::Point>> MarkerOutline(int id) {
  const auto dictionary = cv::aruco::getPredefinedDictionary(cv::aruco::DICT_APRILTAG_36h11);
  cv::Mat cells;  // one pixel a cell
  dictionary->drawMarker(id, kMarkerCells, cells, 1);
  Edges edges = BlackEdges(cells);
  std::vector<std::vector<cv::Point>> outlines;
  while (!edges.empty()) {
    const cv::Point start = edges.begin()->first;
    cv::Point step = edges.begin()->second;
    edges.erase(edges.begin());
    const cv::Point first_step = step;
    std::vector<cv::Point> outline{start};
    for (cv::Point at = start + step; at != start; at += step) {
      const cv::Point next = TakeNext(edges, at, step);
      if (next != step) outline.push_back(at);
      step = next;
    }
    if (step == first_step) outline.erase(outline.begin());
    outlines.push_back(std::move(outline));
  }
  return outlines;
}

}  // namespace laygauge
