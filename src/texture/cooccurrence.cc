#include "texture/cooccurrence.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <stdexcept>

#include "base/error.h"
#include "base/statistics.h"
#include "texture/form.h"

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

Values ToValues(const CooccurrenceFeatures& f) {
  return {f.contrast, f.dissimilarity, f.homogeneity, f.asm_, f.entropy, f.correlation};
}

// Across over along. Of correlations, which are 0 on a smooth top and may be negative, the ratio of
// 1 + correlation: that of the paper's sum variances, f7.
Values Ratios(const Values& across, const Values& along) {
  Values ratios{};
  for (int f = 0; f < kFeatures; ++f) {
    const double shift = f == kFeatures - 1 ? 1 : 0;
    ratios[f] = (across[f] + shift) / (along[f] + shift);
  }
  return ratios;
}

// Weight of the quadratic B-spline at a distance, in levels.
double SplineWeight(double distance) {
  const double d = std::abs(distance);
  if (d >= 1.5) return 0;
  return d < 0.5 ? 0.75 - d * d : 0.5 * (1.5 - d) * (1.5 - d);
}

// Features of the whole and, for their standard deviations, of stripes of rows.
struct Direction {
  double pairs = 0;  // 0: there are no values
  Values whole{};
  std::vector<Values> parts;
};

Direction MeasureDirection(const cv::Mat& marked, const CooccurrenceOptions& options, int down,
                           int right) {
  constexpr int kStripes = 6;
  constexpr double kLeastPairs = 2000;
  const int steps = options.Steps();
  CooccurrenceMatrix sum{steps, std::vector<double>(steps * steps, 0), 0};
  const auto describe = [&](const CooccurrenceMatrix& matrix) {
    return ToValues(DescribeCooccurrence(ShareAmongLevels(matrix, options.steps_per_level)));
  };
  Direction direction;
  for (int s = 0; s < kStripes; ++s) {
    const CooccurrenceMatrix part = CountRows(
        marked, steps, down, right, marked.rows * s / kStripes, marked.rows * (s + 1) / kStripes);
    Add(sum, part);
    if (part.pairs >= kLeastPairs) {
      direction.parts.push_back(describe(part));
    }
  }
  direction.pairs = sum.pairs;
  if (sum.pairs > 0) {
    direction.whole = describe(sum);
  }
  return direction;
}

// Value of one feature and standard deviation of its mean over the stripes.
Feature WithSd(const Values& whole, const std::vector<Values>& parts, int feature) {
  if (parts.size() < 2) {
    return {whole[feature], std::nullopt, ""};
  }
  std::vector<double> values;
  for (const Values& part : parts) {
    values.push_back(part[feature]);
  }
  return {whole[feature], StandardDeviation(values) / std::sqrt(static_cast<double>(values.size())),
          ""};
}

// The field without its form, which would lead a smooth top from level to level.
cv::Mat LevelledField(const AlignedField& field, const cv::Mat& mask) {
  constexpr int kEveryPixel = 8;  // of either axis: the form has six coefficients
  cv::Mat levelled = field.relative.clone();
  RemoveForm(levelled, mask, kEveryPixel);
  levelled += 1;
  return levelled;
}

Finding Measure(const Surface& surface) {
  const CooccurrenceOptions options;
  const AlignedField& field = surface.aligned_half;
  const int offset = static_cast<int>(std::lround(options.offset_mm * field.px_per_mm));
  const cv::Mat mask = field.regions == static_cast<int>(Region::kField);
  const auto none = [](const char* reason) {
    return Finding{std::vector<Feature>(3 * kFeatures, {std::nullopt, std::nullopt, reason}), {}};
  };
  if (field.relative.empty() || cv::countNonZero(mask) == 0) return none("the coupon has no field");
  const cv::Mat marked =
      MarkOutside(QuantiseRelative(LevelledField(field, mask), options), mask, options.Steps());
  const Direction along = MeasureDirection(marked, options, 0, offset);
  const Direction across = MeasureDirection(marked, options, offset, 0);
  if (along.pairs == 0 || across.pairs == 0) {
    return none("the field is too small for pairs of pixels 0.2 mm apart");
  }
  const Values ratios = Ratios(across.whole, along.whole);
  std::vector<Values> ratio_parts;
  for (std::size_t s = 0; s < std::min(along.parts.size(), across.parts.size()); ++s) {
    ratio_parts.push_back(Ratios(across.parts[s], along.parts[s]));
  }
  Finding finding;
  for (int f = 0; f < kFeatures; ++f) {
    finding.features.push_back(WithSd(along.whole, along.parts, f));
    finding.features.push_back(WithSd(across.whole, across.parts, f));
    finding.features.push_back(WithSd(ratios, ratio_parts, f));
  }
  return finding;
}

}  // namespace

void CooccurrenceOptions::Check() const {
  if (!(level_width > 0)) {
    throw BadOption(fmt::format("level_width is {}: it must be above 0", level_width));
  }
  if (steps_per_level < 1 || steps_per_level % 2 == 0) {
    throw BadOption(
        fmt::format("steps_per_level is {}: it must be odd and above 0", steps_per_level));
  }
  if (levels_each_side < 1 || Steps() > kMaxLevels) {
    throw BadOption(
        fmt::format("levels_each_side is {}: it must be 1 at least, and make {} steps "
                    "at most, not {}",
                    levels_each_side, kMaxLevels, Steps()));
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

CooccurrenceMatrix ShareAmongLevels(const CooccurrenceMatrix& matrix, int steps) {
  if (steps < 1 || matrix.levels % steps != 0) {
    throw std::invalid_argument("ShareAmongLevels: the levels must be a multiple of the steps");
  }
  constexpr int kShares = 3;  // levels under the window of one gray value
  const int levels = matrix.levels / steps + kShares - 1;
  std::vector<std::array<double, kShares>> weights(steps);  // of a step within its level
  for (int step = 0; step < steps; ++step) {
    for (int share = 0; share < kShares; ++share) {
      weights[step][share] = SplineWeight((step + 0.5) / steps + 0.5 - share);
    }
  }
  // First the rows of the matrix are shared, then its columns.
  std::vector<double> rows(levels * matrix.levels, 0);
  for (int i = 0; i < matrix.levels; ++i) {
    const double* from = matrix.counts.data() + i * matrix.levels;
    for (int share = 0; share < kShares; ++share) {
      double* to = rows.data() + (i / steps + share) * matrix.levels;
      const double weight = weights[i % steps][share];
      for (int j = 0; j < matrix.levels; ++j) {
        to[j] += weight * from[j];
      }
    }
  }
  CooccurrenceMatrix shared{levels, std::vector<double>(levels * levels, 0), matrix.pairs};
  for (int i = 0; i < levels; ++i) {
    for (int j = 0; j < matrix.levels; ++j) {
      const double count = rows[i * matrix.levels + j];
      for (int share = 0; share < kShares; ++share) {
        shared.counts[i * levels + j / steps + share] += count * weights[j % steps][share];
      }
    }
  }
  return shared;
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
  const double scale = options.steps_per_level / options.level_width;
  const int middle = (options.Steps() - 1) / 2;
  cv::Mat quantised;
  // convertTo rounds and saturates at 0: the coupon's own level becomes the middle step.
  relative.convertTo(quantised, CV_8UC1, scale, middle - scale);
  return cv::min(quantised, options.Steps() - 1);
}

Metric CooccurrenceMetric() {
  return {"cooccurrence",
          3,
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
           {"cooccurrence_correlation_ratio", "1 + that across over 1 + that along"}},
          &Measure};
}

}  // namespace laygauge
