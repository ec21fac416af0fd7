#pragma once

#include <optional>

#include "texture/metric.h"

namespace laygauge {

struct RoughnessOptions {
  double min_wavelength_mm = 0.2;
  double max_wavelength_mm = 2.0;
  double line_halfwidth_bins =
      2.5;  // of the spots taken out: the Hann window's lobe and a half bin
  // Added to the band's root mean square, in quadrature, where the lines' share is taken of it:
  // six times what smooth tops show, which are no more regular for being faint, and a quarter of
  // what is plainly seen.
  double share_floor = 0.03;
  void Check() const;  // throws BadOption: field, value, rule
};

struct Roughness {
  double total = 0;         // root mean square of the band, fraction of mean reflectance
  double aperiodic = 0;     // of what is no line
  double aperiodic_sd = 0;  // from the tiles
  // Of the band's power that lies in the lines' spots: lines / (band + share_floor^2), 0..1.
  double line_share = 0;
  double line_share_sd = 0;
};

// Power of the field between two wavelengths, split at the lines' spots: bins within
// `line_halfwidth_bins` of a multiple of the lines' wave vector (and of the second lay's direction
// at the same pitch) belong to the lines, less the median power of the bins that surround them.
// The noise of sensor and file, `noise_sd` of one pixel, is taken off as white.
// No value: the spectrum has no tiles.
// Sources: Sq (root mean square) of ISO 25178-2:2021 on gray values; the spectrum's parts by
// Parseval's theorem.
[[nodiscard]] std::optional<Roughness> MeasureRoughness(const FieldSpectrum& spectrum,
                                                        const std::optional<Lines>& lines,
                                                        double noise_sd,
                                                        const RoughnessOptions& options = {});

// Features aperiodic_roughness, line_power_share. docs/metrics.md, "Aperiodic roughness".
[[nodiscard]] Metric RoughnessMetric();

}  // namespace laygauge
