#include "texture/lines_metric.h"
#include "texture/metric.h"

namespace laygauge {

const std::vector<Metric>& MetricTable() {
  static const std::vector<Metric> table{
      LinesMetric(),
  };
  return table;
}

}  // namespace laygauge
