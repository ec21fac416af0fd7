#pragma once

#include "texture/field_spectrum.h"
#include "texture/line_spectrum.h"

namespace laygauge {

// How strongly the lines show, and how alike the tiles are.
struct LineContrast {
  // Amplitudes of harmonics 1, 2 and 3, root mean square over tiles, fractions of mean reflectance.
  double fundamental = 0;
  double second = 0;
  double third = 0;
  double total = 0;  // root of the sum of their squares
  double fundamental_sd = 0;
  double second_sd = 0;
  double total_sd = 0;
  // Of the fundamental's phases in the tiles, without their drift: see Agreement and
  // WithoutPhaseDrift (tile_wave.h).
  double agreement = 0;
  double agreement_sd = 0;
};
[[nodiscard]] LineContrast MeasureLineContrast(const FieldSpectrum& spectrum, const Lines& lines);

// How far the tiles' pitches and lays scatter: standard deviations, weighted by the power, of the
// centre of power of the nine bins about the lines' wave vector in each tile's spectrum. The centre
// follows a wave within half a bin by 0.75 to 1 of its shift, is not thrown from peak to peak by
// noise, and what is no wave of the lines moves it by a bin at most.
struct LineScatter {
  double pitch_pct = 0;
  double lay_deg = 0;
  double relative_sd = 0;  // of both, relative: 1 / sqrt(2 n) of normal data
};
[[nodiscard]] LineScatter MeasureLineScatter(const FieldSpectrum& spectrum, const Lines& lines);

}  // namespace laygauge
