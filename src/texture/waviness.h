#pragma once

#include "base/error.h"
#include "texture/metric.h"

namespace laygauge {

struct WavinessOptions {
  double min_wavelength_mm = 2;
  double max_wavelength_mm = 10;
  double cell_mm = 0.5;  // the field is averaged to cells of this side first
  // Root mean square that coding leaves in the band on a smooth top (0.0007 to 0.0012 as taken,
  // 0.0024 at JPEG quality 80): w counts as w w^2 / (w^2 + floor^2).
  double floor = 0.002;
  void Check() const;  // throws BadOption: field, value, rule
};

struct Waviness {
  double rms = 0;  // of the band, fraction of mean reflectance
  double sd = 0;   // from nine parts of the field
};

// The band between two Gaussian filters, after a polynomial of second order (the form: uneven
// light and gloss) is taken off the field: rms of low(min) - low(max), where low(c) is the mean
// weighted by exp(-pi (r / (a c))^2), a = sqrt(ln 2 / pi), which halves a wave of length c.
// Weights are of field cells only, normalised. Problem: the field is smaller than the longest wave.
// Source: ISO 16610-21 (Gaussian filter), ISO 25178-2:2021 (F-operation, Wq) on gray values.
// Departures: weights are renormalised at the field's border; what is no more than the floor is
// shrunk as by a Wiener filter (signal power over signal and noise), so that it tends to 0.
[[nodiscard]] Expected<Waviness> MeasureWaviness(const Patch& patch,
                                                 const WavinessOptions& options = {});

// Feature waviness. docs/metrics.md, "Waviness".
[[nodiscard]] Metric WavinessMetric();

}  // namespace laygauge
