#include "texture/cooccurrence.h"
#include "texture/gradient_energy.h"
#include "texture/lines_metric.h"
#include "texture/metric.h"
#include "texture/roughness.h"
#include "texture/waviness.h"

namespace laygauge {

const std::vector<Metric>& MetricTable() {
  static const std::vector<Metric> table{
      LinesMetric(),         //
      RoughnessMetric(),     //
      WavinessMetric(),      //
      CooccurrenceMetric(),  //
      GradientEnergyMetric(),
  };
  return table;
}

}  // namespace laygauge
