#include "sheet/draw_sheet.h"

#include <gtest/gtest.h>
#include <unistd.h>

#include <array>
#include <cmath>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <map>
#include <opencv2/aruco.hpp>
#include <opencv2/imgproc.hpp>

#include "base/file.h"
#include "photo/photo.h"
#include "photo/srgb.h"
#include "sheet/find_markers.h"
#include "sheet/plan_sheet.h"

namespace laygauge {
namespace {

constexpr double kDpi = 400;
constexpr double kPxPerMm = kDpi / 25.4;

// The PDF as pixels, by poppler's pdftoppm: a renderer that shares nothing with this program.
cv::Mat Render(const std::string& pdf) {
  namespace fs = std::filesystem;
  const fs::path folder =
      fs::temp_directory_path() / ("laygauge-sheet-" + std::to_string(::getpid()));
  fs::create_directories(folder);
  std::ofstream(folder / "sheet.pdf", std::ios::binary) << pdf;
  const std::string command = "pdftoppm -singlefile -gray -png -r 400 '" +
                              (folder / "sheet.pdf").string() + "' '" +
                              (folder / "sheet").string() + "'";
  EXPECT_EQ(std::system(command.c_str()), 0) << "pdftoppm of poppler-utils is needed";
  const auto photo = ReadPhoto(folder / "sheet.png");
  EXPECT_TRUE(photo) << (photo ? "" : photo.error().message);
  fs::remove_all(folder);
  return photo ? photo->encoded : cv::Mat();
}

// The pixel (centres at whole numbers) of a point of the sheet.
cv::Point2d PixelOf(double x_mm, double y_mm) {
  return {x_mm * kPxPerMm - 0.5, y_mm * kPxPerMm - 0.5};
}

// From the upper left corner on, clockwise.
std::array<cv::Point2d, 4> CornerPixels(const SheetMarker& marker) {
  const double half = marker.side_mm / 2;
  return {PixelOf(marker.x_mm - half, marker.y_mm - half),
          PixelOf(marker.x_mm + half, marker.y_mm - half),
          PixelOf(marker.x_mm + half, marker.y_mm + half),
          PixelOf(marker.x_mm - half, marker.y_mm + half)};
}

double MeanGray(const cv::Mat& page, double x_mm, double y_mm, double side_mm) {
  const cv::Point2d corner = PixelOf(x_mm - side_mm / 2, y_mm - side_mm / 2);
  const int side = static_cast<int>(side_mm * kPxPerMm);
  return cv::mean(page(cv::Rect(cv::Point(corner), cv::Size(side, side))))[0];
}

// Length of black along the row or column through a point, mm: darkness summed up, so that partly
// covered pixels count by their share.
double DarkLength(const cv::Mat& line) {
  return (255.0 * static_cast<double>(line.total()) - cv::sum(line)[0]) / 255 / kPxPerMm;
}

class DrawnSheet : public ::testing::TestWithParam<const char*> {
 protected:
  static SheetDescription Sheet() {
    return PlanSheet(std::string(GetParam()) == "a5-6" ? PlanOfA5With6() : PlanOfA4With15());
  }
  // Rendered once for all tests.
  static cv::Mat RenderedPage() {
    static std::map<std::string, cv::Mat> pages;
    cv::Mat& page = pages[GetParam()];
    if (page.empty()) page = Render(DrawSheet(Sheet()));
    return page;
  }
};

TEST_P(DrawnSheet, PageIsAtTrueScale) {
  const SheetDescription sheet = Sheet();
  const cv::Mat page = RenderedPage();
  // pdftoppm rounds up to whole pixels.
  EXPECT_NEAR(page.cols, sheet.page_width_mm * kPxPerMm, 1);
  EXPECT_NEAR(page.rows, sheet.page_height_mm * kPxPerMm, 1);
}

// The program's own finder: what it prints, it finds, every corner within 0.05 mm, the most that a
// corner may be off in use. Most of what is seen here is the renderer's: it fills every sample that
// is touched, and mixes black and white in encoded values, while the finder reads light, so that
// squares look up to 0.45 px too large at each side; at a corner that is 0.04 mm.
TEST_P(DrawnSheet, EveryMarkerIsFoundWhereTheDescriptionSays) {
  const SheetDescription sheet = Sheet();
  Photo photo;
  photo.file = "sheet.png";
  photo.encoded = RenderedPage();
  const auto found = FindMarkers(photo);
  ASSERT_TRUE(found) << found.error().message;
  ASSERT_EQ(found->markers.size(), sheet.markers.size());
  for (const FoundMarker& marker : found->markers) {
    SCOPED_TRACE(marker.id);
    const SheetMarker* drawn = sheet.FindMarker(marker.id);
    ASSERT_NE(drawn, nullptr);
    const auto expected = CornerPixels(*drawn);
    for (size_t k = 0; k < 4; ++k) {
      const cv::Point2d corner(marker.corners_px[k].x(), marker.corners_px[k].y());
      EXPECT_LT(cv::norm(corner - expected[k]) / kPxPerMm, 0.05);
    }
  }
}

// OpenCV's detector, as a reference: every marker with its number, turned as it should be.
// Tolerance: OpenCV's sub-pixel corners err by 0.15 to 0.2 px rms (measured on drawn squares);
// with what the renderer adds (above), 0.05 mm.
TEST_P(DrawnSheet, OpenCvFindsTheSameMarkers) {
  const SheetDescription sheet = Sheet();
  const auto dictionary = cv::aruco::getPredefinedDictionary(cv::aruco::DICT_APRILTAG_36h11);
  const auto parameters = cv::aruco::DetectorParameters::create();
  parameters->cornerRefinementMethod = cv::aruco::CORNER_REFINE_SUBPIX;
  std::vector<std::vector<cv::Point2f>> corners;
  std::vector<int> ids;
  cv::aruco::detectMarkers(RenderedPage(), dictionary, corners, ids, parameters);
  ASSERT_EQ(ids.size(), sheet.markers.size());
  for (size_t i = 0; i < ids.size(); ++i) {
    SCOPED_TRACE(ids[i]);
    const SheetMarker* drawn = sheet.FindMarker(ids[i]);
    ASSERT_NE(drawn, nullptr);
    const auto expected = CornerPixels(*drawn);
    for (size_t k = 0; k < 4; ++k) {
      EXPECT_LT(cv::norm(cv::Point2d(corners[i][k]) - expected[k]) / kPxPerMm, 0.05);
    }
  }
}

// The border cell's darkness across a marker is its side: pixels partly covered count by share.
// Tolerance: poppler fills every one of a pixel's 4 x 4 samples that is touched, so an edge is off
// by at most 1/4 px, two by 1/2 px = 0.032 mm.
TEST_P(DrawnSheet, MarkersAndTheBarHaveTheirLengths) {
  const SheetDescription sheet = Sheet();
  const cv::Mat page = RenderedPage();
  constexpr double kTolerance_mm = 0.032;
  for (const SheetMarker& marker : sheet.markers) {
    const double cell = marker.side_mm / 8;
    const cv::Point from(
        PixelOf(marker.x_mm - marker.side_mm / 2 - 1, marker.y_mm - marker.side_mm / 2 + cell / 2));
    const int length = static_cast<int>((marker.side_mm + 2) * kPxPerMm);
    EXPECT_NEAR(DarkLength(page(cv::Rect(from, cv::Size(length, 1)))), marker.side_mm,
                kTolerance_mm);
  }
  const ScaleBar& bar = sheet.scale_bar;
  const cv::Point from(PixelOf(bar.x0_mm - 1, bar.y_mm));
  const int length = static_cast<int>((bar.length_mm() + 2) * kPxPerMm);
  EXPECT_NEAR(DarkLength(page(cv::Rect(from, cv::Size(length, 1)))), bar.length_mm(),
              kTolerance_mm);
}

// Inside a black cell nothing but black: cells drawn one by one would show white seams.
TEST_P(DrawnSheet, MarkersHaveNoSeams) {
  const SheetDescription sheet = Sheet();
  const cv::Mat page = RenderedPage();
  for (const SheetMarker& marker : sheet.markers) {
    const double cell = marker.side_mm / 8;
    const double left = marker.x_mm - marker.side_mm / 2;
    const double top = marker.y_mm - marker.side_mm / 2;
    // Along the middle of the border's upper and left cells, a pixel clear of the ends.
    const cv::Point row_from(PixelOf(left + 0.2, top + cell / 2));
    const cv::Point column_from(PixelOf(left + cell / 2, top + 0.2));
    const int length = static_cast<int>((marker.side_mm - 0.5) * kPxPerMm);
    EXPECT_EQ(cv::countNonZero(page(cv::Rect(row_from, cv::Size(length, 1)))), 0) << marker.id;
    EXPECT_EQ(cv::countNonZero(page(cv::Rect(column_from, cv::Size(1, length)))), 0) << marker.id;
  }
}

TEST_P(DrawnSheet, GraysSquaresAndWellsAreThere) {
  const SheetDescription sheet = Sheet();
  const cv::Mat page = RenderedPage();
  for (const GrayPatch& gray : sheet.grays) {
    // One level for rounding in the PDF and the renderer.
    EXPECT_NEAR(MeanGray(page, gray.x_mm, gray.y_mm, gray.side_mm * 0.8),
                SrgbFromLinear(gray.reflectance) * 255, 1.0);
  }
  for (const SharpnessSquare& square : sheet.sharpness_squares) {
    // Blackness over a box around it is its area, within 1/4 px all round.
    const double box = square.side_mm + 2;
    const double black_share = 1 - MeanGray(page, square.x_mm, square.y_mm, box) / 255;
    const double pixels = std::floor(box * kPxPerMm) / kPxPerMm;
    EXPECT_NEAR(black_share * pixels * pixels, square.side_mm * square.side_mm,
                4 * square.side_mm / 4 / kPxPerMm);
    // Counter-clockwise: the upper left part of the upper edge lies lower than its right part.
    const double half = square.side_mm / 2;
    EXPECT_GT(MeanGray(page, square.x_mm - half * 0.75, square.y_mm - half, 0.3), 200);
    EXPECT_LT(MeanGray(page, square.x_mm + half * 0.75, square.y_mm - half, 0.3), 50);
  }
  for (const Well& well : sheet.wells) {
    EXPECT_EQ(MeanGray(page, well.x_mm, well.y_mm, well.width_mm - 1), 255) << well.name;
    EXPECT_LT(MeanGray(page, well.x_mm, well.y_mm - well.height_mm / 2, 0.26), 220) << well.name;
  }
}

INSTANTIATE_TEST_SUITE_P(Shipped, DrawnSheet, ::testing::Values("a5-6", "a4-15"));

TEST(DrawSheet, FloorsArePrintedInTheirGray) {
  SheetPlan plan;
  plan.well_floor_reflectance = 0.4;
  const SheetDescription sheet = PlanSheet(plan);
  const cv::Mat page = Render(DrawSheet(sheet));
  for (const Well& well : sheet.wells) {
    EXPECT_NEAR(MeanGray(page, well.x_mm, well.y_mm, well.width_mm - 1), SrgbFromLinear(0.4) * 255,
                1.0);
  }
}

// The shipped PDFs are what the program draws.
TEST(DrawSheet, ShippedPdfsAreUpToDate) {
  for (const SheetDescription& sheet : ShippedSheets()) {
    const auto shipped =
        ReadFile(std::string(LAYGAUGE_SOURCE_DIR) + "/calibration/sheets/" + sheet.name + ".pdf");
    ASSERT_TRUE(shipped) << shipped.error().message;
    const cv::Mat was = Render(*shipped);
    const cv::Mat is = Render(DrawSheet(sheet));
    ASSERT_EQ(was.size(), is.size());
    EXPECT_EQ(cv::norm(was, is, cv::NORM_INF), 0) << sheet.name;
  }
}

}  // namespace
}  // namespace laygauge
