#include "texture/torn_area.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/error.h"
#include "base/vectorize.h"
#include "texture/structuring_element.h"

namespace laygauge {
namespace {

constexpr double kSmoothMm = 0.09;
constexpr double kSeamMm = 0.4;  // next to a wall its seam shows, not the lines
constexpr int kPixelsPerCell = 2;

int OddCells(double cells) { return 2 * static_cast<int>(std::lround(cells / 2)) + 1; }

// The coupon's top without its walls, smoothed for gradients.
struct Top {
  cv::Mat relative;
  cv::Mat judged;  // CV_8UC1
  double px_per_mm = 0;
};

Top SmoothTop(const ReducedPatch& patch) {
  Top top;
  top.px_per_mm = patch.px_per_mm;
  cv::erode(patch.regions >= static_cast<int>(Region::kMargin), top.judged,
            Square(kSeamMm * top.px_per_mm));
  const int side = 2 * static_cast<int>(std::ceil(2 * kSmoothMm * top.px_per_mm)) + 1;
  // Off the coupon a patch may hold anything; the seam is wider than what smoothing mixes.
  patch.relative.copyTo(top.relative);
  top.relative.setTo(1, patch.regions < static_cast<int>(Region::kMargin));
  cv::GaussianBlur(top.relative, top.relative, {side, side}, kSmoothMm * top.px_per_mm);
  return top;
}

// Every fourth judged pixel along both axes is enough for a median.
float MedianSquaredGradient(const Top& top) {
  std::vector<float> squares;
  for (int y = 1; y + 1 < top.judged.rows; y += 4) {
    for (int x = 1; x + 1 < top.judged.cols; x += 4) {
      if (top.judged.at<std::uint8_t>(y, x) != 0) {
        const float gx = top.relative.at<float>(y, x + 1) - top.relative.at<float>(y, x - 1);
        const float gy = top.relative.at<float>(y + 1, x) - top.relative.at<float>(y - 1, x);
        squares.push_back(gx * gx + gy * gy);
      }
    }
  }
  if (squares.empty()) {
    return 0;
  }
  const auto middle = squares.begin() + static_cast<std::ptrdiff_t>(squares.size() / 2);
  std::nth_element(squares.begin(), middle, squares.end());
  return *middle;
}

// Sums over windows, in cells: the doubled angle's cosine and sine, their weight, and the squared
// gradient itself.
struct Directions {
  cv::Mat cosine;
  cv::Mat sine;
  cv::Mat weight;
  cv::Mat square;
  cv::Mat count;  // judged pixels
};

// The same for each column of pixels, over a row of cells.
struct DirectionRow {
  std::vector<float> cosine;
  std::vector<float> sine;
  std::vector<float> weight;
  std::vector<float> square;
  std::vector<float> count;
};

// Adds the row between its first and last pixel; `floor` is added to squared gradients. What is not
// judged counts nothing.
LAYGAUGE_WIDE_VECTORS
void FindDirections(const float* __restrict above, const float* __restrict here,
                    const float* __restrict below, const std::uint8_t* __restrict judged,
                    float floor, DirectionRow& row) {
  float* __restrict cosine = row.cosine.data();
  float* __restrict sine = row.sine.data();
  float* __restrict weight = row.weight.data();
  float* __restrict squares = row.square.data();
  float* __restrict count = row.count.data();
  const int end = static_cast<int>(row.count.size()) - 1;
  for (int x = 1; x < end; ++x) {
    const float one = judged[x] != 0 ? 1.F : 0.F;
    const float gx = here[x + 1] - here[x - 1];
    const float gy = below[x] - above[x];
    const float square = gx * gx + gy * gy;
    const float scale = one / (square + floor);
    cosine[x] += (gx * gx - gy * gy) * scale;
    sine[x] += 2 * gx * gy * scale;
    weight[x] += square * scale;
    squares[x] += one * square;
    count[x] += one;
  }
}

// The sums of a row of cells; the pixels' start anew.
void MoveToCells(std::vector<float>& pixels, cv::Mat& cells, int row) {
  auto* out = cells.ptr<float>(row);
  for (int cell = 0; cell < cells.cols; ++cell) {
    float sum = 0;
    for (int i = 0; i < kPixelsPerCell; ++i) sum += pixels[cell * kPixelsPerCell + i];
    out[cell] = sum;
  }
  std::fill(pixels.begin(), pixels.end(), 0.F);
}

Directions SumDirections(const Top& top, double window_mm) {
  const cv::Size cells(top.judged.cols / kPixelsPerCell, top.judged.rows / kPixelsPerCell);
  Directions sums;
  for (cv::Mat* m : {&sums.cosine, &sums.sine, &sums.weight, &sums.square, &sums.count}) {
    m->create(cells, CV_32FC1);
  }
  const float floor = std::max(MedianSquaredGradient(top), 1e-12F);
  DirectionRow row;
  for (auto* part : {&row.cosine, &row.sine, &row.weight, &row.square, &row.count}) {
    part->assign(static_cast<size_t>(cells.width) * kPixelsPerCell, 0.F);
  }
  const int last = cells.height * kPixelsPerCell - 1;
  for (int cell = 0; cell < cells.height; ++cell) {
    const int first = cell * kPixelsPerCell;
    for (int y = std::max(first, 1); y < std::min(first + kPixelsPerCell, last); ++y) {
      FindDirections(top.relative.ptr<float>(y - 1), top.relative.ptr<float>(y),
                     top.relative.ptr<float>(y + 1), top.judged.ptr<std::uint8_t>(y), floor, row);
    }
    MoveToCells(row.cosine, sums.cosine, cell);
    MoveToCells(row.sine, sums.sine, cell);
    MoveToCells(row.weight, sums.weight, cell);
    MoveToCells(row.square, sums.square, cell);
    MoveToCells(row.count, sums.count, cell);
  }
  const int side = OddCells(window_mm * top.px_per_mm / kPixelsPerCell);
  for (cv::Mat* m : {&sums.cosine, &sums.sine, &sums.weight, &sums.square}) {
    cv::boxFilter(*m, *m, -1, {side, side}, {-1, -1}, false, cv::BORDER_CONSTANT);
  }
  return sums;
}

// The doubled angle of the gradient across lines of direction `lay_deg`, y down.
double DoubledGradientAngle(double lay_deg) { return (180 - 2 * lay_deg) * std::numbers::pi / 180; }

double ExpectedAngle(std::optional<double> lay_deg, const Directions& sums, const cv::Mat& judged) {
  if (lay_deg) {
    return DoubledGradientAngle(*lay_deg);
  }
  return std::atan2(cv::mean(sums.sine, judged)[0], cv::mean(sums.cosine, judged)[0]);
}

struct Alignment {
  cv::Mat along;   // CV_32FC1 in cells, -1..1: how far the directions agree with the lay
  cv::Mat across;  // the other component
};

Alignment AlignWith(double angle, const Directions& sums) {
  const cv::Mat weight = cv::max(sums.weight, 1e-6);
  Alignment alignment;
  cv::divide(sums.cosine * std::cos(angle) + sums.sine * std::sin(angle), weight, alignment.along);
  cv::divide(sums.sine * std::cos(angle) - sums.cosine * std::sin(angle), weight, alignment.across);
  return alignment;
}

// Mean over a second window, of judged cells only.
cv::Mat Widen(const cv::Mat& along, const cv::Mat& judged, int side) {
  cv::Mat one;
  judged.convertTo(one, CV_32FC1, 1.0 / 255);
  cv::Mat sum;
  cv::Mat count;
  cv::boxFilter(along.mul(one), sum, -1, {side, side}, {-1, -1}, false, cv::BORDER_CONSTANT);
  cv::boxFilter(one, count, -1, {side, side}, {-1, -1}, false, cv::BORDER_CONSTANT);
  return sum / cv::max(count, 1);
}

double MedianOn(const cv::Mat& values, const cv::Mat& mask) {
  std::vector<float> chosen;
  for (int y = 0; y < values.rows; y += 2) {
    for (int x = 0; x < values.cols; x += 2) {
      if (mask.at<std::uint8_t>(y, x) != 0) {
        chosen.push_back(values.at<float>(y, x));
      }
    }
  }
  if (chosen.empty()) {
    return 0;
  }
  const auto middle = chosen.begin() + static_cast<std::ptrdiff_t>(chosen.size() / 2);
  std::nth_element(chosen.begin(), middle, chosen.end());
  return *middle;
}

// 255 where the window's mean squared gradient shows a texture, not the file's own noise.
cv::Mat Textured(const Directions& sums, const cv::Mat& judged, double px_per_mm,
                 const TornAreaOptions& options) {
  // Gradients are differences over two pixels.
  const double least = std::pow(2 * options.min_gradient_per_mm / px_per_mm, 2);
  const int side = OddCells(options.window_mm * px_per_mm / kPixelsPerCell);
  cv::Mat count;
  cv::boxFilter(sums.count, count, -1, {side, side}, {-1, -1}, false, cv::BORDER_CONSTANT);
  return (sums.square >= least * count) & judged;
}

// `wide` is the alignment over a wider window: a few cells without lines come by chance.
cv::Mat MarkTorn(const Alignment& alignment, const cv::Mat& wide, const cv::Mat& judged,
                 const cv::Mat& textured, double median, const TornAreaOptions& options) {
  // |direction| > turn is cos(2 direction) < cos(2 turn), of a vector of enough length.
  const auto cosine =
      static_cast<float>(std::cos(2 * options.min_turn_deg * std::numbers::pi / 180));
  const auto least = static_cast<float>(options.min_coherence);
  const auto lost =
      static_cast<float>(median > options.clear_alignment ? options.lost_share * median : -2);
  cv::Mat torn(judged.size(), CV_8UC1);
  for (int y = 0; y < torn.rows; ++y) {
    const auto* along = alignment.along.ptr<float>(y);
    const auto* across = alignment.across.ptr<float>(y);
    const auto* around = wide.ptr<float>(y);
    const auto* on = judged.ptr<std::uint8_t>(y);
    const auto* shows = textured.ptr<std::uint8_t>(y);
    auto* out = torn.ptr<std::uint8_t>(y);
    for (int x = 0; x < torn.cols; ++x) {
      const float length = std::sqrt(along[x] * along[x] + across[x] * across[x]);
      const bool turned = shows[x] != 0 && length > least && along[x] < cosine * length;
      out[x] = on[x] != 0 && (turned || around[x] < lost) ? 255 : 0;
    }
  }
  return torn;
}

// Without what the disk does not fit into. Most coupons have few marks or none: only their bounds
// are looked at, with room for the disk.
cv::Mat Opened(const cv::Mat& marks, const cv::Mat& disk) {
  cv::Mat opened = cv::Mat::zeros(marks.size(), CV_8UC1);
  const cv::Rect bounds = cv::boundingRect(marks);
  const cv::Point room(disk.size());
  const cv::Rect around =
      cv::Rect(bounds.tl() - room, bounds.br() + room) & cv::Rect(cv::Point(), marks.size());
  if (!bounds.empty()) {
    cv::morphologyEx(marks(around).clone(), opened(around), cv::MORPH_OPEN, disk, {-1, -1}, 1,
                     cv::BORDER_CONSTANT, cv::Scalar::all(0));
  }
  return opened;
}

void Need(bool holds, const char* field, double value, const char* rule) {
  if (!holds) {
    throw BadOption(fmt::format("{} is {}: {}", field, value, rule));
  }
}

}  // namespace

void TornAreaOptions::Check() const {
  Need(window_mm >= 1, "window_mm", window_mm, "at least 1, a few lines");
  Need(min_turn_deg > 0 && min_turn_deg < 90, "min_turn_deg", min_turn_deg, "between 0 and 90");
  Need(min_coherence > 0 && min_coherence < 1, "min_coherence", min_coherence, "between 0 and 1");
  Need(lost_share >= 0 && lost_share < 1, "lost_share", lost_share, "from 0 to less than 1");
  Need(clear_alignment > 0 && clear_alignment < 1, "clear_alignment", clear_alignment,
       "between 0 and 1");
  Need(min_gradient_per_mm >= 0, "min_gradient_per_mm", min_gradient_per_mm, "0 or more");
  Need(min_width_mm > 0, "min_width_mm", min_width_mm, "more than 0");
}

TornArea FindTornArea(const ReducedPatch& patch, std::optional<double> lay_deg,
                      const TornAreaOptions& options) {
  options.Check();
  const Top top = SmoothTop(patch);
  const Directions sums = SumDirections(top, options.window_mm);
  TornArea area;
  area.cells_per_mm = top.px_per_mm / kPixelsPerCell;
  area.origin_cell =
      (patch.origin_px + cv::Point2d(0.5, 0.5)) / kPixelsPerCell - cv::Point2d(0.5, 0.5);
  const cv::Mat judged = sums.count > 0;
  cv::resize(patch.regions, area.field, judged.size(), 0, 0, cv::INTER_NEAREST);
  area.field = area.field == static_cast<int>(Region::kField);
  const Alignment alignment = AlignWith(ExpectedAngle(lay_deg, sums, judged), sums);
  const cv::Mat textured = Textured(sums, judged, top.px_per_mm, options);
  // Where no texture shows, its directions are chance: none can be lost.
  const bool shows = 2 * cv::countNonZero(textured & area.field) > cv::countNonZero(area.field);
  const double median = shows ? MedianOn(alignment.along, area.field) : 0;
  const cv::Mat wide =
      Widen(alignment.along, judged, OddCells(options.window_mm * area.cells_per_mm));
  area.torn = Opened(MarkTorn(alignment, wide, judged, textured, median, options),
                     Disk(options.min_width_mm / 2 * area.cells_per_mm));
  const int field_cells = cv::countNonZero(area.field);
  if (field_cells > 0) {
    area.area_pct = 100.0 * cv::countNonZero(area.torn & area.field) / field_cells;
  }
  return area;
}

}  // namespace laygauge
