#include "sheet/plan_sheet.h"

#include <fmt/format.h>

#include <array>
#include <cmath>

namespace laygauge {
namespace {

constexpr double kMarker_mm = 12;
constexpr double kMarkerInset_mm = 11;  // a marker's centre from the page's edge
constexpr double kWellGap_mm = 6;
// White around a marker: two of its eight cells, so that it is found in a blurred photograph.
constexpr double kMarkerQuiet_mm = 3;
constexpr double kNameSpace_mm = 5;  // above a well, for its name
constexpr double kSharpnessSide_mm = 7;
constexpr double kSharpnessTilt_deg = 5;
constexpr double kGraySide_mm = 3.6;
constexpr double kGrayPitch_mm = 4;
constexpr std::array<double, 6> kGrays{0.9, 0.6, 0.36, 0.19, 0.09, 0.05};
constexpr double kBar_mm = 20;
constexpr int kLastMarker = 586;  // of the family 36h11

double WholeMicrometres(double mm) { return std::round(mm * 1000) / 1000; }

int MarkersAlongEdge(const SheetPlan& plan) { return plan.columns + 1; }
int MarkersAlongSide(const SheetPlan& plan) { return plan.rows / 2; }  // without the corners
int MarkerCount(const SheetPlan& plan) {
  return 2 * MarkersAlongEdge(plan) + 2 * MarkersAlongSide(plan);
}

double EdgePitch(const SheetPlan& plan) {
  return (plan.page_width_mm - 2 * kMarkerInset_mm) / plan.columns;
}

double WellsSpan(int count, double well_mm) {
  return count * (well_mm + kWellGap_mm) - kWellGap_mm;
}

void NeedRange(std::string_view field, double value, double least, double most) {
  if (value >= least && value <= most) return;
  throw BadOption(fmt::format("{} = {}: from {} to {} is possible", field, value, least, most));
}

void NeedFit(std::string_view field, int count, double well_mm, double needed_mm, double page_mm,
             std::string_view side) {
  if (needed_mm <= page_mm) return;
  throw BadOption(
      fmt::format("{} = {}: so many wells of {} mm, with the markers around them, need "
                  "a page {:.0f} mm {}, this one is {:.0f} mm",
                  field, count, well_mm, std::ceil(needed_mm), side, page_mm));
}

// Which of the gaps between the markers of the upper edge holds the grays: one in the middle.
int GrayGap(const SheetPlan& plan) { return plan.columns == 2 ? 1 : (plan.columns - 1) / 2; }

class Planner {
 public:
  explicit Planner(const SheetPlan& plan) : plan_(plan) {}

  SheetDescription Plan() {
    sheet_.name = plan_.name;
    sheet_.page_width_mm = plan_.page_width_mm;
    sheet_.page_height_mm = plan_.page_height_mm;
    sheet_.well_floor_reflectance = plan_.well_floor_reflectance;
    PlaceMarkers();
    PlaceWells();
    PlaceSharpnessSquares();
    PlaceGraysAndBar();
    return std::move(sheet_);
  }

 private:
  [[nodiscard]] double Upper() const { return kMarkerInset_mm; }
  [[nodiscard]] double Lower() const { return plan_.page_height_mm - kMarkerInset_mm; }
  [[nodiscard]] double EdgeX(double gaps) const {
    return kMarkerInset_mm + gaps * EdgePitch(plan_);
  }

  void PlaceMarker(double x_mm, double y_mm) {
    const int id = plan_.first_marker + static_cast<int>(sheet_.markers.size());
    sheet_.markers.push_back({id, WholeMicrometres(x_mm), WholeMicrometres(y_mm), kMarker_mm});
  }

  void PlaceMarkers() {
    for (const double y : {Upper(), Lower()}) {
      for (int i = 0; i < MarkersAlongEdge(plan_); ++i) PlaceMarker(EdgeX(i), y);
    }
    const int along_side = MarkersAlongSide(plan_);
    for (int i = 1; i <= along_side; ++i) {
      const double y = Upper() + (Lower() - Upper()) * i / (along_side + 1);
      PlaceMarker(EdgeX(0), y);
      PlaceMarker(EdgeX(plan_.columns), y);
    }
  }

