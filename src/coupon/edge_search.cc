#include "coupon/edge_search.h"

#include <algorithm>
#include <cmath>
#include <cstring>
#include <opencv2/imgproc.hpp>

#include "base/vectorize.h"

namespace laygauge {
namespace {

// A step of this much per mm, of the paper's encoded brightness, scores one half. Plain paper's
// noise gives a tenth of it; the faintest edge seen, of a white coupon on white paper, about it.
constexpr float kHalfScore_per_mm = 0.15F;
constexpr double kVisibleFoot_mm = 0.15;  // closer, edge and foot blur into one

constexpr int kWide = 8;  // shifts that are looked at together

// A point of an edge in the grid's first position: the gradient's two parts there, weighted by the
// outward direction.
struct EdgePoint {
  const float* by_x;
  const float* by_y;
  float outward_x;
  float outward_y;
};

// Shifts of a row of the grid that are looked at: `count` floats from `first`, whole kWide.
struct ShiftRow {
  int y = 0;
  int first = 0;
  int count = 0;
};

// An edge's points and what its score counts.
struct Edge {
  std::vector<EdgePoint> points;
  float weight = 1;
};

// Adds the edge's scores for kBlocks times kWide shifts beside one another.
template <int kBlocks>
[[gnu::always_inline]] inline void AddBlocks(const Edge& edge, size_t offset, float* scores) {
  EightFloats sums[kBlocks] = {};
  for (const EdgePoint& point : edge.points) {
    const float* by_x = point.by_x + offset;
    const float* by_y = point.by_y + offset;
    for (int block = 0; block < kBlocks; ++block) {
      sums[block] += *EightAt(by_x + block * kWide) * point.outward_x +
                     *EightAt(by_y + block * kWide) * point.outward_y;
    }
  }
  const float half = kHalfScore_per_mm * static_cast<float>(edge.points.size());
  for (int block = 0; block < kBlocks; ++block) {
    const EightFloats step = sums[block] < 0 ? -sums[block] : sums[block];
    EightFloats sum = *EightAt(scores + block * kWide) + edge.weight * (step / (step + half));
    std::memcpy(scores + block * kWide, &sum, sizeof sum);
  }
}

// Adds the edge's scores for the shifts of the rows, whose scores lie `width` apart.
LAYGAUGE_WIDE_VECTORS
void AddRows(const Edge& edge, size_t stride, const std::vector<ShiftRow>& rows, int width,
             std::vector<float>& scores) {
  for (const ShiftRow& row : rows) {
    const size_t offset = static_cast<size_t>(row.y) * stride;
    float* out = scores.data() + static_cast<size_t>(row.y) * width;
    int x = row.first;
    const int end = row.first + row.count;
    for (; x + 3 * kWide <= end; x += 3 * kWide) AddBlocks<3>(edge, offset + x, out + x);
    if (x + 2 * kWide == end) AddBlocks<2>(edge, offset + x, out + x);
    if (x + kWide == end) AddBlocks<1>(edge, offset + x, out + x);
  }
}

class PieceScorer {
 public:
  PieceScorer(const GradientPicture& gradient, const PoseGrid& grid, const WallView& wall)
      : gradient_(gradient),
        grid_(grid),
        wall_(wall),
        reach_px_(static_cast<int>(std::lround(grid.reach_mm * gradient.px_per_mm))),
        side_(2 * reach_px_ + 1),
        width_((side_ + kWide - 1) / kWide * kWide) {}

  [[nodiscard]] size_t shifts() const { return static_cast<size_t>(side_) * width_; }

  [[nodiscard]] std::vector<ShiftRow> AllRows() const {
    std::vector<ShiftRow> rows;
    for (int y = 0; y < side_; ++y) rows.push_back({y, 0, width_});
    return rows;
  }

  // The rows that hold scores above `least`.
  [[nodiscard]] std::vector<ShiftRow> RowsAbove(const std::vector<float>& scores,
                                                float least) const {
    std::vector<ShiftRow> rows;
    for (int y = 0; y < side_; ++y) {
      const float* row = scores.data() + static_cast<size_t>(y) * width_;
      const auto is_above = [=](float score) { return score > least; };
      const auto first = std::find_if(row, row + side_, is_above) - row;
      if (first == side_) continue;
      int last = side_ - 1;
      while (!is_above(row[last])) --last;
      const int begin = static_cast<int>(first) / kWide * kWide;
      rows.push_back({y, begin, (last / kWide + 1) * kWide - begin});
    }
    return rows;
  }

  // Adds the piece's scores, times `weight`, for the rows' shifts.
  void Add(const EdgePiece& piece, const Turn& turn, float weight,
           const std::vector<ShiftRow>& rows, std::vector<float>& scores) {
    const double foot_mm = wall_.FootOutward_mm(grid_.middle.center_mm + turn(piece.middle_mm),
                                                turn(piece.middle_outward));
    const bool foot_visible = foot_mm >= kVisibleFoot_mm;
    AddEdge(piece, turn, 0, foot_visible ? weight / 2 : weight, rows, scores);
    if (foot_visible) AddEdge(piece, turn, foot_mm, weight / 2, rows, scores);
  }

  // The highest of the scores of true shifts, and its shift.
  [[nodiscard]] ScoredPose Best(const std::vector<float>& scores, double turn_deg) const {
    float top = -1;
    cv::Point2d shift_px;
    for (int y = 0; y < side_; ++y) {
      const float* row = scores.data() + static_cast<size_t>(y) * width_;
      const float* highest = std::max_element(row, row + side_);
      if (*highest <= top) continue;
      top = *highest;
      shift_px = cv::Point2d(static_cast<double>(highest - row) - reach_px_, y - reach_px_);
    }
    return {{grid_.middle.center_mm + shift_px / gradient_.px_per_mm, turn_deg}, top};
  }

