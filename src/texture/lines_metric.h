#pragma once

#include "texture/metric.h"

namespace laygauge {

// Features of the line spectrum: pitch_mm, lay_deg, contrast and regularity of the lines, and the
// second lay. docs/metrics.md, "Line spectrum".
[[nodiscard]] Metric LinesMetric();

}  // namespace laygauge
