#pragma once

#include "report/result.h"

namespace laygauge {

// Three coupons of a batch: scored, to be photographed again, and an empty well.
[[nodiscard]] ResultTable ExampleTable();

}  // namespace laygauge
