#include "texture/line_sums.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>

#include "base/vectorize.h"

namespace laygauge {
namespace {

// Closer to a column than to a row.
bool IsSteep(double radians) { return std::abs(std::sin(radians)) >= std::abs(std::cos(radians)); }

// An image with what the sums need to know of it; the transposed one serves the other half of the
// directions.
struct Plane {
  cv::Mat image;           // CV_16SC1
  cv::Mat searched;        // CV_8UC1
  std::vector<int> begin;  // by row: searched pixels lie in [begin, end)
  std::vector<int> end;
};

Plane MakePlane(const cv::Mat& image, const cv::Mat& searched) {
  Plane plane{image, searched, {}, {}};
  for (int y = 0; y < searched.rows; ++y) {
    const auto* row = searched.ptr<std::uint8_t>(y);
    const auto* first = std::find_if(row, row + searched.cols, [](auto v) { return v != 0; });
    const auto* last = row + searched.cols;
    while (last > first && *(last - 1) == 0) {
      --last;
    }
    plane.begin.push_back(static_cast<int>(first - row));
    plane.end.push_back(static_cast<int>(last - row));
  }
  return plane;
}

LAYGAUGE_WIDE_VECTORS
void Add(const std::int16_t* row, int begin, int end, std::int16_t* __restrict to) {
  for (int x = begin; x < end; ++x) to[x] = static_cast<std::int16_t>(to[x] + row[x]);
}

LAYGAUGE_WIDE_VECTORS
void Subtract(const std::int16_t* row, int begin, int end, std::int16_t* __restrict from) {
  for (int x = begin; x < end; ++x) from[x] = static_cast<std::int16_t>(from[x] - row[x]);
}

// Of the absolute values.
LAYGAUGE_WIDE_VECTORS
std::int16_t Largest(const std::int16_t* row, int begin, int end) {
  std::int16_t most = 0;
  for (int x = begin; x < end; ++x) {
    most = std::max(most, static_cast<std::int16_t>(std::abs(row[x])));
  }
  return most;
}

// sums(y, x) = sum of image(y + k, x + s(y + k) - s(y)) over |k| <= half, s(y) = round(slope y).
void SumDown(const Plane& plane, double slope, int half, cv::Mat& sums) {
  const int rows = plane.image.rows;
  const int cols = plane.image.cols;
  std::vector<int> shift;
  for (int y = 0; y < rows; ++y) shift.push_back(static_cast<int>(std::lround(slope * y)));
  const int highest = std::max(shift.front(), shift.back());
  const int lowest = std::min(shift.front(), shift.back());
  std::vector<std::int16_t> running(static_cast<size_t>(cols + highest - lowest), 0);
  const auto run = [&](int y) {
    return running.data() + (highest - shift[static_cast<size_t>(y)]);
  };
  for (int y = -half; y < rows; ++y) {
    const int enters = y + half;
    if (enters < rows) {
      Add(plane.image.ptr<std::int16_t>(enters), plane.begin[enters], plane.end[enters],
          run(enters));
    }
    const int leaves = y - half - 1;
    if (leaves >= 0) {
      Subtract(plane.image.ptr<std::int16_t>(leaves), plane.begin[leaves], plane.end[leaves],
               run(leaves));
    }
    if (y >= 0) {
      std::copy(run(y) + plane.begin[y], run(y) + plane.end[y],
                sums.ptr<std::int16_t>(y) + plane.begin[y]);
    }
  }
}

// 90 % quantile of |sum| on every fourth searched pixel along both axes, over a normal one's.
// `counts`: scratch space, a 0 for every possible |sum|; counting is quicker than sorting.
double Spread(const Plane& plane, const cv::Mat& sums, std::vector<int>& counts) {
  int total = 0;
  int most = 0;
  for (int y = 0; y < sums.rows; y += 4) {
    const auto* row = sums.ptr<std::int16_t>(y);
    const auto* on = plane.searched.ptr<std::uint8_t>(y);
    for (int x = plane.begin[y]; x < plane.end[y]; x += 4) {
      if (on[x] != 0) {
        const int size = std::abs(row[x]);
        most = std::max(most, size);
        ++counts[static_cast<size_t>(size)];
        ++total;
      }
    }
  }
  if (total == 0) {
    return 0;
  }
  size_t quantile = 0;
  for (int below = counts[0]; below <= total * 9 / 10; below += counts[quantile]) ++quantile;
  std::fill(counts.begin(), counts.begin() + most + 1, 0);
  return static_cast<double>(quantile) / 1.6449;
}

void KeepHits(const Plane& plane, const cv::Mat& sums, double spread, double min_sigmas,
              LineHit hit, bool transposed, std::vector<LineHit>& hits) {
  const int least = static_cast<int>(std::ceil(min_sigmas * spread));
  for (int y = 0; y < sums.rows; ++y) {
    const auto* row = sums.ptr<std::int16_t>(y);
    if (Largest(row, plane.begin[y], plane.end[y]) < least) {
      continue;
    }
    const auto* on = plane.searched.ptr<std::uint8_t>(y);
    for (int x = plane.begin[y]; x < plane.end[y]; ++x) {
      if (on[x] != 0 && std::abs(row[x]) >= least) {
        hit.centre = transposed ? cv::Point(y, x) : cv::Point(x, y);
        hit.sigmas = std::abs(row[x]) / spread;
        hits.push_back(hit);
      }
    }
  }
}

}  // namespace

std::vector<cv::Point> LineOffsets(double direction_deg, double length_px) {
  const double radians = direction_deg * std::numbers::pi / 180;
  const double dx = std::cos(radians);
  const double dy = -std::sin(radians);
  const double step = std::max(std::abs(dx), std::abs(dy));
  const int half = static_cast<int>(std::lround(length_px / 2 * step));
  std::vector<cv::Point> offsets;
  for (int k = -half; k <= half; ++k) {
    offsets.emplace_back(static_cast<int>(std::lround(k * dx / step)),
                         static_cast<int>(std::lround(k * dy / step)));
  }
  return offsets;
}

double LineSums::SpreadAt(double direction_deg) const {
  const auto above = std::lower_bound(directions_deg.begin(), directions_deg.end(), direction_deg);
  if (above == directions_deg.begin()) {
    return spread.front();
  }
  if (above == directions_deg.end()) {
    return spread.back();
  }
  const auto i = static_cast<size_t>(above - directions_deg.begin());
  const double share =
      (direction_deg - directions_deg[i - 1]) / (directions_deg[i] - directions_deg[i - 1]);
  return spread[i - 1] + share * (spread[i] - spread[i - 1]);
}

LineSums SumAlongLines(const cv::Mat& image, const cv::Mat& searched,
                       const std::vector<double>& directions_deg, double length_px,
                       double min_sigmas) {
  const Plane upright = MakePlane(image, searched);
  const Plane transposed = MakePlane(image.t(), searched.t());
  LineSums result;
  result.directions_deg = directions_deg;
  std::vector<int> counts(1U << 15U, 0);
  for (size_t i = 0; i < directions_deg.size(); ++i) {
    const double radians = directions_deg[i] * std::numbers::pi / 180;
    const double dx = std::cos(radians);
    const double dy = -std::sin(radians);
    const bool steep = IsSteep(radians);
    const Plane& plane = steep ? upright : transposed;
    const int half =
        static_cast<int>(std::lround(length_px / 2 * std::max(std::abs(dx), std::abs(dy))));
    cv::Mat sums(plane.image.size(), CV_16SC1);
    SumDown(plane, steep ? dx / dy : dy / dx, half, sums);
    const double spread = Spread(plane, sums, counts);
    result.spread.push_back(spread / std::sqrt(2 * half + 1));
    if (spread > 0) {
      KeepHits(plane, sums, spread, min_sigmas, {{}, static_cast<int>(i), 0}, !steep, result.hits);
    }
  }
  std::stable_sort(result.hits.begin(), result.hits.end(),
                   [](const LineHit& a, const LineHit& b) { return a.sigmas > b.sigmas; });
  return result;
}

}  // namespace laygauge
