#pragma once

#include <optional>

#include "texture/metric.h"

namespace laygauge {

struct GradientEnergyOptions {
  double cell_mm = 1.2;  // side of the square cells whose orientations are compared
  // Added to a cell's energy before its coherence: slopes of 0.1 per mm, three to six times the
  // energy that noise and coding put on a smooth top (0.0015 to 0.0034 per mm^2).
  double floor_per_mm2 = 0.01;
  void Check() const;  // throws BadOption: field, value, rule
};

// Means over all whole cells of the field. x is along the image's rows, y down its columns.
struct GradientEnergy {
  double along = 0;            // mean squared derivative along x, per mm^2
  double across = 0;           // along y
  double coherence = 0;        // of the cells' slopes together, 0 isotropic .. 1 one direction
  double orientation_deg = 0;  // of the gradient's direction over +x, towards +y, (-90, 90]
  double orientation_spread_deg = 0;  // circular deviation of the cells' orientations
  double along_sd = 0;                // standard deviations of the means, from the cells
  double across_sd = 0;
  double coherence_sd = 0;
  double orientation_spread_sd_deg = 0;
};

// Derivatives by Sobel's 3 x 3 operator over 8 pixels, in relative reflectance per mm; a cell
// counts when it and the pixel round it lie wholly in the field. No value: no such cell.
// image: CV_32FC1; mask: CV_8UC1, not 0 in the field.
// With J the structure tensor of one cell and e the floor, its directed coherence is the complex
// number c = (Jxx - Jyy + 2 i Jxy) / (Jxx + Jyy + e); coherence = |mean of c|, and the spread is
// the circular standard deviation of the doubled angles, halved, weighted by |c|^2, since what
// noise does to an angle goes as 1 / |c|.
// Sources: Krotkov, "Focusing", Int. J. Computer Vision 1 (1987) 223-237, doi:10.1007/BF00127822
// (Tenengrad, here without a threshold and split in two directions); Bigun & Granlund, "Optimal
// orientation detection of linear symmetry", ICCV 1987 433-438 (structure tensor, doubled angle,
// coherence); Mardia & Jupp, "Directional Statistics", 2000, ch. 2 (circular deviation).
// Departures: every cell counts by its coherence, not by its energy, so that one scar or one light
// that shows it does not outweigh the lines; e makes the coherence of a top without slopes that
// noise could not have 0, instead of that of its noise.
[[nodiscard]] std::optional<GradientEnergy> MeasureGradientEnergy(
    const cv::Mat& image, const cv::Mat& mask, double px_per_mm,
    const GradientEnergyOptions& options = {});

// Features of the turned field. docs/metrics.md, "Gradient energy".
[[nodiscard]] Metric GradientEnergyMetric();

}  // namespace laygauge
