#include "sheet/match_sheet.h"

#include <fmt/format.h>

#include <algorithm>

namespace laygauge {
namespace {

// "3, 5 to 8, 12"; `ids` in rising order.
std::string Ranges(const std::vector<int>& ids) {
  std::string text;
  for (size_t begin = 0; begin < ids.size();) {
    size_t end = begin;
    while (end + 1 < ids.size() && ids[end + 1] == ids[end] + 1) ++end;
    if (!text.empty()) text += ", ";
    text += std::to_string(ids[begin]);
    if (end > begin) text += fmt::format("{}{}", end > begin + 1 ? " to " : ", ", ids[end]);
    begin = end + 1;
  }
  return text;
}

std::string FoundRanges(const std::vector<FoundMarker>& markers) {
  std::vector<int> ids;
  ids.reserve(markers.size());
  for (const FoundMarker& marker : markers) ids.push_back(marker.id);
  return Ranges(ids);
}

std::string SheetRanges(const SheetDescription& sheet) {
  std::vector<int> ids;
  ids.reserve(sheet.markers.size());
  for (const SheetMarker& marker : sheet.markers) ids.push_back(marker.id);
  std::sort(ids.begin(), ids.end());
  return fmt::format("{}: {}", sheet.name, Ranges(ids));
}

int CountOf(const SheetDescription& sheet, const FoundMarkers& found) {
  return static_cast<int>(std::count_if(
      found.markers.begin(), found.markers.end(),
      [&](const FoundMarker& marker) { return sheet.FindMarker(marker.id) != nullptr; }));
}

Problem NoneMatches(const std::string& photo_file, const FoundMarkers& found,
                    std::span<const SheetDescription> known, int fewest) {
  std::string expected;
  for (const SheetDescription& sheet : known) {
    expected += (expected.empty() ? "" : "; ") + SheetRanges(sheet);
  }
  std::string message = fmt::format("{}: the markers in the picture ({}) are not those of {} ({})",
                                    photo_file, FoundRanges(found.markers),
                                    known.size() == 1 ? "the sheet" : "a known sheet", expected);
  for (const SheetDescription& sheet : ShippedSheets()) {
    if (CountOf(sheet, found) < fewest) continue;
    message += fmt::format("; they are those of the shipped sheet {}", sheet.name);
  }
  return {ProblemKind::kUnmeasurable,
          message + "; name the description of the sheet that was photographed"};
}

}  // namespace

Expected<SheetInPhoto> MatchSheet(const std::string& photo_file, const FoundMarkers& found,
                                  std::span<const SheetDescription> known, int fewest_markers) {
  const SheetDescription* match = nullptr;
  for (const SheetDescription& sheet : known) {
    if (CountOf(sheet, found) < fewest_markers) continue;
    if (match != nullptr) {
      return Unmeasurable(
          fmt::format("{}: markers of two sheets ({} and {}) are in the picture; photograph one "
                      "sheet at a time, or name the one that is meant",
                      photo_file, match->name, sheet.name));
    }
    match = &sheet;
  }
  if (match == nullptr) {
    return tl::unexpected(NoneMatches(photo_file, found, known, fewest_markers));
  }
  SheetInPhoto result{*match, {}, {}};
  for (const FoundMarker& marker : found.markers) {
    if (match->FindMarker(marker.id) != nullptr) {
      result.markers.push_back(marker);
    } else {
      result.notes.push_back(fmt::format("{}: marker {} was left out: it is not one of sheet {}",
                                         photo_file, marker.id, match->name));
    }
  }
  return result;
}

}  // namespace laygauge