  void PlaceWells() {
    const double pitch = plan_.well_mm + kWellGap_mm;
    for (int row = 0; row < plan_.rows; ++row) {
      for (int column = 0; column < plan_.columns; ++column) {
        const double x = plan_.page_width_mm / 2 + pitch * (column - (plan_.columns - 1) / 2.0);
        const double y = plan_.page_height_mm / 2 + pitch * (row - (plan_.rows - 1) / 2.0);
        sheet_.wells.push_back({fmt::format("{}{}", static_cast<char>('A' + row), column + 1),
                                WholeMicrometres(x), WholeMicrometres(y), plan_.well_mm,
                                plan_.well_mm});
      }
    }
  }

  void PlaceSharpnessSquares() {
    const int last_gap = plan_.columns == 2 ? 0 : plan_.columns - 1;
    for (int gap = 0; gap <= last_gap; gap += std::max(last_gap, 1)) {
      for (const double y : {Upper(), Lower()}) {
        sheet_.sharpness_squares.push_back({WholeMicrometres(EdgeX(gap + 0.5)), WholeMicrometres(y),
                                            kSharpnessSide_mm, kSharpnessTilt_deg});
      }
    }
  }

  void PlaceGraysAndBar() {
    const double middle = EdgeX(GrayGap(plan_) + 0.5);
    double x = middle - kGrayPitch_mm * (kGrays.size() - 1) / 2;
    for (const double reflectance : kGrays) {
      sheet_.grays.push_back({WholeMicrometres(x), Upper(), kGraySide_mm, reflectance});
      x += kGrayPitch_mm;
    }
    const double begin = WholeMicrometres(middle - kBar_mm / 2);
    sheet_.scale_bar = {begin, begin + kBar_mm, WholeMicrometres(Lower())};
  }

  const SheetPlan& plan_;
  SheetDescription sheet_;
};

}  // namespace

void SheetPlan::Check() const {
  if (name.empty() || name.find('/') != std::string::npos) {
    throw BadOption(fmt::format("name = \"{}\": a name without \"/\" is needed", name));
  }
  constexpr double kLargestPage_mm = 1300;  // a little more than A0
  NeedRange("page_width_mm", page_width_mm, 100, kLargestPage_mm);
  NeedRange("page_height_mm", page_height_mm, 70, kLargestPage_mm);
  NeedRange("rows", rows, 1, 26);
  NeedRange("columns", columns, 2, 26);
  NeedRange("well_mm", well_mm, 15, 300);
  NeedRange("well_floor_reflectance", well_floor_reflectance, 0.05, 1);
  const double marker_edge = kMarkerInset_mm + kMarker_mm / 2;
  NeedFit("columns", columns, well_mm,
          WellsSpan(columns, well_mm) + 2 * (marker_edge + kMarkerQuiet_mm), page_width_mm, "wide");
  NeedFit("rows", rows, well_mm, WellsSpan(rows, well_mm) + 2 * (marker_edge + kNameSpace_mm),
          page_height_mm, "high");
  const double grays_mm = kGrayPitch_mm * (kGrays.size() - 1) + kGraySide_mm;
  const double needed_pitch = kMarker_mm + 2 * kMarkerQuiet_mm + grays_mm;
  NeedFit("columns", columns, well_mm, needed_pitch * columns + 2 * kMarkerInset_mm, page_width_mm,
          "wide");
  NeedRange("first_marker", first_marker, 0, kLastMarker + 1 - MarkerCount(*this));
}

SheetPlan PlanOfA5With6() { return {}; }

SheetPlan PlanOfA4With15() {
  SheetPlan plan;
  plan.name = "a4-15";
  plan.page_width_mm = 297;
  plan.page_height_mm = 210;
  plan.rows = 3;
  plan.columns = 5;
  plan.first_marker = 20;
  return plan;
}

SheetDescription PlanSheet(const SheetPlan& plan) {
  plan.Check();
  return Planner(plan).Plan();
}

}  // namespace laygauge
