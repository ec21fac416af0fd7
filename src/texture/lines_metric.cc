#include "texture/lines_metric.h"

#include <cmath>

#include "texture/line_contrast.h"

namespace laygauge {
namespace {

Feature Value(double value, double sd) { return {value, sd, ""}; }

Finding Measure(const Surface& surface) {
  const Metric metric = LinesMetric();
  if (!surface.lines) {
    const Feature none{std::nullopt, std::nullopt, surface.no_lines_reason};
    return {std::vector<Feature>(metric.features.size(), none), {}};
  }
  const Lines& lines = *surface.lines;
  const LineContrast contrast = MeasureLineContrast(surface.spectrum, lines);
  const LineScatter scatter = MeasureLineScatter(surface.spectrum, lines);
  Finding finding;
  finding.features = {
      Value(lines.pitch_mm, lines.pitch_sd_mm),
      Value(lines.lay_deg, lines.lay_sd_deg),
      Value(contrast.total, contrast.total_sd),
      Value(contrast.fundamental, contrast.fundamental_sd),
      Value(contrast.second, contrast.second_sd),
      Value(contrast.agreement, contrast.agreement_sd),
      Value(scatter.pitch_pct, scatter.pitch_pct * scatter.relative_sd),
      Value(scatter.lay_deg, scatter.lay_deg * scatter.relative_sd),
  };
  const double tiles = static_cast<double>(surface.spectrum.tiles.size());
  const double share = lines.second_lay ? lines.second_lay->share : 0;
  finding.features.push_back(Value(share, std::sqrt(share * (1 - share) / tiles)));
  if (lines.second_lay) {
    finding.features.push_back({lines.second_lay->lay_deg, std::nullopt, ""});
  } else {
    finding.features.push_back({std::nullopt, std::nullopt, "no second direction of lines shows"});
  }
  return finding;
}

}  // namespace

Metric LinesMetric() {
  return {"lines",
          3,
          {{"pitch_mm", "distance between neighbouring line centres"},
           {"lay_deg", "direction of the lines, counter-clockwise from the coupon's +x"},
           {"line_contrast", "amplitude of the lines' first three harmonics, of mean reflectance"},
           {"line_fundamental", "amplitude of the first harmonic, of mean reflectance"},
           {"line_second_harmonic", "amplitude of the second harmonic, of mean reflectance"},
           {"line_phase_agreement", "how far all parts agree on the lines' places, 0 to 1"},
           {"pitch_scatter_pct", "deviation of the pitch between parts of the field"},
           {"lay_scatter_deg", "deviation of the lay between parts of the field"},
           {"second_lay_share", "share of the field in which lines of another lay lead, 0 to 1"},
           {"second_lay_deg", "direction of those lines"}},
          &Measure};
}

}  // namespace laygauge
