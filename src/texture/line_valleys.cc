#include "texture/line_valleys.h"

#include <algorithm>
#include <cmath>
#include <cstring>
#include <limits>

#include "base/vectorize.h"
#include "texture/channel_kernel.h"
#include "texture/surface.h"

namespace laygauge {
namespace {

constexpr double kStepMm = 0.25;
constexpr double kMinSpacing = 0.45;  // of the pitch

// From each of a row's first `starts` pixels, the sum of `step` pixels, and not 0 if one is off the
// field. All are summed although few are wanted: neighbours are what vectors hold.
LAYGAUGE_WIDE_VECTORS
void SumOnwards(const float* value, const std::uint8_t* region, int step, int starts,
                float* __restrict sums, std::uint8_t* __restrict off) {
  std::fill(sums, sums + starts, 0.0F);
  std::fill(off, off + starts, std::uint8_t{0});
  for (int i = 0; i < step; ++i) {
    for (int x = 0; x < starts; ++x) sums[x] += value[x + i];
    for (int x = 0; x < starts; ++x) {
      off[x] |= region[x + i] ^ static_cast<std::uint8_t>(Region::kField);
    }
  }
}

// Means over `step` columns of the field, one row a block; NaN where a pixel is off the field.
cv::Mat BlockMeans(const AlignedField& field, int step) {
  const int blocks = field.relative.cols / step;
  cv::Mat means(field.relative.rows, blocks, CV_32FC1);
  means.setTo(std::numeric_limits<float>::quiet_NaN());
  std::vector<float> sums(static_cast<std::size_t>(field.relative.cols));
  std::vector<std::uint8_t> off(sums.size());
  for (int y = 0; y < field.relative.rows; ++y) {
    const auto* region = field.regions.ptr<std::uint8_t>(y);
    // A turned field leaves much of the picture empty: from its first block on.
    const void* in_field = std::memchr(region, static_cast<int>(Region::kField),
                                       static_cast<std::size_t>(blocks * step));
    if (in_field == nullptr) {
      continue;
    }
    const int first = static_cast<int>(static_cast<const std::uint8_t*>(in_field) - region) / step;
    int last = blocks;
    while (last > first + 1 && region[last * step - 1] == static_cast<std::uint8_t>(Region::kOff)) {
      --last;
    }
    SumOnwards(field.relative.ptr<float>(y) + first * step, region + first * step, step,
               (last - first - 1) * step + 1, sums.data(), off.data());
    auto* mean = means.ptr<float>(y);
    for (int block = first; block < last; ++block) {
      const auto start = static_cast<std::size_t>((block - first) * step);
      if (off[start] == 0) mean[block] = sums[start] / static_cast<float>(step);
    }
  }
  return means.t();
}

struct Minimum {
  int at = 0;
  float value = 0;
};

// What a profile's minima are found in; kept from one profile to the next.
struct Scratch {
  std::vector<float> smooth;
  std::vector<int> places;
  std::vector<Minimum> minima;
};

LAYGAUGE_WIDE_VECTORS
void Smooth(const float* profile, int size, float* __restrict smooth) {
  for (int y = 1; y + 1 < size; ++y) {
    smooth[y] = 0.25F * profile[y - 1] + 0.5F * profile[y] + 0.25F * profile[y + 1];
  }
}

// Minima of the profile, smoothed by 1 2 1; a lower one within `spacing_px` silences the others.
void FindMinima(const float* profile, int size, double spacing_px, Scratch* scratch) {
  scratch->smooth.assign(static_cast<std::size_t>(size), std::numeric_limits<float>::quiet_NaN());
  scratch->places.resize(static_cast<std::size_t>(size));
  float* s = scratch->smooth.data();
  Smooth(profile, size, s);
  constexpr int kRoom = ChannelKernel::kReach;
  // Every place is written down, and the next one over it unless it is a minimum: quicker than a
  // branch that no processor foresees.
  std::size_t count = 0;
  for (int y = kRoom; y + kRoom < size; ++y) {
    scratch->places[count] = y;
    count += static_cast<std::size_t>(s[y] < s[y - 1]) & static_cast<std::size_t>(s[y] <= s[y + 1]);
  }
  auto& minima = scratch->minima;
  minima.clear();
  for (std::size_t i = 0; i < count; ++i) {
    const int y = scratch->places[i];
    if (std::isnan(profile[y - kRoom]) || std::isnan(profile[y + kRoom])) {
      continue;
    }
    while (!minima.empty() && y - minima.back().at < spacing_px && s[y] < minima.back().value) {
      minima.pop_back();
    }
    if (minima.empty() || y - minima.back().at >= spacing_px) {
      minima.push_back({y, s[y]});
    }
  }
}

}  // namespace

LineValleys FindLineValleys(const AlignedField& field, std::optional<double> pitch_mm,
                            double blur_sd_mm) {
  LineValleys found;
  const int step = std::max(1, static_cast<int>(std::lround(kStepMm * field.px_per_mm)));
  found.step_mm = step / field.px_per_mm;
  found.length_mm = 2 * found.step_mm;
  found.pitch_mm = pitch_mm.value_or(kUsualPitchMm);
  found.column_step_px = step;
  found.column0_px = step - 0.5;
  if (field.relative.empty() || field.relative.cols < 2 * step) {
    return found;
  }
  const cv::Mat blocks = BlockMeans(field, step);
  found.profiles = 0.5 * (blocks.rowRange(0, blocks.rows - 1) + blocks.rowRange(1, blocks.rows));
  const ChannelKernel kernel(ChannelSdMm(blur_sd_mm), 1 / field.px_per_mm);
  const double spacing_px = kMinSpacing * found.pitch_mm * field.px_per_mm;
  Scratch scratch;
  found.stations.resize(static_cast<std::size_t>(found.profiles.rows));
  for (int station = 0; station < found.profiles.rows; ++station) {
    const auto* profile = found.profiles.ptr<float>(station);
    FindMinima(profile, found.profiles.cols, spacing_px, &scratch);
    auto& valleys = found.stations[static_cast<std::size_t>(station)];
    valleys.reserve(scratch.minima.size());
    for (const Minimum& minimum : scratch.minima) {
      const float* s = scratch.smooth.data() + minimum.at;
      const float curvature = s[-1] - 2 * s[0] + s[1];
      const float offset =
          curvature > 0 ? std::clamp(0.5F * (s[-1] - s[1]) / curvature, -0.5F, 0.5F) : 0.0F;
      const ChannelFit fit = kernel.Fit(profile + minimum.at, offset);
      valleys.push_back(
          {static_cast<float>(minimum.at) + offset, static_cast<float>(fit.darkness_um)});
    }
  }
  return found;
}

}  // namespace laygauge
