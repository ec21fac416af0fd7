#pragma once

#include <span>
#include <string>
#include <vector>

#include "base/error.h"
#include "sheet/find_markers.h"
#include "sheet/sheet_description.h"

namespace laygauge {

struct SheetInPhoto {
  SheetDescription sheet;
  std::vector<FoundMarker> markers;  // only the sheet's own
  std::vector<std::string> notes;    // on markers left out, one sentence each
};

// The one of `known` to which at least `fewest_markers` of the found markers belong.
// Problem (unmeasurable): none (the message tells which numbers were seen, and to which shipped
// sheet they belong), or more than one.
[[nodiscard]] Expected<SheetInPhoto> MatchSheet(const std::string& photo_file,
                                                const FoundMarkers& found,
                                                std::span<const SheetDescription> known,
                                                int fewest_markers = 4);

}  // namespace laygauge