 private:
  void AddEdge(const EdgePiece& piece, const Turn& turn, double outward_mm, float weight,
               const std::vector<ShiftRow>& rows, std::vector<float>& scores) {
    const cv::Point2d corner = grid_.middle.center_mm * gradient_.px_per_mm + gradient_.origin_px -
                               cv::Point2d(reach_px_, reach_px_);
    const double last_x = std::max(0, gradient_.by_x.cols - side_);
    const double last_y = std::max(0, gradient_.by_x.rows - side_);
    edge_.points.clear();
    edge_.weight = weight;
    for (size_t i = 0; i < piece.points_mm.size(); ++i) {
      const cv::Point2d point_mm = piece.points_mm[i] + piece.outward[i] * outward_mm;
      const cv::Point2d first_px = corner + turn(point_mm) * gradient_.px_per_mm;
      const cv::Point2f outward = turn(piece.outward[i]);
      const int x = static_cast<int>(std::clamp(first_px.x + 0.5, 0.0, last_x));
      const int y = static_cast<int>(std::clamp(first_px.y + 0.5, 0.0, last_y));
      edge_.points.push_back({gradient_.by_x.ptr<float>(y) + x, gradient_.by_y.ptr<float>(y) + x,
                              outward.x, outward.y});
    }
    AddRows(edge_, gradient_.by_x.step1(), rows, width_, scores);
  }

  const GradientPicture& gradient_;
  const PoseGrid& grid_;
  const WallView& wall_;
  int reach_px_;
  int side_;   // of the grid
  int width_;  // of a row of scores: whole kWide
  Edge edge_;
};

// A picture whose rows can be read kWide - 1 pixels beyond their end.
cv::Mat WithRoomBeside(const cv::Size& size) {
  cv::Mat wide(size.height, size.width + kWide - 1, CV_32FC1);
  wide.colRange(size.width, wide.cols).setTo(0);
  return wide.colRange(0, size.width);
}

// scale * (after - before), of a row.
LAYGAUGE_WIDE_VECTORS
void Subtract(const float* after, const float* before, int count, float scale, float* out) {
  for (int x = 0; x < count; ++x) out[x] = scale * (after[x] - before[x]);
}

}  // namespace

GradientPicture MakeGradient(const cv::Mat& picture, double px_per_mm, const cv::Point2d& origin_px,
                             double blur_sd_px) {
  GradientPicture result;
  result.px_per_mm = px_per_mm;
  result.origin_px = origin_px;
  cv::Mat blurred;
  cv::GaussianBlur(picture, blurred, {}, blur_sd_px, blur_sd_px, cv::BORDER_REPLICATE);
  result.by_x = WithRoomBeside(picture.size());
  result.by_y = WithRoomBeside(picture.size());
  const auto half = static_cast<float>(px_per_mm / 2);
  const int last_x = picture.cols - 1;
  const int last_y = picture.rows - 1;
  for (int y = 0; y <= last_y; ++y) {
    const float* row = blurred.ptr<float>(y);
    float* by_x = result.by_x.ptr<float>(y);
    Subtract(row + 2, row, last_x - 1, half, by_x + 1);
    by_x[0] = half * (row[1] - row[0]);
    by_x[last_x] = half * (row[last_x] - row[last_x - 1]);
    Subtract(blurred.ptr<float>(std::min(y + 1, last_y)), blurred.ptr<float>(std::max(y - 1, 0)),
             picture.cols, half, result.by_y.ptr<float>(y));
  }
  return result;
}

std::vector<ScoredPose> SearchPoses(const GradientPicture& gradient,
                                    const std::vector<EdgePiece>& pieces, const WallView& wall,
                                    const PoseGrid& grid) {
  PieceScorer scorer(gradient, grid, wall);
  float whole_mm = 0;
  float holes_mm = 0;
  for (const EdgePiece& piece : pieces) {
    whole_mm += static_cast<float>(piece.length_mm);
    if (piece.is_hole) holes_mm += static_cast<float>(piece.length_mm);
  }
  const auto add = [&](bool holes, double turn_deg, const std::vector<ShiftRow>& rows,
                       std::vector<float>& scores) {
    const Turn turn(turn_deg);
    for (const EdgePiece& piece : pieces) {
      if (piece.is_hole != holes) continue;
      scorer.Add(piece, turn, static_cast<float>(piece.length_mm) / whole_mm, rows, scores);
    }
  };

  std::vector<ScoredPose> best;
  std::vector<float> outline(scorer.shifts());
  std::vector<float> scores(scorer.shifts());
  const std::vector<ShiftRow> all_rows = scorer.AllRows();
  const int turns = static_cast<int>(std::floor(grid.turn_reach_deg / grid.turn_step_deg + 1e-9));
  for (int t = -turns; t <= turns; ++t) {
    const double turn_deg = grid.middle.turn_deg + t * grid.turn_step_deg;
    std::fill(outline.begin(), outline.end(), 0.F);
    add(false, turn_deg, all_rows, outline);
    // The holes cannot lift what lies further below the best.
    const auto top = static_cast<float>(scorer.Best(outline, turn_deg).score);
    const auto rows = scorer.RowsAbove(outline, top - 1.001F * holes_mm / whole_mm);
    for (const double more_deg : grid.same_outline_deg) {
      scores = outline;
      add(true, turn_deg + more_deg, rows, scores);
      best.push_back(scorer.Best(scores, turn_deg + more_deg));
    }
  }
  std::sort(best.begin(), best.end(),
            [](const ScoredPose& a, const ScoredPose& b) { return a.score > b.score; });
  return best;
}

}  // namespace laygauge
