#pragma once

#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace laygauge {

// Millimetres; origin at the sheet's top left corner, x right, y down. Positions are centres.
struct SheetMarker {
  int id = 0;
  double x_mm = 0;
  double y_mm = 0;
  double side_mm = 0;  // of the outer black square
};
struct Well {
  std::string name;
  double x_mm = 0;
  double y_mm = 0;
  double width_mm = 0;
  double height_mm = 0;
};
struct SharpnessSquare {
  double x_mm = 0;
  double y_mm = 0;
  double side_mm = 0;
  double tilt_deg = 0;  // counter-clockwise seen from above
};
struct GrayPatch {
  double x_mm = 0;
  double y_mm = 0;
  double side_mm = 0;
  double reflectance = 0;  // nominal, 0..1
};
struct ScaleBar {
  double x0_mm = 0;
  double x1_mm = 0;
  double y_mm = 0;
  [[nodiscard]] double length_mm() const { return x1_mm - x0_mm; }
};

// docs/formats.md, "Sheet description".
struct SheetDescription {
  std::string name;
  int version = 1;
  double page_width_mm = 0;
  double page_height_mm = 0;
  std::string family = "apriltag-36h11";
  std::vector<SheetMarker> markers;
  std::vector<Well> wells;
  std::vector<SharpnessSquare> sharpness_squares;
  std::vector<GrayPatch> grays;
  ScaleBar scale_bar;
  double well_floor_reflectance = 1;      // 1: bare paper; below: a gray floor is printed
  std::vector<std::string> unknown_keys;  // of the file, to be reported; not an error

  // Null when there is none.
  [[nodiscard]] const Well* FindWell(std::string_view well_name) const;
  [[nodiscard]] const SheetMarker* FindMarker(int id) const;
};

// Problem: malformed, a wrong type, a duplicate marker or well, something outside the page.
[[nodiscard]] Expected<SheetDescription> ReadSheet(const std::filesystem::path& path);
[[nodiscard]] Expected<SheetDescription> ParseSheet(std::string_view json_text,
                                                    const std::string& file_name);
[[nodiscard]] std::string FormatSheet(const SheetDescription& sheet);

// The shipped sheets (calibration/sheets, embedded at build time).
[[nodiscard]] const std::vector<SheetDescription>& ShippedSheets();

// `bar_mm`: the scale bar's length as measured on the print. Scales every length on the sheet.
// Throws BadOption unless it is above 0.
[[nodiscard]] SheetDescription ScaledByBar(const SheetDescription& sheet, double bar_mm);

}  // namespace laygauge
