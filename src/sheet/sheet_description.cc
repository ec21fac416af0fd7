#include "sheet/sheet_description.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <set>

#include "base/embedded.h"
#include "base/file.h"
#include "base/json_view.h"

namespace laygauge {

const std::vector<EmbeddedFile>& EmbeddedSheets();  // made at build time

namespace {

constexpr std::string_view kFamily = "apriltag-36h11";
constexpr int kFamilySize = 587;      // tags of 36h11
constexpr size_t kFewestMarkers = 4;  // one can be hidden and three would still fix a pose

// Reads one sheet; collects unknown keys as it goes.
class SheetReader {
 public:
  SheetDescription Read(const JsonView& top) {
    sheet_.name = top.Text("sheet");
    if (sheet_.name.empty()) top.Fail("sheet", "a name was expected, not an empty text");
    sheet_.version = top.Integer("version");
    ReadPage(top.Object("page_mm"));
    sheet_.family = top.Text("family");
    if (sheet_.family != kFamily) {
      top.Fail("family", fmt::format("\"{}\" is the only family of markers that is known, not "
                                     "\"{}\"",
                                     kFamily, sheet_.family));
    }
    for (const JsonView& view : top.Objects("markers")) ReadMarker(view);
    if (sheet_.markers.size() < kFewestMarkers) {
      top.Fail("markers", fmt::format("at least {} markers were expected, not {}", kFewestMarkers,
                                      sheet_.markers.size()));
    }
    for (const JsonView& view : top.Objects("wells")) ReadWell(view);
    if (sheet_.wells.empty()) top.Fail("wells", "at least one well was expected");
    for (const JsonView& view : top.MaybeObjects("sharpness_squares")) ReadSharpnessSquare(view);
    for (const JsonView& view : top.MaybeObjects("grays")) ReadGray(view);
    ReadScaleBar(top.Object("scale_bar"));
    if (top.MaybeNumber("well_floor_reflectance")) {
      sheet_.well_floor_reflectance = Reflectance(top, "well_floor_reflectance");
    }
    NoteUnknown(top);
    return std::move(sheet_);
  }

 private:
  void NoteUnknown(const JsonView& view) {
    const std::vector<std::string> unknown = view.UnknownKeys();
    sheet_.unknown_keys.insert(sheet_.unknown_keys.end(), unknown.begin(), unknown.end());
  }

  static double Positive(const JsonView& view, std::string_view key) {
    const double value = view.Number(key);
    if (!(value > 0)) view.Fail(key, fmt::format("more than 0 was expected, not {}", value));
    return value;
  }

  static double Reflectance(const JsonView& view, std::string_view key) {
    const double value = view.Number(key);
    if (!(value > 0 && value <= 1)) {
      view.Fail(key, fmt::format("a reflectance above 0 and up to 1 was expected, not {}", value));
    }
    return value;
  }

  // The box of this size round (x, y) must lie on the page.
  void NeedOnPage(const JsonView& view, double x_mm, double y_mm, double width_mm,
                  double height_mm) const {
    constexpr double kRounding_mm = 1e-6;
    const bool inside = x_mm - width_mm / 2 >= -kRounding_mm &&
                        y_mm - height_mm / 2 >= -kRounding_mm &&
                        x_mm + width_mm / 2 <= sheet_.page_width_mm + kRounding_mm &&
                        y_mm + height_mm / 2 <= sheet_.page_height_mm + kRounding_mm;
    if (!inside) {
      view.Fail("", fmt::format("reaches beyond the page of {} x {} mm (centre {}, {})",
                                sheet_.page_width_mm, sheet_.page_height_mm, x_mm, y_mm));
    }
  }

  void ReadPage(const JsonView& view) {
    sheet_.page_width_mm = Positive(view, "width");
    sheet_.page_height_mm = Positive(view, "height");
    NoteUnknown(view);
  }

