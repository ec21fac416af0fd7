#include "texture/lines_metric.h"

namespace laygauge {
namespace {

Finding MeasureLines(const Surface& surface) {
  if (!surface.lines) {
    const Feature none{std::nullopt, std::nullopt, surface.no_lines_reason};
    return {{none, none}, {}};
  }
  return {{{surface.lines->pitch_mm, surface.lines->pitch_sd_mm, ""},
           {surface.lines->lay_deg, surface.lines->lay_sd_deg, ""}},
          {}};
}

}  // namespace

Metric LinesMetric() {
  return {"lines",
          1,
          {{"pitch_mm", "distance between neighbouring line centres"},
           {"lay_deg", "direction of the lines, counter-clockwise from the coupon's +x"}},
          &MeasureLines};
}

}  // namespace laygauge
