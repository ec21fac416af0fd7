#pragma once

#include <vector>

#include "texture/metric.h"

namespace laygauge {

// How often pixels of two gray levels lie at one offset from each other.
struct CooccurrenceMatrix {
  int levels = 0;
  std::vector<double> counts;  // levels x levels, row-major, symmetric
  double pairs = 0;            // sum of the counts: ordered pairs
};

// Counts pairs of pixels (row, column) and (row + down, column + right), each in both orders, where
// both lie in the mask (not 0). levels_image: CV_8UC1, values below `levels` where the mask is set;
// mask: CV_8UC1, same size.
// Source: Haralick, Shanmugam & Dinstein, "Textural Features for Image Classification", IEEE Trans.
// SMC-3 (1973) 610-621, doi:10.1109/TSMC.1973.4309314. The mask is as in Zwanenburg et al., "Image
// biomarker standardisation initiative", arXiv:1612.07003.
[[nodiscard]] CooccurrenceMatrix CountCooccurrence(const cv::Mat& levels_image, const cv::Mat& mask,
                                                   int levels, int down, int right);

// With p = counts / pairs; i, j the levels.
struct CooccurrenceFeatures {
  double contrast = 0;       // sum p (i - j)^2
  double dissimilarity = 0;  // sum p |i - j|
  double homogeneity = 0;    // sum p / (1 + (i - j)^2), the paper's inverse difference moment
  double asm_ = 0;           // angular second moment, sum p^2
  double entropy = 0;        // -sum p log2 p, bit
  double variance = 0;       // of the levels
  double correlation = 0;    // sum p (i - mean)(j - mean) / variance; 1 for a single level
};

// Throws std::invalid_argument for a matrix without pairs: a caller's bug.
// Source: as above, features f1, f2, f3, f5, f9; dissimilarity is from common practice.
[[nodiscard]] CooccurrenceFeatures DescribeCooccurrence(const CooccurrenceMatrix& matrix);

// The counts of fine gray steps, `steps` to a level, shared among levels: each pixel of a pair
// counts on the three levels about its gray value by the quadratic B-spline, a window of one and a
// half levels to either side. Levels of the result: matrix.levels / steps + 2; its level k + 1
// holds the steps from k steps to (k + 1) steps.
// What it is for: counted on steps, features hop where a gray value crosses from one level to the
// next; shared, they follow it smoothly, and what noise and coding add stays below the window's own
// width. Of the result: contrast = mean squared difference in levels + 1/2 exactly, variance = that
// of the pixels + 1/4, since the spline's second moment is 1/4 wherever the value lies.
// Source: Thevenaz & Unser, "Optimization of mutual information for multiresolution image
// registration", IEEE Trans. Image Processing 9 (2000) 2083-2099, doi:10.1109/83.887976 (joint
// histograms with B-spline Parzen windows).
// Throws std::invalid_argument unless `steps` divides the matrix's levels: a caller's bug.
[[nodiscard]] CooccurrenceMatrix ShareAmongLevels(const CooccurrenceMatrix& matrix, int steps);

struct CooccurrenceOptions {
  // The gray scale, in relative reflectance: levels of 0.15 about the coupon's own, 1, which is the
  // centre of one, from 0.175 to 1.825. What lies beyond counts as the end. The window of a level
  // has the standard deviation 0.075: noise and coding of a photo, 0.005 to 0.015 on pixels of 0.1
  // mm, widen that by 2 % at most, and what one light shows of faint ridges and another does not,
  // 0.02 to 0.04, by a tenth.
  double level_width = 0.15;
  int levels_each_side = 5;  // of 1
  int steps_per_level = 7;   // odd, so that 1 is the centre of a step
  double offset_mm = 0.2;
  [[nodiscard]] int Steps() const { return (2 * levels_each_side + 1) * steps_per_level; }
  void Check() const;  // throws BadOption: field, value, rule
};

// Gray steps on the fixed scale, CV_8UC1: what is counted before it is shared among levels.
[[nodiscard]] cv::Mat QuantiseRelative(const cv::Mat& relative, const CooccurrenceOptions& options);

// Features along and across the lay, and their ratios. docs/metrics.md, "Co-occurrence".
[[nodiscard]] Metric CooccurrenceMetric();

}  // namespace laygauge