  void ReadMarker(const JsonView& view) {
    SheetMarker marker;
    marker.id = view.Integer("id");
    if (marker.id < 0 || marker.id >= kFamilySize) {
      view.Fail("id", fmt::format("a marker number from 0 to {} was expected, not {}",
                                  kFamilySize - 1, marker.id));
    }
    if (!ids_.insert(marker.id).second) {
      view.Fail("id", fmt::format("marker {} is there twice", marker.id));
    }
    marker.x_mm = view.Number("x_mm");
    marker.y_mm = view.Number("y_mm");
    marker.side_mm = Positive(view, "side_mm");
    NeedOnPage(view, marker.x_mm, marker.y_mm, marker.side_mm, marker.side_mm);
    NoteUnknown(view);
    sheet_.markers.push_back(marker);
  }

  void ReadWell(const JsonView& view) {
    Well well;
    well.name = view.Text("name");
    if (well.name.empty()) view.Fail("name", "a name was expected, not an empty text");
    if (!well_names_.insert(well.name).second) {
      view.Fail("name", fmt::format("well \"{}\" is there twice", well.name));
    }
    well.x_mm = view.Number("x_mm");
    well.y_mm = view.Number("y_mm");
    well.width_mm = Positive(view, "width_mm");
    well.height_mm = Positive(view, "height_mm");
    NeedOnPage(view, well.x_mm, well.y_mm, well.width_mm, well.height_mm);
    NoteUnknown(view);
    sheet_.wells.push_back(std::move(well));
  }

  void ReadSharpnessSquare(const JsonView& view) {
    SharpnessSquare square;
    square.x_mm = view.Number("x_mm");
    square.y_mm = view.Number("y_mm");
    square.side_mm = Positive(view, "side_mm");
    square.tilt_deg = view.Number("tilt_deg");
    const double tilt = square.tilt_deg * std::numbers::pi / 180;
    const double extent_mm = square.side_mm * (std::abs(std::cos(tilt)) + std::abs(std::sin(tilt)));
    NeedOnPage(view, square.x_mm, square.y_mm, extent_mm, extent_mm);
    NoteUnknown(view);
    sheet_.sharpness_squares.push_back(square);
  }

  void ReadGray(const JsonView& view) {
    GrayPatch gray;
    gray.x_mm = view.Number("x_mm");
    gray.y_mm = view.Number("y_mm");
    gray.side_mm = Positive(view, "side_mm");
    gray.reflectance = Reflectance(view, "reflectance");
    NeedOnPage(view, gray.x_mm, gray.y_mm, gray.side_mm, gray.side_mm);
    NoteUnknown(view);
    sheet_.grays.push_back(gray);
  }

  void ReadScaleBar(const JsonView& view) {
    ScaleBar& bar = sheet_.scale_bar;
    bar.x0_mm = view.Number("x0_mm");
    bar.x1_mm = view.Number("x1_mm");
    bar.y_mm = view.Number("y_mm");
    if (!(bar.length_mm() > 0)) view.Fail("x1_mm", "more than x0_mm was expected");
    NeedOnPage(view, (bar.x0_mm + bar.x1_mm) / 2, bar.y_mm, bar.length_mm(), 0);
    NoteUnknown(view);
  }

