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

struct CooccurrenceOptions {
  // Ends of the gray scale, in relative reflectance; what lies beyond counts as the first or last
  // level. 29 levels of 0.05, so that the coupon's own level, 1, is the centre of one: noise does
  // not throw a smooth surface from level to level.
  double low = 0.175;
  double high = 1.625;
  int levels = 29;
  double offset_mm = 0.2;
  void Check() const;  // throws BadOption: field, value, rule
};

// Gray levels on the fixed scale, CV_8UC1: what the features are counted on.
[[nodiscard]] cv::Mat QuantiseRelative(const cv::Mat& relative, const CooccurrenceOptions& options);

// Features along and across the lay, and their ratios. docs/metrics.md, "Co-occurrence".
[[nodiscard]] Metric CooccurrenceMetric();

}  // namespace laygauge
