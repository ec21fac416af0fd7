#include "sheet/marker_outline.h"

#include <gtest/gtest.h>

#include <array>
#include <opencv2/aruco.hpp>
#include <string>

namespace laygauge {
namespace {

using Outlines = std::vector<std::vector<cv::Point>>;

// Even-odd rule along the ray to the right of a cell's centre.
bool IsInside(const Outlines& outlines, int x, int y) {
  bool inside = false;
  for (const auto& outline : outlines) {
    for (size_t i = 0; i < outline.size(); ++i) {
      const cv::Point a = outline[i];
      const cv::Point b = outline[(i + 1) % outline.size()];
      if (a.x == b.x && a.x > x && std::min(a.y, b.y) <= y && y < std::max(a.y, b.y)) {
        inside = !inside;
      }
    }
  }
  return inside;
}

// The six inner rows, 1 for white.
std::array<std::string, 6> InnerRows(int id) {
  const Outlines outlines = MarkerOutline(id);
  std::array<std::string, 6> rows;
  for (int y = 0; y < 6; ++y) {
    for (int x = 0; x < 6; ++x) {
      rows[static_cast<size_t>(y)] += IsInside(outlines, x + 1, y + 1) ? '0' : '1';
    }
  }
  return rows;
}

// Rows of OpenCV 4.6's DICT_APRILTAG_36h11, read from its Python module.
TEST(MarkerOutline, EnclosesThePublishedCells) {
  using Rows = std::array<std::string, 6>;
  EXPECT_EQ(InnerRows(0), (Rows{"001000", "011010", "000101", "000110", "101110", "101011"}));
  EXPECT_EQ(InnerRows(1), (Rows{"100100", "101101", "000110", "001111", "111010", "011011"}));
  EXPECT_EQ(InnerRows(23), (Rows{"111010", "110100", "001100", "111000", "010011", "111001"}));
}

// OpenCV's own drawing, cell by cell; and corners alternate, so that no line is drawn in pieces.
TEST(MarkerOutline, IsOpenCvsDrawingForEveryMarker) {
  const auto dictionary = cv::aruco::getPredefinedDictionary(cv::aruco::DICT_APRILTAG_36h11);
  for (int id = 0; id <= 586; ++id) {
    SCOPED_TRACE(id);
    cv::Mat drawn;
    dictionary->drawMarker(id, 8 * 5, drawn, 1);
    const Outlines outlines = MarkerOutline(id);
    for (int cell = 0; cell < 64; ++cell) {
      const int x = cell % 8;
      const int y = cell / 8;
      ASSERT_EQ(IsInside(outlines, x, y), drawn.at<uchar>(y * 5 + 2, x * 5 + 2) == 0);
    }
    for (const auto& outline : outlines) {
      ASSERT_EQ(outline.size() % 2, 0U);
      for (size_t i = 0; i < outline.size(); ++i) {
        const cv::Point along = outline[(i + 1) % outline.size()] - outline[i];
        const cv::Point next =
            outline[(i + 2) % outline.size()] - outline[(i + 1) % outline.size()];
        ASSERT_TRUE((along.x == 0) != (along.y == 0));
        ASSERT_TRUE((along.x == 0) != (next.x == 0));
      }
    }
  }
}

}  // namespace
}  // namespace laygauge
