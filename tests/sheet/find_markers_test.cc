#include "sheet/find_markers.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <opencv2/aruco.hpp>
#include <opencv2/imgproc.hpp>

#include "photo/srgb.h"
#include "sheet/match_sheet.h"
#include "support/truth_view.h"

namespace laygauge {
namespace {

using testing::AllOf;
using testing::HasSubstr;

Photo PhotoOf(const cv::Mat& encoded) {
  Photo photo;
  photo.file = "photo.png";
  photo.encoded = encoded;
  return photo;
}

std::string PlateName(int number) { return "d" + std::to_string(number); }

Photo PlatePhoto(int number) {
  return ReadPhoto(std::string(LAYGAUGE_SOURCE_DIR) + "/sample-images/" + PlateName(number) +
                   ".jpg")
      .value();
}

// Pixels of a marker's corners, in the order of the drawing read upright.
SquareCorners ProjectCorners(const View& view, const SheetMarker& marker) {
  const double h = marker.side_mm / 2;
  return {view.PixelFromSheet(marker.x_mm - h, marker.y_mm - h, 0),
          view.PixelFromSheet(marker.x_mm + h, marker.y_mm - h, 0),
          view.PixelFromSheet(marker.x_mm + h, marker.y_mm + h, 0),
          view.PixelFromSheet(marker.x_mm - h, marker.y_mm + h, 0)};
}

std::string MessageOf(const cv::Mat& encoded) {
  const auto found = FindMarkers(PhotoOf(encoded));
  EXPECT_FALSE(found.has_value());
  return found ? "" : found.error().message;
}

class PlateMarkers : public testing::TestWithParam<int> {};

// Truth: the plates' cameras. Their sheets were drawn on a raster of 1/40 mm, which moves a drawn
// edge by up to 0.0125 mm, 0.22 px at 17.5 px/mm (marker 1, at x = 73.667 mm, is drawn at 73.675 in
// every photo); the finder's own share is kept to a tenth of a pixel, root mean square.
TEST_P(PlateMarkers, CornersLieWhereTheCameraPutsThem) {
  const Photo photo = PlatePhoto(GetParam());
  const auto truth = PlateTruth(PlateName(GetParam()));
  const View view = TruthView(truth, photo.size());
  const SheetDescription& sheet = ShippedSheet(truth["sheet"]);
  const auto found = FindMarkers(photo);
  ASSERT_TRUE(found.has_value()) << found.error().message;
  EXPECT_EQ(found->markers.size(), GetParam() == 8 ? 4U : sheet.markers.size());
  EXPECT_TRUE(found->notes.empty());
  double squares = 0;
  Eigen::Vector2d mean = Eigen::Vector2d::Zero();
  double count = 0;
  for (const FoundMarker& marker : found->markers) {
    const SheetMarker* drawn = sheet.FindMarker(marker.id);
    ASSERT_NE(drawn, nullptr);
    const auto expected = ProjectCorners(view, *drawn);
    for (size_t k = 0; k < 4; ++k) {
      const Eigen::Vector2d error = marker.corners_px[k] - expected[k];
      EXPECT_LT(error.norm(), 0.3) << "marker " << marker.id << " corner " << k;
      squares += error.squaredNorm();
      mean += error;
      count += 1;
    }
  }
  EXPECT_LT(std::sqrt(squares / (2 * count)), 0.1);  // of a coordinate
  // A wrong pixel-centre rule would show as 0.5 px here.
  EXPECT_LT((mean / count).norm(), 0.03);
}

INSTANTIATE_TEST_SUITE_P(Each, PlateMarkers, testing::Range(1, 9));

class ChangedPhoto : public testing::Test {
 protected:
  // Corners of the photo changed by `to`, an affine map of pixels, against the unchanged photo's.
  void ExpectSameMarkers(const cv::Mat& changed, const cv::Matx23d& to, double tolerance_px) {
    const auto before = FindMarkers(plate_).value();
    const auto after = FindMarkers(PhotoOf(changed));
    ASSERT_TRUE(after.has_value()) << after.error().message;
    ASSERT_EQ(after->markers.size(), before.markers.size());
    for (size_t i = 0; i < before.markers.size(); ++i) {
      EXPECT_EQ(after->markers[i].id, before.markers[i].id);
      for (size_t k = 0; k < 4; ++k) {
        const Eigen::Vector2d& c = before.markers[i].corners_px[k];
        const cv::Vec2d moved = to * cv::Vec3d(c.x(), c.y(), 1);
        const Eigen::Vector2d expected(moved[0], moved[1]);
        EXPECT_LT((after->markers[i].corners_px[k] - expected).norm(), tolerance_px);
      }
    }
  }

