#pragma once

#include <string>

#include "sheet/sheet_description.h"

namespace laygauge {

// The sheet as a PDF of one page at true scale, vectors only. Letters are the strokes built into
// Cairo: no font need be installed, and the page looks the same everywhere. Reflectances
// (relative to paper white) are printed as gray values by the sRGB curve: what a printer makes of
// them is nominal.
[[nodiscard]] std::string DrawSheet(const SheetDescription& sheet);

}  // namespace laygauge
