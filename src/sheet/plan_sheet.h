#pragma once

#include <string>

#include "sheet/sheet_description.h"

namespace laygauge {

// What a sheet of one's own looks like. The defaults are the shipped sheet a5-6.
struct SheetPlan {
  std::string name = "a5-6";
  double page_width_mm = 210;
  double page_height_mm = 148;
  int rows = 2;
  int columns = 3;
  double well_mm = 46;  // side of the square wells
  int first_marker = 0;
  double well_floor_reflectance = 1;  // of paper white; 1: bare paper

  // Also refuses what does not fit on the page or needs more markers than the family has.
  void Check() const;  // throws BadOption: field, value, rule
};

// The plans of the shipped sheets, a5-6 and a4-15.
[[nodiscard]] SheetPlan PlanOfA5With6();
[[nodiscard]] SheetPlan PlanOfA4With15();

// Lays out: wells centred on the page, 6 mm apart; a marker at every corner, further ones along
// the upper and lower edge (one more than there are columns) and, for every second row, along the
// sides; between markers tilted squares for sharpness, gray patches (above) and a bar of 20 mm
// to measure after printing (below). Positions are whole micrometres.
[[nodiscard]] SheetDescription PlanSheet(const SheetPlan& plan);

}  // namespace laygauge
