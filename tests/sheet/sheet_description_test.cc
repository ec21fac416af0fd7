#include "sheet/sheet_description.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "base/file.h"

namespace laygauge {
namespace {

using testing::AllOf;
using testing::ElementsAre;
using testing::HasSubstr;

const std::string kSheetsFolder = std::string(LAYGAUGE_SOURCE_DIR) + "/calibration/sheets/";

std::string SmallSheet() {
  return R"({"sheet": "small", "version": 1, "page_mm": {"width": 100, "height": 80},
 "family": "apriltag-36h11",
 "markers": [{"id": 3, "x_mm": 10, "y_mm": 10, "side_mm": 12},
             {"id": 4, "x_mm": 90, "y_mm": 10, "side_mm": 12},
             {"id": 5, "x_mm": 10, "y_mm": 70, "side_mm": 12},
             {"id": 6, "x_mm": 90, "y_mm": 70, "side_mm": 12}],
 "wells": [{"name": "A1", "x_mm": 40, "y_mm": 40, "width_mm": 20, "height_mm": 24},
           {"name": "A2", "x_mm": 65, "y_mm": 40, "width_mm": 20, "height_mm": 24}],
 "sharpness_squares": [{"x_mm": 30, "y_mm": 10, "side_mm": 7, "tilt_deg": 5}],
 "grays": [{"x_mm": 50, "y_mm": 10, "side_mm": 4, "reflectance": 0.36}],
 "scale_bar": {"x0_mm": 40, "x1_mm": 60, "y_mm": 70}})";
}

std::string SmallSheetWith(const std::string& old_text, const std::string& new_text) {
  std::string text = SmallSheet();
  const size_t at = text.find(old_text);
  EXPECT_NE(at, std::string::npos) << old_text;
  return text.replace(at, old_text.size(), new_text);
}

// The figures are those of the file itself, read by eye.
TEST(SheetDescription, ReadsTheA5SheetWithSixWells) {
  const SheetDescription sheet = ReadSheet(kSheetsFolder + "a5-6.json").value();
  EXPECT_EQ(sheet.name, "a5-6");
  EXPECT_EQ(sheet.page_width_mm, 210);
  EXPECT_EQ(sheet.page_height_mm, 148);
  ASSERT_EQ(sheet.markers.size(), 10U);
  ASSERT_NE(sheet.FindMarker(9), nullptr);
  EXPECT_EQ(sheet.FindMarker(9)->x_mm, 199);
  EXPECT_EQ(sheet.FindMarker(10), nullptr);
  ASSERT_EQ(sheet.wells.size(), 6U);
  ASSERT_NE(sheet.FindWell("B2"), nullptr);
  EXPECT_EQ(sheet.FindWell("B2")->y_mm, 100);
  EXPECT_EQ(sheet.FindWell("C1"), nullptr);
  EXPECT_EQ(sheet.sharpness_squares.size(), 4U);
  EXPECT_EQ(sheet.grays.size(), 6U);
  EXPECT_NEAR(sheet.scale_bar.length_mm(), 20, 1e-12);
  EXPECT_EQ(sheet.well_floor_reflectance, 1);
  EXPECT_TRUE(sheet.unknown_keys.empty());
}

TEST(SheetDescription, ShipsTheFilesOfCalibration) {
  std::vector<std::string> names;
  for (const SheetDescription& sheet : ShippedSheets()) {
    names.push_back(sheet.name);
    EXPECT_EQ(FormatSheet(sheet),
              FormatSheet(ReadSheet(kSheetsFolder + sheet.name + ".json").value()));
  }
  EXPECT_THAT(names, ElementsAre("a4-15", "a5-6"));
}

TEST(SheetDescription, WhatIsWrittenReadsBackTheSame) {
  SheetDescription sheet =
      ParseSheet(SmallSheetWith("\"family\"", "\"well_floor_reflectance\": 0.3, \"family\""),
                 "small.json")
          .value();
  EXPECT_EQ(sheet.well_floor_reflectance, 0.3);
  sheet.markers[0].x_mm = 10.1 + 1e-15;  // needs all 17 digits
  const std::string text = FormatSheet(sheet);
  const SheetDescription again = ParseSheet(text, "again.json").value();
  EXPECT_EQ(FormatSheet(again), text);
  EXPECT_EQ(again.markers[0].x_mm, sheet.markers[0].x_mm);
  EXPECT_EQ(again.wells[1].name, "A2");
  EXPECT_EQ(again.well_floor_reflectance, 0.3);
}

TEST(SheetDescription, UnknownKeysAreReportedNotRefused) {
  const auto sheet = ParseSheet(
      SmallSheetWith("\"side_mm\": 7", "\"side_mm\": 7, \"colour\": \"black\""), "small.json");
  ASSERT_TRUE(sheet.has_value()) << sheet.error().message;
  EXPECT_THAT(sheet->unknown_keys, ElementsAre("small.json: sharpness_squares[0].colour"));
}

struct Fault {
  std::string name, old_text, new_text, key, expectation;
};

