#include "texture/cooccurrence.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <stdexcept>

#include "base/error.h"
#include "base/statistics.h"

namespace laygauge {
namespace {

constexpr int kMaxLevels = 255;

// Levels of one image with pixels outside the mask as an extra level, which is counted and then
// left out: faster than a test per pair.
cv::Mat MarkOutside(const cv::Mat& levels_image, const cv::Mat& mask, int levels) {
  cv::Mat marked(levels_image.size(), CV_8UC1, cv::Scalar::all(levels));
  levels_image.copyTo(marked, mask);
  return marked;
}

// Symmetric counts of pairs whose first pixel lies in rows [first, last).
CooccurrenceMatrix CountRows(const cv::Mat& marked, int levels, int down, int right, int first,
                             int last) {
  const int stride = levels + 1;
  // Two tables in turn: equal pairs in succession would wait for each other's sum.
  std::array<std::vector<std::uint32_t>, 2> tables;
  tables.fill(std::vector<std::uint32_t>(stride * stride, 0));
  const int begin = std::max(0, -right);
  const int end = std::min(marked.cols, marked.cols - right);
  for (int y = std::max(first, -down); y < std::min(last, marked.rows - down); ++y) {
    const auto* a = marked.ptr<std::uint8_t>(y);
    const auto* b = marked.ptr<std::uint8_t>(y + down) + right;
    auto* even = tables[0].data();
    auto* odd = tables[1].data();
    int x = begin;
    for (; x + 1 < end; x += 2) {
      ++even[a[x] * stride + b[x]];
      ++odd[a[x + 1] * stride + b[x + 1]];
    }
    if (x < end) {
      ++even[a[x] * stride + b[x]];
    }
  }
  CooccurrenceMatrix matrix{levels, std::vector<double>(levels * levels, 0), 0};
  for (int i = 0; i < levels; ++i) {
    for (int j = 0; j < levels; ++j) {
      const double count = tables[0][i * stride + j] + tables[1][i * stride + j];
      matrix.counts[i * levels + j] += count;
      matrix.counts[j * levels + i] += count;
      matrix.pairs += 2 * count;
    }
  }
  return matrix;
}

void Add(CooccurrenceMatrix& sum, const CooccurrenceMatrix& part) {
  for (std::size_t i = 0; i < sum.counts.size(); ++i) {
    sum.counts[i] += part.counts[i];
  }
  sum.pairs += part.pairs;
}

constexpr int kFeatures = 6;
using Values = std::array<double, kFeatures>;

// NaN: not measurable.
Values ToValues(const CooccurrenceFeatures& f) {
  // Levels that scatter by less than half a level correlate by where the scale's steps lie.
  constexpr double kLeastVariance = 0.25;
  const double correlation =
      f.variance >= kLeastVariance ? f.correlation : std::numeric_limits<double>::quiet_NaN();
  return {f.contrast, f.dissimilarity, f.homogeneity, f.asm_, f.entropy, correlation};
}

// Features of the whole and, for their standard deviations, of stripes of rows.
struct Direction {
  Values whole{};
  std::vector<Values> parts;
};

Direction MeasureDirection(const cv::Mat& marked, int levels, int down, int right) {
  constexpr int kStripes = 6;
  constexpr double kLeastPairs = 2000;
  CooccurrenceMatrix sum{levels, std::vector<double>(levels * levels, 0), 0};
  Direction direction;
  for (int s = 0; s < kStripes; ++s) {
    const CooccurrenceMatrix part = CountRows(
        marked, levels, down, right, marked.rows * s / kStripes, marked.rows * (s + 1) / kStripes);
    Add(sum, part);
    if (part.pairs >= kLeastPairs) {
      direction.parts.push_back(ToValues(DescribeCooccurrence(part)));
    }
  }
  if (sum.pairs > 0) {
    direction.whole = ToValues(DescribeCooccurrence(sum));
  }
  return direction;
}

// Value and standard deviation of its mean over the stripes that have one.
Feature WithSd(double value, std::vector<double> parts) {
  if (!std::isfinite(value)) {
    return {std::nullopt, std::nullopt, "the field is all but one gray level"};
  }
  std::erase_if(parts, [](double part) { return !std::isfinite(part); });
  if (parts.size() < 2) {
    return {value, std::nullopt, ""};
  }
  return {value, StandardDeviation(parts) / std::sqrt(static_cast<double>(parts.size())), ""};
}

Finding Measure(const Surface& surface) {
  const CooccurrenceOptions options;
  const AlignedField& field = surface.aligned_half;
  const int offset = static_cast<int>(std::lround(options.offset_mm * field.px_per_mm));
  const cv::Mat mask = field.regions == static_cast<int>(Region::kField);
  if (field.relative.empty() || cv::countNonZero(mask) == 0) {
    const Feature none{std::nullopt, std::nullopt, "the coupon has no field"};
    return {std::vector<Feature>(3 * kFeatures, none), {}};
  }
  const cv::Mat marked =
      MarkOutside(QuantiseRelative(field.relative, options), mask, options.levels);
  const Direction along = MeasureDirection(marked, options.levels, 0, offset);
  const Direction across = MeasureDirection(marked, options.levels, offset, 0);
  Finding finding;
  for (int f = 0; f < kFeatures; ++f) {
    std::vector<double> of_along;
    std::vector<double> of_across;
    std::vector<double> ratios;
    for (std::size_t s = 0; s < std::min(along.parts.size(), across.parts.size()); ++s) {
      of_along.push_back(along.parts[s][f]);
      of_across.push_back(across.parts[s][f]);
      ratios.push_back(of_across.back() / of_along.back());
    }
    finding.features.push_back(WithSd(along.whole[f], of_along));
    finding.features.push_back(WithSd(across.whole[f], of_across));
    finding.features.push_back(WithSd(across.whole[f] / along.whole[f], ratios));
  }
  return finding;
}

}  // namespace

void CooccurrenceOptions::Check() const {
  if (!(low < high)) {
    throw BadOption(fmt::format("low is {}: it must be below high, {}", low, high));
  }
  if (levels < 2 || levels > kMaxLevels) {
    throw BadOption(fmt::format("levels is {}: it must be within 2..{}", levels, kMaxLevels));
  }
  if (!(offset_mm > 0)) {
    throw BadOption(fmt::format("offset_mm is {}: it must be above 0", offset_mm));
  }
}

CooccurrenceMatrix CountCooccurrence(const cv::Mat& levels_image, const cv::Mat& mask, int levels,
                                     int down, int right) {
  if (levels < 1 || levels > kMaxLevels) {
    throw std::invalid_argument("CountCooccurrence: levels must be within 1..255");
  }
  return CountRows(MarkOutside(levels_image, mask, levels), levels, down, right, 0,
                   levels_image.rows);
}

CooccurrenceFeatures DescribeCooccurrence(const CooccurrenceMatrix& matrix) {
  if (!(matrix.pairs > 0)) {
    throw std::invalid_argument("DescribeCooccurrence: a matrix without pairs");
  }
  CooccurrenceFeatures f;
  double mean = 0;
  double square = 0;
  double product = 0;
  for (int i = 0; i < matrix.levels; ++i) {
    for (int j = 0; j < matrix.levels; ++j) {
      const double p = matrix.counts[i * matrix.levels + j] / matrix.pairs;
      if (p == 0) {
        continue;
      }
      const double difference = i - j;
      f.contrast += p * difference * difference;
      f.dissimilarity += p * std::abs(difference);
      f.homogeneity += p / (1 + difference * difference);
      f.asm_ += p * p;
      f.entropy -= p * std::log2(p);
      mean += p * i;
      square += p * i * i;
      product += p * i * j;
    }
  }
  f.variance = square - mean * mean;
  f.correlation = f.variance > 1e-12 ? (product - mean * mean) / f.variance : 1;
  return f;
}

cv::Mat QuantiseRelative(const cv::Mat& relative, const CooccurrenceOptions& options) {
  options.Check();
  const double scale = options.levels / (options.high - options.low);
  cv::Mat quantised;
  // convertTo rounds and saturates at 0; half a level less makes it the floor.
  relative.convertTo(quantised, CV_8UC1, scale, -options.low * scale - 0.5);
  return cv::min(quantised, options.levels - 1);
}

Metric CooccurrenceMetric() {
  return {"cooccurrence",
          1,
          {{"cooccurrence_contrast_along", "mean squared difference of gray levels 0.2 mm along"},
           {"cooccurrence_contrast_across", "the same across the lay"},
           {"cooccurrence_contrast_ratio", "across over along"},
           {"cooccurrence_dissimilarity_along", "mean difference of gray levels 0.2 mm along"},
           {"cooccurrence_dissimilarity_across", "the same across the lay"},
           {"cooccurrence_dissimilarity_ratio", "across over along"},
           {"cooccurrence_homogeneity_along", "mean of 1 / (1 + squared difference) along"},
           {"cooccurrence_homogeneity_across", "the same across the lay"},
           {"cooccurrence_homogeneity_ratio", "across over along"},
           {"cooccurrence_asm_along", "angular second moment along: few pairs of levels"},
           {"cooccurrence_asm_across", "the same across the lay"},
           {"cooccurrence_asm_ratio", "across over along"},
           {"cooccurrence_entropy_along", "entropy of pairs of levels along, bit"},
           {"cooccurrence_entropy_across", "the same across the lay"},
           {"cooccurrence_entropy_ratio", "across over along"},
           {"cooccurrence_correlation_along", "correlation of gray levels 0.2 mm along"},
           {"cooccurrence_correlation_across", "the same across the lay"},
           {"cooccurrence_correlation_ratio", "across over along"}},
          &Measure};
}

}  // namespace laygauge
