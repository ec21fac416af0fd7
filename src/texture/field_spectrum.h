#pragma once

#include <complex>
#include <opencv2/core.hpp>
#include <vector>

#include "coupon/patch.h"

namespace laygauge {

struct FieldSpectrumOptions {
  double tile_mm = 6.4;
  double max_overlap = 0.25;      // of neighbouring tiles, share of their side
  double min_field_share = 0.75;  // of a tile's window weight that must lie in the field
  void Check() const;             // throws BadOption: field, value, rule
};

// The windowed power spectrum of one square tile of the field.
struct SpectrumTile {
  cv::Point corner_px;    // of the patch
  cv::Point2d centre_mm;  // in the coupon's frame
  double weight_sum = 0;  // of window times mask
  // CV_32FC2, side x (side / 2 + 1), bin (ky, kx): the transform of weight times (reflectance less
  // its weighted mean), as TileTransform gives it.
  cv::Mat transform;
  cv::Mat power;  // CV_32FC1, the same bins: squared amplitude density
};

// Power spectrum of the field: the mean over tiles of squared windowed Fourier transforms of the
// relative reflectance, the window times the field's mask, the tile's weighted mean removed.
// Scaled so that the sum over the whole plane of frequencies is the field's variance; columns kx
// = 0..side/2, rows ky = 0..side-1 (ky > side/2 stands for ky - side).
struct FieldSpectrum {
  int side_px = 0;
  double px_per_mm = 20;
  double bin_per_mm = 0;  // width of a bin, cycles per mm
  std::vector<SpectrumTile> tiles;
  cv::Mat power;  // CV_32FC1, the mean of the tiles'
};

// No tiles: the field is smaller than one tile.
// Source: Welch, "The use of fast Fourier transform for the estimation of power spectra", IEEE
// Trans. Audio Electroacoust. AU-15 (1967) 70-73, doi:10.1109/TAU.1967.1161901, in two dimensions,
// with the periodic Hann window (Harris, Proc. IEEE 66 (1978) 51-83, doi:10.1109/PROC.1978.10837).
// Departure: the window is multiplied by the field's mask, so that tiles may touch its border.
[[nodiscard]] FieldSpectrum MeasureFieldSpectrum(const Patch& patch,
                                                 const FieldSpectrumOptions& options = {});

// Complex amplitude of the waves cos(2 pi frequency . x) in each tile, x in mm from the coupon's
// origin; entry (tile, k) is that of the k-th frequency. A wave A cos(2 pi f . x + phi) in a whole
// tile gives A exp(i phi); the window's sidelobes are its error, and 0.1 % of A for a wave within
// a quarter of a bin (WeighBins).
[[nodiscard]] std::vector<std::vector<std::complex<double>>> DemodulateTiles(
    const FieldSpectrum& spectrum, const std::vector<cv::Point2d>& frequencies_per_mm);

// The same at 1, 2, ..., `harmonics` times a frequency.
[[nodiscard]] std::vector<std::vector<std::complex<double>>> DemodulateTiles(
    const FieldSpectrum& spectrum, cv::Point2d frequency_per_mm, int harmonics);

}  // namespace laygauge
