#include "sheet/edge_sharpness.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <functional>
#include <numbers>

#include "photo/srgb.h"
#include "support/truth_view.h"

namespace laygauge {
namespace {

using ::testing::Each;
using ::testing::HasSubstr;
using ::testing::IsEmpty;

constexpr double kPaper = 0.7;
constexpr double kInk = 0.05;

// A made-up photo of the shipped A5 sheet's squares (and markers, as plain black squares), each
// blurred on the sheet by a Gaussian whose spread may differ from place to place: with u, v along
// the square's axes its image is a product of differences of normal distributions, exactly.
struct MadeUpPhoto {
  std::function<double(double)> blur_mm = [](double) { return 0.05; };  // of the sheet's x
  double tilt_factor = 1;  // of the sheet's tilt: -1 for the other sense
  bool with_markers = false;

  [[nodiscard]] View TheView() const {
    View view;
    view.camera = {{4032, 3024}, 3900, 2010, 1515, 0.02, -0.01, 0.0002, 0.0003};
    view.pose.camera_from_sheet_rotation = (Eigen::AngleAxisd(0.08, Eigen::Vector3d(0.6, 0.8, 0)) *
                                            Eigen::AngleAxisd(0.03, Eigen::Vector3d::UnitZ()))
                                               .toRotationMatrix();
    view.pose.camera_from_sheet_translation_mm = {-105, -74, 232};
    return view;
  }

  [[nodiscard]] Photo Take() const {
    Photo photo;
    photo.file = "made-up.png";
    photo.encoded = cv::Mat(3024, 4032, CV_16UC1, cv::Scalar(Encode(kPaper)));
    const SheetDescription& sheet = ShippedSheet("a5-6");
    for (const SharpnessSquare& square : sheet.sharpness_squares) {
      Draw(photo, square.x_mm, square.y_mm, square.side_mm, tilt_factor * square.tilt_deg);
    }
    if (!with_markers) return photo;
    for (const SheetMarker& marker : sheet.markers) {
      Draw(photo, marker.x_mm, marker.y_mm, marker.side_mm, 0);
    }
    return photo;
  }

 private:
  static double Encode(double linear) { return std::round(65535 * SrgbFromLinear(linear)); }

