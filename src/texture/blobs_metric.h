#pragma once

#include "texture/metric.h"

namespace laygauge {

// Features: blob_count_per_cm2, blob_area_pct. docs/metrics.md, "Blobs".
[[nodiscard]] Metric BlobsMetric();

}  // namespace laygauge