  SheetDescription sheet_;
  std::set<int> ids_;
  std::set<std::string> well_names_;
};

using Json = nlohmann::ordered_json;

Json ToJson(const SheetMarker& m) {
  return {{"id", m.id}, {"x_mm", m.x_mm}, {"y_mm", m.y_mm}, {"side_mm", m.side_mm}};
}
Json ToJson(const Well& w) {
  return {{"name", w.name},
          {"x_mm", w.x_mm},
          {"y_mm", w.y_mm},
          {"width_mm", w.width_mm},
          {"height_mm", w.height_mm}};
}
Json ToJson(const SharpnessSquare& s) {
  return {{"x_mm", s.x_mm}, {"y_mm", s.y_mm}, {"side_mm", s.side_mm}, {"tilt_deg", s.tilt_deg}};
}
Json ToJson(const GrayPatch& g) {
  return {
      {"x_mm", g.x_mm}, {"y_mm", g.y_mm}, {"side_mm", g.side_mm}, {"reflectance", g.reflectance}};
}

template <class Item>
Json JsonList(const std::vector<Item>& items) {
  Json list = Json::array();
  for (const Item& item : items) list.push_back(ToJson(item));
  return list;
}

}  // namespace

const Well* SheetDescription::FindWell(std::string_view well_name) const {
  const auto found =
      std::find_if(wells.begin(), wells.end(), [&](const Well& w) { return w.name == well_name; });
  return found == wells.end() ? nullptr : &*found;
}

const SheetMarker* SheetDescription::FindMarker(int id) const {
  const auto found = std::find_if(markers.begin(), markers.end(),
                                  [&](const SheetMarker& m) { return m.id == id; });
  return found == markers.end() ? nullptr : &*found;
}

Expected<SheetDescription> ParseSheet(std::string_view json_text, const std::string& file_name) {
  return ParseJson(json_text, file_name,
                   [](const JsonView& top) { return SheetReader().Read(top); });
}

Expected<SheetDescription> ReadSheet(const std::filesystem::path& path) {
  const auto text = ReadFile(path);
  if (!text) return tl::unexpected(text.error());
  return ParseSheet(*text, path.string());
}

std::string FormatSheet(const SheetDescription& sheet) {
  Json top;
  top["sheet"] = sheet.name;
  top["version"] = sheet.version;
  top["page_mm"] = {{"width", sheet.page_width_mm}, {"height", sheet.page_height_mm}};
  top["family"] = sheet.family;
  if (sheet.well_floor_reflectance != 1) {
    top["well_floor_reflectance"] = sheet.well_floor_reflectance;
  }
  top["markers"] = JsonList(sheet.markers);
  top["wells"] = JsonList(sheet.wells);
  top["sharpness_squares"] = JsonList(sheet.sharpness_squares);
  top["grays"] = JsonList(sheet.grays);
  top["scale_bar"] = {{"x0_mm", sheet.scale_bar.x0_mm},
                      {"x1_mm", sheet.scale_bar.x1_mm},
                      {"y_mm", sheet.scale_bar.y_mm}};
  return top.dump(1) + "\n";
}

const std::vector<SheetDescription>& ShippedSheets() {
  static const std::vector<SheetDescription> sheets = [] {
    std::vector<SheetDescription> read;
    for (const EmbeddedFile& file : EmbeddedSheets()) {
      read.push_back(ParseSheet(file.text, std::string(file.name)).value());
    }
    return read;
  }();
  return sheets;
}

SheetDescription ScaledByBar(const SheetDescription& sheet, double bar_mm) {
  const double nominal_mm = sheet.scale_bar.length_mm();
  if (!(bar_mm > 0 && std::isfinite(bar_mm) && nominal_mm > 0)) {
    throw BadOption(fmt::format("bar_mm = {}: a length above 0 mm is needed", bar_mm));
  }
  const double factor = bar_mm / nominal_mm;
  const auto scale = [factor](auto&... lengths) { ((lengths *= factor), ...); };
  SheetDescription scaled = sheet;
  scale(scaled.page_width_mm, scaled.page_height_mm);
  for (SheetMarker& m : scaled.markers) scale(m.x_mm, m.y_mm, m.side_mm);
  for (Well& w : scaled.wells) scale(w.x_mm, w.y_mm, w.width_mm, w.height_mm);
  for (SharpnessSquare& s : scaled.sharpness_squares) scale(s.x_mm, s.y_mm, s.side_mm);
  for (GrayPatch& g : scaled.grays) scale(g.x_mm, g.y_mm, g.side_mm);
  scale(scaled.scale_bar.x0_mm, scaled.scale_bar.x1_mm, scaled.scale_bar.y_mm);
  return scaled;
}

}  // namespace laygauge