  const Photo plate_ = PlatePhoto(2);
};

// By invariance. Averaging to 3/4 of the size keeps light, encoded: the edge's place in encoded
// values moves by a few hundredths of a pixel; twice 0.1 px is allowed.
TEST_F(ChangedPhoto, ReducedToThreeQuarters) {
  cv::Mat changed;
  cv::resize(plate_.encoded, changed, {}, 0.75, 0.75, cv::INTER_AREA);
  const double shift = 0.75 * 0.5 - 0.5;
  ExpectSameMarkers(changed, {0.75, 0, shift, 0, 0.75, shift}, 0.2);
}

// Quarter turns move pixels without changing them; samples fall on other sides of a pixel's middle:
// 0.01 px.
TEST_F(ChangedPhoto, TurnedByAQuarter) {
  cv::Mat changed;
  cv::rotate(plate_.encoded, changed, cv::ROTATE_90_CLOCKWISE);
  ExpectSameMarkers(changed, {0, -1, plate_.encoded.rows - 1.0, 1, 0, 0}, 0.01);
}

// 257 carries 8 bits into 16 without a remainder: the same light to float's precision.
TEST_F(ChangedPhoto, SixteenBits) {
  cv::Mat changed;
  plate_.encoded.convertTo(changed, CV_16U, 257);
  ExpectSameMarkers(changed, {1, 0, 0, 0, 1, 0}, 1e-3);
}

// A defocused photo: linear light blurred by 3 px. The blur is symmetric, so edges stay; the
// plate's own edges, sharpened by its camera and compressed, are read up to 0.1 px differently.
TEST_F(ChangedPhoto, Blurred) {
  cv::Mat light = LinearRegion(plate_, {{0, 0}, plate_.size()});
  cv::GaussianBlur(light, light, {}, 3);
  cv::Mat changed(light.size(), CV_16UC1);
  for (int y = 0; y < light.rows; ++y) {
    for (int x = 0; x < light.cols; ++x) {
      changed.at<std::uint16_t>(y, x) =
          cv::saturate_cast<std::uint16_t>(65535 * SrgbFromLinear(light.at<float>(y, x)));
    }
  }
  ExpectSameMarkers(changed, {1, 0, 0, 0, 1, 0}, 0.15);
}

// The same light at 60 % exposure: encoded values by the sRGB curve are scaled, which is nearly
// linear light scaled; rounding to 8 bits dominates.
TEST_F(ChangedPhoto, Darker) {
  cv::Mat changed;
  plate_.encoded.convertTo(changed, CV_8U, 0.6);
  ExpectSameMarkers(changed, {1, 0, 0, 0, 1, 0}, 0.1);
}

TEST_F(ChangedPhoto, SheetInAPartOfALargerPicture) {
  cv::Mat changed(4800, 6400, CV_8UC1, cv::Scalar(90));
  plate_.encoded.copyTo(changed(cv::Rect({1500, 900}, plate_.size())));
  ExpectSameMarkers(changed, {1, 0, 1500, 0, 1, 900}, 0.01);
}

TEST_F(ChangedPhoto, MirroredIsRefused) {
  cv::Mat changed;
  cv::flip(plate_.encoded, changed, 1);
  EXPECT_THAT(MessageOf(changed), AllOf(HasSubstr("photo.png"), HasSubstr("mirrored")));
}

TEST_F(ChangedPhoto, TwoSheetsAreRefused) {
  cv::Mat changed;
  cv::hconcat(plate_.encoded, plate_.encoded, changed);
  EXPECT_THAT(MessageOf(changed), HasSubstr("marker 0 is in the picture twice"));
}

TEST_F(ChangedPhoto, FewerThanFourMarkersAreRefused) {
  cv::Mat changed = plate_.encoded.clone();
  const View view = TruthView(PlateTruth("d2"), plate_.size());
  const Eigen::Vector2d cut = view.PixelFromSheet(20, 0, 0);
  // Paper colour over all but the left column: markers 0, 4 and 8 stay.
  changed.colRange(static_cast<int>(cut.x()) + 100, changed.cols).setTo(150);
  EXPECT_THAT(MessageOf(changed), AllOf(HasSubstr("only 3"), HasSubstr("at least 4")));
}

TEST(FindMarkers, AnEmptyPictureIsRefused) {
  EXPECT_THAT(MessageOf(cv::Mat(1500, 2000, CV_8UC1, cv::Scalar(128))),
              AllOf(HasSubstr("none of the sheet's markers"), HasSubstr("at least 4")));
}

// Drawn by OpenCV's own routine on pixels 100 to 899: outer edges at 99.5 and 899.5, corner order
// as the drawing is read. Hard edges between pixel values: found to a hundredth.
TEST(FindMarkers, CornersOfADrawnMarkerFollowThePixelCentreRule) {
  cv::Mat page(1000, 1000, CV_8UC1, cv::Scalar(255));
  cv::Mat marker;
  cv::aruco::drawMarker(cv::aruco::getPredefinedDictionary(cv::aruco::DICT_APRILTAG_36h11), 23, 800,
                        marker);
  marker.copyTo(page(cv::Rect(100, 100, 800, 800)));
  const auto found = FindMarkers(PhotoOf(page), {.fewest_markers = 1});
  ASSERT_TRUE(found.has_value()) << found.error().message;
  ASSERT_EQ(found->markers.size(), 1U);
  EXPECT_EQ(found->markers[0].id, 23);
  const std::array<Eigen::Vector2d, 4> expected{
      Eigen::Vector2d(99.5, 99.5), {899.5, 99.5}, {899.5, 899.5}, {99.5, 899.5}};
  for (size_t k = 0; k < 4; ++k) {
    EXPECT_LT((found->markers[0].corners_px[k] - expected[k]).norm(), 0.01);
  }
}

TEST(FindMarkers, OptionsAreChecked) {
  EXPECT_NO_THROW(FindMarkersOptions{}.Check());
  EXPECT_THROW(FindMarkersOptions{.reduced_size_px = 100}.Check(), BadOption);
  EXPECT_THROW(FindMarkersOptions{.fewest_markers = 0}.Check(), BadOption);
}

FoundMarkers Markers(const std::vector<int>& ids) {
  FoundMarkers found;
  SquareCorners anywhere;
  anywhere.fill(Eigen::Vector2d::Zero());
  for (const int id : ids) found.markers.push_back({id, anywhere, 0});
  return found;
}

TEST(MatchSheet, TheShippedSheetIsToldByItsMarkers) {
  const auto match = MatchSheet("p.jpg", Markers({0, 1, 2, 8, 25}), ShippedSheets());
  ASSERT_TRUE(match.has_value()) << match.error().message;
  EXPECT_EQ(match->sheet.name, "a5-6");
  EXPECT_EQ(match->markers.size(), 4U);
  ASSERT_EQ(match->notes.size(), 1U);
  EXPECT_THAT(match->notes[0], HasSubstr("marker 25"));
}

TEST(MatchSheet, MarkersOfAnotherSheetNameIt) {
  const SheetDescription& a4 = ShippedSheets()[0];
  ASSERT_EQ(a4.name, "a4-15");
  const auto match = MatchSheet("p.jpg", Markers({0, 1, 2, 3, 4, 8}), {&a4, 1});
  ASSERT_FALSE(match.has_value());
  EXPECT_THAT(match.error().message,
              AllOf(HasSubstr("p.jpg"), HasSubstr("0 to 4, 8"), HasSubstr("a4-15: 20 to 33"),
                    HasSubstr("shipped sheet a5-6")));
}

TEST(MatchSheet, MarkersOfNoKnownSheet) {
  const auto match = MatchSheet("p.jpg", Markers({100, 101, 110, 200}), ShippedSheets());
  ASSERT_FALSE(match.has_value());
  EXPECT_THAT(match.error().message,
              AllOf(HasSubstr("100, 101, 110, 200"), HasSubstr("a5-6: 0 to 9")));
}

TEST(MatchSheet, MarkersOfTwoSheets) {
  const auto match = MatchSheet("p.jpg", Markers({0, 1, 2, 3, 20, 21, 22, 23}), ShippedSheets());
  ASSERT_FALSE(match.has_value());
  EXPECT_THAT(match.error().message, HasSubstr("two sheets"));
}

}  // namespace
}  // namespace laygauge
