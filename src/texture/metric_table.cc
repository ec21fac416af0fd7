#include "texture/blobs_metric.h"
#include "texture/cooccurrence.h"
#include "texture/failure_metric.h"
#include "texture/gaps.h"
#include "texture/gradient_energy.h"
#include "texture/lines_metric.h"
#include "texture/metric.h"
#include "texture/ridges.h"
#include "texture/roughness.h"
#include "texture/scars_metric.h"
#include "texture/wall_gaps.h"
#include "texture/waviness.h"

namespace laygauge {

const std::vector<Metric>& MetricTable() {
  static const std::vector<Metric> table{
      LinesMetric(),           //
      RoughnessMetric(),       //
      WavinessMetric(),        //
      CooccurrenceMetric(),    //
      GradientEnergyMetric(),  //
      GapsMetric(),            //
      RidgesMetric(),          //
      WallGapsMetric(),        //
      ScarsMetric(),           //
      BlobsMetric(),           //
      FailureMetric(),
  };
  return table;
}

}  // namespace laygauge