class SheetFault : public testing::TestWithParam<Fault> {};

TEST_P(SheetFault, IsRefusedWithFileKeyAndExpectation) {
  const auto sheet =
      ParseSheet(SmallSheetWith(GetParam().old_text, GetParam().new_text), "small.json");
  ASSERT_FALSE(sheet.has_value());
  EXPECT_EQ(sheet.error().kind, ProblemKind::kBadInput);
  EXPECT_THAT(sheet.error().message, AllOf(HasSubstr("small.json"), HasSubstr(GetParam().key),
                                           HasSubstr(GetParam().expectation)));
}

INSTANTIATE_TEST_SUITE_P(
    Each, SheetFault,
    testing::Values(
        Fault{"Syntax", "\"version\": 1,", "\"version\": 1", "line 1", "not JSON"},
        Fault{"WrongType", "\"side_mm\": 12}", "\"side_mm\": \"12\"}", "markers[0].side_mm",
              "a number was expected"},
        Fault{"ListForObject", "{\"width\": 100, \"height\": 80}", "[100, 80]", "page_mm",
              "an object"},
        Fault{"MissingKey", "\"width_mm\": 20, ", "", "wells[0].width_mm", "is missing"},
        Fault{"TwoMarkers", "\"id\": 4", "\"id\": 3", "markers[1].id", "marker 3 is there twice"},
        Fault{"NoSuchTag", "\"id\": 4", "\"id\": 587", "markers[1].id", "from 0 to 586"},
        Fault{"TwoWells", "\"A2\"", "\"A1\"", "wells[1].name", "\"A1\" is there twice"},
        Fault{"MarkerOffPage", "\"x_mm\": 90, \"y_mm\": 10", "\"x_mm\": 95, \"y_mm\": 10",
              "markers[1]", "beyond the page"},
        Fault{"WellOffPage", "\"x_mm\": 40, \"y_mm\": 40", "\"x_mm\": 40, \"y_mm\": 70", "wells[0]",
              "beyond the page"},
        Fault{"BarOffPage", "\"x1_mm\": 60", "\"x1_mm\": 160", "scale_bar", "beyond the page"},
        Fault{"NoSize", "\"side_mm\": 12", "\"side_mm\": 0", "markers[0].side_mm",
              "more than 0 was expected"},
        Fault{"NegativePage", "\"width\": 100", "\"width\": -100", "page_mm.width",
              "more than 0 was expected"},
        Fault{"Family", "apriltag-36h11", "apriltag-16h5", "family", "only family"},
        Fault{"Reflectance", "0.36", "36", "grays[0].reflectance", "above 0 and up to 1"},
        Fault{"BarBackwards", "\"x0_mm\": 40", "\"x0_mm\": 61", "scale_bar.x1_mm",
              "more than x0_mm"}),
    [](const auto& param_info) { return param_info.param.name; });

TEST(SheetDescription, FewerThanFourMarkersAreRefused) {
  const auto sheet = ParseSheet(
      SmallSheetWith(",\n             {\"id\": 6, \"x_mm\": 90, \"y_mm\": 70, \"side_mm\": 12}",
                     ""),
      "small.json");
  ASSERT_FALSE(sheet.has_value());
  EXPECT_THAT(sheet.error().message, HasSubstr("at least 4 markers"));
}

TEST(SheetDescription, AMissingFileIsNamed) {
  const auto sheet = ReadSheet(kSheetsFolder + "none.json");
  ASSERT_FALSE(sheet.has_value());
  EXPECT_THAT(sheet.error().message, HasSubstr("none.json"));
}

// By hand: a bar of 20 mm that measures 19.87 mm was printed at 99.35 %.
TEST(SheetDescription, AMeasuredBarScalesEveryLength) {
  const SheetDescription sheet = ParseSheet(SmallSheet(), "small.json").value();
  const SheetDescription scaled = ScaledByBar(sheet, 19.87);
  const double rounding_mm = 1e-12;
  EXPECT_NEAR(scaled.page_height_mm, 80 * 0.9935, rounding_mm);
  EXPECT_NEAR(scaled.markers[1].x_mm, 90 * 0.9935, rounding_mm);
  EXPECT_NEAR(scaled.markers[1].side_mm, 12 * 0.9935, rounding_mm);
  EXPECT_NEAR(scaled.wells[0].height_mm, 24 * 0.9935, rounding_mm);
  EXPECT_NEAR(scaled.sharpness_squares[0].side_mm, 7 * 0.9935, rounding_mm);
  EXPECT_EQ(scaled.sharpness_squares[0].tilt_deg, 5);
  EXPECT_NEAR(scaled.grays[0].x_mm, 50 * 0.9935, rounding_mm);
  EXPECT_EQ(scaled.grays[0].reflectance, 0.36);
  EXPECT_NEAR(scaled.scale_bar.length_mm(), 19.87, rounding_mm);
  EXPECT_THROW((void)ScaledByBar(sheet, 0), BadOption);
}

}  // namespace
}  // namespace laygauge
