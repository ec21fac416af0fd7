#include "texture/torn_area.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/error.h"
#include "base/vectorize.h"

namespace laygauge {
namespace {

constexpr double kGradientPxPerMm = 10;
constexpr double kSmoothMm = 0.09;
constexpr double kSeamMm = 0.4;  // next to a wall its seam shows, not the lines
constexpr int kPixelsPerCell = 2;

int OddCells(double cells) { return 2 * static_cast<int>(std::lround(cells / 2)) + 1; }

cv::Mat Disk(double radius) {
  const int side = 2 * static_cast<int>(std::lround(radius)) + 1;
  return cv::getStructuringElement(cv::MORPH_ELLIPSE, {side, side});
}

// Quicker than a disk, for a seam along walls.
cv::Mat Square(double radius) {
  const int side = 2 * static_cast<int>(std::lround(radius)) + 1;
  return cv::Mat::ones(side, side, CV_8UC1);
}

// The coupon's top without its walls, at the scale of the gradients.
struct Top {
  cv::Mat relative;
  cv::Mat regions;
  cv::Mat judged;  // CV_8UC1
  double px_per_mm = 0;
  int reduction = 1;
};

Top ReduceTop(const Patch& patch) {
  Top top;
  top.reduction = std::max(1, static_cast<int>(std::lround(patch.px_per_mm / kGradientPxPerMm)));
  top.px_per_mm = patch.px_per_mm / top.reduction;
  const cv::Size size(patch.relative.cols / top.reduction, patch.relative.rows / top.reduction);
  const cv::Rect whole(0, 0, size.width * top.reduction, size.height * top.reduction);
  cv::resize(patch.relative(whole), top.relative, size, 0, 0, cv::INTER_AREA);
  cv::resize(patch.regions(whole), top.regions, size, 0, 0, cv::INTER_NEAREST);
  cv::erode(top.regions >= static_cast<int>(Region::kMargin), top.judged,
            Square(kSeamMm * top.px_per_mm));
  const int side = 2 * static_cast<int>(std::ceil(2 * kSmoothMm * top.px_per_mm)) + 1;
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

// The same for each pixel of a row.
struct DirectionRow {
  std::vector<float> cosine;
  std::vector<float> sine;
  std::vector<float> weight;
  std::vector<float> square;
  std::vector<float> count;
};

// The row between its first and last pixel; `floor` is added to squared gradients.
LAYGAUGE_WIDE_VECTORS
void FindDirections(const float* above, const float* here, const float* below,
                    const std::uint8_t* judged, float floor, DirectionRow& row) {
  for (size_t x = 1; x + 1 < row.count.size(); ++x) {
    const bool on = judged[x] != 0;
    const float gx = on ? here[x + 1] - here[x - 1] : 0.F;
    const float gy = on ? below[x] - above[x] : 0.F;
    const float square = gx * gx + gy * gy;
    const float scale = 1 / (square + floor);
    row.cosine[x] = (gx * gx - gy * gy) * scale;
    row.sine[x] = 2 * gx * gy * scale;
    row.weight[x] = square * scale;
    row.square[x] = square;
    row.count[x] = on ? 1.F : 0.F;
  }
}

void AddToCells(const std::vector<float>& pixels, cv::Mat& cells, int row) {
  auto* out = cells.ptr<float>(row);
  for (int cell = 0; cell < cells.cols; ++cell) {
    for (int i = 0; i < kPixelsPerCell; ++i) out[cell] += pixels[cell * kPixelsPerCell + i];
  }
}

Directions SumDirections(const Top& top, double window_mm) {
  const cv::Size cells(top.judged.cols / kPixelsPerCell, top.judged.rows / kPixelsPerCell);
  Directions sums;
  for (cv::Mat* m : {&sums.cosine, &sums.sine, &sums.weight, &sums.square, &sums.count}) {
    m->create(cells, CV_32FC1);
    m->setTo(0);
  }
  const float floor = std::max(MedianSquaredGradient(top), 1e-12F);
  DirectionRow row;
  for (auto* part : {&row.cosine, &row.sine, &row.weight, &row.square, &row.count}) {
    part->assign(static_cast<size_t>(cells.width) * kPixelsPerCell, 0.F);
  }
  for (int y = 1; y + 1 < cells.height * kPixelsPerCell; ++y) {
    FindDirections(top.relative.ptr<float>(y - 1), top.relative.ptr<float>(y),
                   top.relative.ptr<float>(y + 1), top.judged.ptr<std::uint8_t>(y), floor, row);
    AddToCells(row.cosine, sums.cosine, y / kPixelsPerCell);
    AddToCells(row.sine, sums.sine, y / kPixelsPerCell);
    AddToCells(row.weight, sums.weight, y / kPixelsPerCell);
    AddToCells(row.square, sums.square, y / kPixelsPerCell);
    AddToCells(row.count, sums.count, y / kPixelsPerCell);
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

TornArea FindTornArea(const Patch& patch, std::optional<double> lay_deg,
                      const TornAreaOptions& options) {
  options.Check();
  const Top top = ReduceTop(patch);
  const Directions sums = SumDirections(top, options.window_mm);
  TornArea area;
  area.cells_per_mm = top.px_per_mm / kPixelsPerCell;
  const double reduction = top.reduction * kPixelsPerCell;
  area.origin_cell = (patch.origin_px + cv::Point2d(0.5, 0.5)) / reduction - cv::Point2d(0.5, 0.5);
  const cv::Mat judged = sums.count > 0;
  cv::resize(top.regions, area.field, judged.size(), 0, 0, cv::INTER_NEAREST);
  area.field = area.field == static_cast<int>(Region::kField);
  const Alignment alignment = AlignWith(ExpectedAngle(lay_deg, sums, judged), sums);
  const cv::Mat textured = Textured(sums, judged, top.px_per_mm, options);
  // Where no texture shows, its directions are chance: none can be lost.
  const bool shows = 2 * cv::countNonZero(textured & area.field) > cv::countNonZero(area.field);
  const double median = shows ? MedianOn(alignment.along, area.field) : 0;
  const cv::Mat wide =
      Widen(alignment.along, judged, OddCells(options.window_mm * area.cells_per_mm));
  cv::morphologyEx(MarkTorn(alignment, wide, judged, textured, median, options), area.torn,
                   cv::MORPH_OPEN, Disk(options.min_width_mm / 2 * area.cells_per_mm), {-1, -1}, 1,
                   cv::BORDER_CONSTANT, cv::Scalar::all(0));
  const int field_cells = cv::countNonZero(area.field);
  if (field_cells > 0) {
    area.area_pct = 100.0 * cv::countNonZero(area.torn & area.field) / field_cells;
  }
  return area;
}

}  // namespace laygauge
