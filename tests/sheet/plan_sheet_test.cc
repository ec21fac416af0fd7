#include "sheet/plan_sheet.h"

#include <gtest/gtest.h>

#include <cmath>

#include "support/doc_example.h"

namespace laygauge {
namespace {

const SheetDescription& Shipped(const std::string& name) {
  for (const SheetDescription& sheet : ShippedSheets()) {
    if (sheet.name == name) return sheet;
  }
  throw std::out_of_range(name);
}

void ExpectSame(const SheetDescription& planned, const SheetDescription& shipped) {
  constexpr double kTolerance_mm = 1e-3;  // the files give whole micrometres
  EXPECT_EQ(planned.name, shipped.name);
  EXPECT_EQ(planned.page_width_mm, shipped.page_width_mm);
  EXPECT_EQ(planned.page_height_mm, shipped.page_height_mm);
  ASSERT_EQ(planned.markers.size(), shipped.markers.size());
  for (size_t i = 0; i < planned.markers.size(); ++i) {
    EXPECT_EQ(planned.markers[i].id, shipped.markers[i].id);
    EXPECT_NEAR(planned.markers[i].x_mm, shipped.markers[i].x_mm, kTolerance_mm);
    EXPECT_NEAR(planned.markers[i].y_mm, shipped.markers[i].y_mm, kTolerance_mm);
    EXPECT_NEAR(planned.markers[i].side_mm, shipped.markers[i].side_mm, kTolerance_mm);
  }
  ASSERT_EQ(planned.wells.size(), shipped.wells.size());
  for (size_t i = 0; i < planned.wells.size(); ++i) {
    EXPECT_EQ(planned.wells[i].name, shipped.wells[i].name);
    EXPECT_NEAR(planned.wells[i].x_mm, shipped.wells[i].x_mm, kTolerance_mm);
    EXPECT_NEAR(planned.wells[i].y_mm, shipped.wells[i].y_mm, kTolerance_mm);
    EXPECT_NEAR(planned.wells[i].width_mm, shipped.wells[i].width_mm, kTolerance_mm);
    EXPECT_NEAR(planned.wells[i].height_mm, shipped.wells[i].height_mm, kTolerance_mm);
  }
  ASSERT_EQ(planned.sharpness_squares.size(), shipped.sharpness_squares.size());
  for (size_t i = 0; i < planned.sharpness_squares.size(); ++i) {
    const SharpnessSquare& a = planned.sharpness_squares[i];
    const SharpnessSquare& b = shipped.sharpness_squares[i];
    EXPECT_NEAR(a.x_mm, b.x_mm, kTolerance_mm);
    EXPECT_NEAR(a.y_mm, b.y_mm, kTolerance_mm);
    EXPECT_NEAR(a.side_mm, b.side_mm, kTolerance_mm);
    EXPECT_EQ(a.tilt_deg, b.tilt_deg);
  }
  ASSERT_EQ(planned.grays.size(), shipped.grays.size());
  for (size_t i = 0; i < planned.grays.size(); ++i) {
    EXPECT_NEAR(planned.grays[i].x_mm, shipped.grays[i].x_mm, kTolerance_mm);
    EXPECT_NEAR(planned.grays[i].y_mm, shipped.grays[i].y_mm, kTolerance_mm);
    EXPECT_NEAR(planned.grays[i].side_mm, shipped.grays[i].side_mm, kTolerance_mm);
    EXPECT_EQ(planned.grays[i].reflectance, shipped.grays[i].reflectance);
  }
  EXPECT_NEAR(planned.scale_bar.x0_mm, shipped.scale_bar.x0_mm, kTolerance_mm);
  EXPECT_NEAR(planned.scale_bar.x1_mm, shipped.scale_bar.x1_mm, kTolerance_mm);
  EXPECT_NEAR(planned.scale_bar.y_mm, shipped.scale_bar.y_mm, kTolerance_mm);
}

TEST(PlanSheet, DefaultsAreValid) { EXPECT_NO_THROW(SheetPlan{}.Check()); }

TEST(PlanSheet, TheReadyPlansAreTheShippedSheets) {
  ExpectSame(PlanSheet(PlanOfA5With6()), Shipped("a5-6"));
  ExpectSame(PlanSheet(PlanOfA4With15()), Shipped("a4-15"));
}

// The documented example is what the plan gives, but for the grays that it leaves out.
TEST(PlanSheet, TheDocumentedExampleIsAPlan) {
  const auto example = ParseSheet(DocExample("formats.md", "Sheet description"), "formats.md");
  ASSERT_TRUE(example) << example.error().message;
  EXPECT_TRUE(example->unknown_keys.empty());
  SheetPlan plan;
  plan.name = "two-wells";
  plan.page_width_mm = 148;
  plan.page_height_mm = 90;
  plan.rows = 1;
  plan.columns = 2;
  plan.first_marker = 300;
  plan.well_floor_reflectance = 0.4;
  SheetDescription planned = PlanSheet(plan);
  EXPECT_EQ(planned.well_floor_reflectance, example->well_floor_reflectance);
  planned.grays.resize(example->grays.size());
  ExpectSame(planned, *example);
}

struct Box {
  double x, y, width, height;
};

bool Overlap(const Box& a, const Box& b) {
  return std::abs(a.x - b.x) < (a.width + b.width) / 2 - 1e-6 &&
         std::abs(a.y - b.y) < (a.height + b.height) / 2 - 1e-6;
}

// Everything that is printed, markers with two cells (3 mm) of white around them.
std::vector<Box> Boxes(const SheetDescription& sheet) {
  std::vector<Box> boxes;
  for (const auto& m : sheet.markers) {
    boxes.push_back({m.x_mm, m.y_mm, m.side_mm + 6, m.side_mm + 6});
  }
  for (const auto& w : sheet.wells) boxes.push_back({w.x_mm, w.y_mm, w.width_mm, w.height_mm});
  for (const auto& s : sheet.sharpness_squares) {
    boxes.push_back({s.x_mm, s.y_mm, s.side_mm * 1.1, s.side_mm * 1.1});
  }
  for (const auto& g : sheet.grays) boxes.push_back({g.x_mm, g.y_mm, g.side_mm, g.side_mm});
  const ScaleBar& bar = sheet.scale_bar;
  boxes.push_back({(bar.x0_mm + bar.x1_mm) / 2, bar.y_mm, bar.length_mm(), 1});
  return boxes;
}

// Whatever is not refused is a sound sheet: nothing overlaps, and the reader accepts it.
TEST(PlanSheet, WhatIsNotRefusedDoesNotOverlap) {
  int sound = 0;
  int refused = 0;
  for (const double width : {120.0, 210.0, 297.0, 420.0}) {
    for (const double well : {20.0, 46.0, 80.0}) {
      for (int rows = 1; rows <= 6; ++rows) {
        for (int columns = 2; columns <= 9; ++columns) {
          SheetPlan plan;
          plan.page_width_mm = width;
          plan.page_height_mm = std::round(width / std::sqrt(2.0));
          plan.rows = rows;
          plan.columns = columns;
          plan.well_mm = well;
          try {
            plan.Check();
          } catch (const BadOption&) {
            ++refused;
            continue;
          }
          ++sound;
          SCOPED_TRACE(::testing::Message() << width << " " << well << " " << rows << columns);
          const SheetDescription sheet = PlanSheet(plan);
          EXPECT_EQ(sheet.wells.size(), static_cast<size_t>(rows * columns));
          const auto read = ParseSheet(FormatSheet(sheet), "planned");
          EXPECT_TRUE(read) << read.error().message;
          const std::vector<Box> boxes = Boxes(sheet);
          for (size_t i = 0; i < boxes.size(); ++i) {
            for (size_t j = 0; j < i; ++j) EXPECT_FALSE(Overlap(boxes[i], boxes[j])) << i << j;
          }
        }
      }
    }
  }
  EXPECT_GT(sound, 50);
  EXPECT_GT(refused, 50);
}

std::string Refusal(void (*change)(SheetPlan&)) {
  SheetPlan plan;
  change(plan);
  try {
    plan.Check();
  } catch (const BadOption& bad) {
    return bad.what();
  }
  return "accepted";
}

TEST(PlanSheet, RefusalsNameFieldValueAndRule) {
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.columns = 1; }),
            "columns = 1: from 2 to 26 is possible");
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.columns = 4; }),
            "columns = 4: so many wells of 46 mm, with the markers around them, need a page 242 mm "
            "wide, this one is 210 mm");
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.rows = 3; }),
            "rows = 3: so many wells of 46 mm, with the markers around them, need a page 194 mm "
            "high, this one is 148 mm");
  // Ten markers: 577 to 586 are the last of the family's 587.
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.first_marker = 577; }), "accepted");
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.first_marker = 578; }),
            "first_marker = 578: from 0 to 577 is possible");
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.well_mm = std::nan(""); }),
            "well_mm = nan: from 15 to 300 is possible");
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.well_floor_reflectance = 0; }),
            "well_floor_reflectance = 0: from 0.05 to 1 is possible");
  EXPECT_EQ(Refusal([](SheetPlan& plan) { plan.name = ""; }),
            "name = \"\": a name without \"/\" is needed");
}

}  // namespace
}  // namespace laygauge
