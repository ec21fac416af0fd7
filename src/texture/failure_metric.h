#pragma once

#include "texture/metric.h"

namespace laygauge {

// Feature: failure_area_pct. docs/metrics.md, "Failure".
[[nodiscard]] Metric FailureMetric();

}  // namespace laygauge
