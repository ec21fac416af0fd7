#pragma once

#include "texture/groove_probe.h"
#include "texture/metric.h"

namespace laygauge {

// Open channels along the lay. docs/metrics.md, "Gaps".
[[nodiscard]] Metric GapsMetric();

// How dark a valley between two lines that just touch is in this light, as the width of a wholly
// dark channel, um: what is darker is open. `level`: the coupon's reflectance, paper 1.
[[nodiscard]] double ClosedValleyDarknessUm(const GrooveShading& shading, double level);

}  // namespace laygauge