  void Draw(Photo& photo, double x_mm, double y_mm, double side_mm, double tilt_deg) const {
    const View view = TheView();
    const double turn = tilt_deg * std::numbers::pi / 180;
    const Eigen::Vector2d center = view.PixelFromSheet(x_mm, y_mm, 0);
    const int reach = static_cast<int>(16.5 * side_mm);
    const auto normal = [](double z) { return 0.5 * std::erfc(-z / std::numbers::sqrt2); };
    for (int row = static_cast<int>(center.y()) - reach; row < center.y() + reach; ++row) {
      for (int column = static_cast<int>(center.x()) - reach; column < center.x() + reach;
           ++column) {
        if (row < 0 || column < 0 || row >= photo.encoded.rows || column >= photo.encoded.cols) {
          continue;
        }
        const Eigen::Vector2d at =
            view.SheetFromPixel({column, row}, 0) - Eigen::Vector2d(x_mm, y_mm);
        const double u = at.x() * std::cos(turn) - at.y() * std::sin(turn);
        const double v = at.x() * std::sin(turn) + at.y() * std::cos(turn);
        const double blur = blur_mm(x_mm);
        const auto within = [&](double w) {
          return normal((side_mm / 2 - w) / blur) - normal((-side_mm / 2 - w) / blur);
        };
        const double black = within(u) * within(v);
        if (black < 1e-4) continue;
        photo.encoded.at<std::uint16_t>(row, column) =
            static_cast<std::uint16_t>(Encode(kPaper + (kInk - kPaper) * black));
      }
    }
  }
};

// Analytic: the blur that was put in. 1 %: quarter-pixel bins add 1/192 px^2 to a variance of
// 0.7 px^2 (0.4 %), 16-bit encoding and the cubic map far less. MTF50 of a Gaussian is
// 0.187390625 / sd; 2 % for the pixel phases of four bins a pixel.
TEST(MeasureSharpness, FindsTheBlurThatWasPutIn) {
  for (const double blur_mm : {0.05, 0.09}) {
    MadeUpPhoto made_up;
    made_up.blur_mm = [=](double) { return blur_mm; };
    const auto sharpness =
        MeasureSharpness(made_up.Take(), made_up.TheView(), ShippedSheet("a5-6"));
    ASSERT_TRUE(sharpness) << sharpness.error().message;
    ASSERT_EQ(sharpness->edges.size(), 16U);
    EXPECT_THAT(sharpness->skipped, IsEmpty());
    EXPECT_NEAR(sharpness->sharpening, 0, 0.02);
    for (const EdgeSharpness& edge : sharpness->edges) {
      EXPECT_NEAR(edge.fit.spread.blur_sd_mm, blur_mm, 0.01 * blur_mm);
      EXPECT_NEAR(edge.mtf50_per_mm * blur_mm, kMtf50OfGaussian, 0.02 * kMtf50OfGaussian);
      EXPECT_NEAR(edge.rise_mm, 2.563103131 * blur_mm, 0.01 * 2.563 * blur_mm);
      EXPECT_NEAR(edge.fit.offset_mm, 0, 0.001);  // where it was drawn, to 1/60 px
      EXPECT_LT(edge.shoot.over_pct, 0.2);
    }
  }
}

// The squares' tilt may have either sense.
TEST(MeasureSharpness, TakesTheOtherTilt) {
  MadeUpPhoto made_up;
  made_up.tilt_factor = -1;
  const auto sharpness = MeasureSharpness(made_up.Take(), made_up.TheView(), ShippedSheet("a5-6"));
  ASSERT_TRUE(sharpness) << sharpness.error().message;
  ASSERT_EQ(sharpness->edges.size(), 16U);
  for (const EdgeSharpness& edge : sharpness->edges) {
    EXPECT_NEAR(edge.fit.spread.blur_sd_mm, 0.05, 0.0005);
  }
}

// A focal plane that leaves the sheet to the right: linear truth between the squares. 1.5 %: 1 %
// as above, and a blur that changes along an edge of 7 mm.
TEST(MeasureSharpness, TiltedFocusShowsAndIsInterpolated) {
  MadeUpPhoto made_up;
  made_up.blur_mm = [](double x_mm) { return 0.05 + 0.0003 * x_mm; };
  const auto sharpness = MeasureSharpness(made_up.Take(), made_up.TheView(), ShippedSheet("a5-6"));
  ASSERT_TRUE(sharpness) << sharpness.error().message;
  for (const double x_mm : {53.0, 105.0, 157.0}) {
    const LocalSpread spread = sharpness->At(x_mm, 48, 10);
    EXPECT_NEAR(spread.along_x.blur_sd_mm, made_up.blur_mm(x_mm), 0.015 * 0.08);
    EXPECT_NEAR(spread.along_y.blur_sd_mm, made_up.blur_mm(x_mm), 0.015 * 0.08);
    EXPECT_NEAR(spread.px_per_mm, made_up.TheView().PxPerMm(x_mm, 48, 0), 0.3);
  }
}

// A view that is wrong by a third of a pixel and a hundredth of a degree: the edges are
// straightened.
TEST(MeasureSharpness, ToleratesAnInexactView) {
  const MadeUpPhoto made_up;
  View view = made_up.TheView();
  view.pose.camera_from_sheet_translation_mm += Eigen::Vector3d(0.02, -0.015, 0);
  view.camera.k1 += 0.002;
  const auto sharpness = MeasureSharpness(made_up.Take(), view, ShippedSheet("a5-6"));
  ASSERT_TRUE(sharpness) << sharpness.error().message;
  for (const EdgeSharpness& edge : sharpness->edges) {
    EXPECT_NEAR(edge.fit.spread.blur_sd_mm, 0.05, 0.0005);
  }
}

TEST(MeasureSharpness, LeavesOutACoveredSquareAndNamesIt) {
  const MadeUpPhoto made_up;
  Photo photo = made_up.Take();
  const SharpnessSquare& square = ShippedSheet("a5-6").sharpness_squares[1];
  const Eigen::Vector2d at = made_up.TheView().PixelFromSheet(square.x_mm, square.y_mm, 0);
  cv::Mat(photo.encoded, cv::Rect(cv::Point(at.x() - 90, at.y() - 90), cv::Size(180, 180))) = 30000;
  const auto sharpness = MeasureSharpness(photo, made_up.TheView(), ShippedSheet("a5-6"));
  ASSERT_TRUE(sharpness) << sharpness.error().message;
  EXPECT_EQ(sharpness->edges.size(), 12U);
  EXPECT_EQ(sharpness->skipped.size(), 4U);
  EXPECT_THAT(sharpness->skipped, Each(HasSubstr("sharpness square 2")));
  EXPECT_FALSE(sharpness->from_markers);
}

// Without squares the markers' outer edges serve; the same blur, the same tolerance. The sheet is
// turned by 1.7 degrees in this photo.
TEST(MeasureSharpness, FallsBackOnMarkers) {
  MadeUpPhoto made_up;
  made_up.with_markers = true;
  SheetDescription sheet = ShippedSheet("a5-6");
  sheet.sharpness_squares.clear();
  const auto sharpness = MeasureSharpness(made_up.Take(), made_up.TheView(), sheet);
  ASSERT_TRUE(sharpness) << sharpness.error().message;
  EXPECT_TRUE(sharpness->from_markers);
  EXPECT_GE(sharpness->edges.size(), 10U);
  for (const EdgeSharpness& edge : sharpness->edges) {
    EXPECT_NEAR(edge.fit.spread.blur_sd_mm, 0.05, 0.0005);
  }
}

TEST(MeasureSharpness, NothingToReadIsAProblem) {
  Photo photo;
  photo.file = "blank.png";
  photo.encoded = cv::Mat(3024, 4032, CV_8UC1, cv::Scalar(200));
  const auto sharpness = MeasureSharpness(photo, MadeUpPhoto().TheView(), ShippedSheet("a5-6"));
  ASSERT_FALSE(sharpness);
  EXPECT_EQ(sharpness.error().kind, ProblemKind::kUnmeasurable);
  EXPECT_THAT(sharpness.error().message, HasSubstr("blank.png: no edge"));
}

TEST(MeasureSharpness, ChecksItsOptions) {
  EdgeSharpnessOptions options;
  options.max_offset_mm = 2;
  EXPECT_THROW(options.Check(), BadOption);
}

Expected<SheetSharpness> OfPlate(const std::string& name, bool with_squares) {
  auto photo = ReadPhoto(std::string(LAYGAUGE_SOURCE_DIR) + "/sample-images/" + name + ".jpg");
  if (!photo) return tl::unexpected(photo.error());
  const nlohmann::json truth = PlateTruth(name);
  SheetDescription sheet = ShippedSheet(truth["sheet"]);
  if (!with_squares) sheet.sharpness_squares.clear();
  return MeasureSharpness(*photo, TruthView(truth, photo->size()), sheet);
}

double MeanModulationAt3(const SheetSharpness& sharpness) {
  double sum = 0;
  for (const EdgeSharpness& edge : sharpness.edges) sum += edge.modulation[2];
  return sum / static_cast<double>(sharpness.edges.size());
}

// Truth of the sample plates: d3 was not sharpened, the others were. An unsharpened edge
// overshoots by its noise only (0.6 % on three-bin means of 20 pixels each at 2 %).
TEST(MeasureSharpness, TellsSharpenedPlates) {
  for (const char* name : {"d1", "d2", "d3", "d4", "d5", "d6", "d7", "d8"}) {
    const auto sharpness = OfPlate(name, true);
    ASSERT_TRUE(sharpness) << sharpness.error().message;
    ASSERT_GE(sharpness->edges.size(), 12U) << name;
    const bool sharpened = std::string(name) != "d3";
    for (const EdgeSharpness& edge : sharpness->edges) {
      EXPECT_EQ(edge.shoot.over_pct > 1, sharpened) << name << edge.target << edge.side;
    }
    EXPECT_EQ(sharpness->sharpening > 0.04, sharpened) << name;
  }
}

// Squares and markers are different edges of the same photo: their modulation at 3 cycles a mm,
// read by the slanted-edge method, must agree; 0.03: edge phases on 0.1 mm of the printed grid.
// The parametric description must agree with that reading as well.
TEST(MeasureSharpness, MarkersAndModelAgreeWithSquares) {
  for (const char* name : {"d2", "d3", "d4", "d6"}) {
    const auto squares = OfPlate(name, true);
    const auto markers = OfPlate(name, false);
    ASSERT_TRUE(squares && markers);
    EXPECT_NEAR(MeanModulationAt3(*squares), MeanModulationAt3(*markers), 0.03) << name;
    double model = 0;
    for (const EdgeSharpness& edge : squares->edges) {
      model += edge.fit.spread.Modulation(3) / static_cast<double>(squares->edges.size());
    }
    EXPECT_NEAR(MeanModulationAt3(*squares), model, 0.015) << name;
  }
}

}  // namespace
}  // namespace laygauge
