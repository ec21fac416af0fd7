#pragma once

#include "texture/metric.h"

namespace laygauge {

// Features of the line spectrum: pitch_mm, lay_deg. docs/metrics.md, "Line spectrum".
[[nodiscard]] Metric LinesMetric();

}  // namespace laygauge
