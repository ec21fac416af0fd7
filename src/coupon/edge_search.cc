#include "coupon/edge_search.h"

#include <algorithm>
#include <cmath>
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

// Adds the steps across the points for all shifts of the grid: `side` rows of kWide times `blocks`.
LAYGAUGE_WIDE_VECTORS
void AddSteps(const std::vector<EdgePoint>& points, size_t stride, int side, int blocks,
              float* steps) {
  for (int y = 0; y < side; ++y) {
    for (int block = 0; block < blocks; ++block) {
      const size_t offset = static_cast<size_t>(y) * stride + static_cast<size_t>(block) * kWide;
      EightFloats sums = {};
      for (const EdgePoint& point : points) {
        sums += *EightAt(point.by_x + offset) * point.outward_x +
                *EightAt(point.by_y + offset) * point.outward_y;
      }
      float* out = steps + (static_cast<size_t>(y) * blocks + block) * kWide;
      for (int i = 0; i < kWide; ++i) out[i] = sums[i];
    }
  }
}

LAYGAUGE_WIDE_VECTORS
void ScoreSteps(float mean, std::vector<float>& steps) {
  for (float& step : steps) {
    const float size = std::abs(step) * mean;
    step = size / (size + kHalfScore_per_mm);
  }
}

struct PieceScorer {
  const GradientPicture& gradient;
  const PoseGrid& grid;
  const WallView& wall;
  int reach_px = 0;
  int side = 0;
  int blocks = 0;
  std::vector<EdgePoint> points{};
  std::vector<float> edge{};
  std::vector<float> foot{};

  void Steps(const EdgePiece& piece, const Turn& turn, double outward_mm,
             std::vector<float>& steps) {
    const cv::Point2d corner = grid.middle.center_mm * gradient.px_per_mm + gradient.origin_px -
                               cv::Point2d(reach_px, reach_px);
    const double last_x = std::max(0, gradient.by_x.cols - side);
    const double last_y = std::max(0, gradient.by_x.rows - side);
    points.clear();
    for (size_t i = 0; i < piece.points_mm.size(); ++i) {
      const cv::Point2d point_mm = piece.points_mm[i] + piece.outward[i] * outward_mm;
      const cv::Point2d first_px = corner + turn(point_mm) * gradient.px_per_mm;
      const cv::Point2f outward = turn(piece.outward[i]);
      const int x = static_cast<int>(std::clamp(first_px.x + 0.5, 0.0, last_x));
      const int y = static_cast<int>(std::clamp(first_px.y + 0.5, 0.0, last_y));
      points.push_back(
          {gradient.by_x.ptr<float>(y) + x, gradient.by_y.ptr<float>(y) + x, outward.x, outward.y});
    }
    AddSteps(points, gradient.by_x.step1(), side, blocks, steps.data());
    ScoreSteps(1.F / static_cast<float>(piece.points_mm.size()), steps);
  }

  void Add(const EdgePiece& piece, const Turn& turn, float weight, std::vector<float>& scores) {
    Steps(piece, turn, 0, edge);
    const double foot_mm = wall.FootOutward_mm(grid.middle.center_mm + turn(piece.middle_mm),
                                               turn(piece.middle_outward));
    if (foot_mm < kVisibleFoot_mm) {
      for (size_t i = 0; i < scores.size(); ++i) scores[i] += weight * edge[i];
      return;
    }
    Steps(piece, turn, foot_mm, foot);
    for (size_t i = 0; i < scores.size(); ++i) {
      scores[i] += weight * 0.5F * (edge[i] + foot[i]);
    }
  }

  // The highest of the scores of true shifts, and its shift.
  ScoredPose Best(const std::vector<float>& scores, double turn_deg) const {
    float top = -1;
    cv::Point2d shift_px;
    for (int y = 0; y < side; ++y) {
      const float* row = scores.data() + static_cast<size_t>(y) * blocks * kWide;
      const float* highest = std::max_element(row, row + side);
      if (*highest <= top) continue;
      top = *highest;
      shift_px = cv::Point2d(static_cast<double>(highest - row) - reach_px, y - reach_px);
    }
    return {{grid.middle.center_mm + shift_px / gradient.px_per_mm, turn_deg}, top};
  }
};

// A picture whose rows can be read kWide - 1 pixels beyond their end.
cv::Mat WithRoomBeside(const cv::Size& size) {
  cv::Mat wide(size.height, size.width + kWide - 1, CV_32FC1);
  wide.colRange(size.width, wide.cols).setTo(0);
  return wide.colRange(0, size.width);
}

}  // namespace

GradientPicture MakeGradient(const cv::Mat& picture, double px_per_mm, const cv::Point2d& origin_px,
                             double blur_sd_px) {
  GradientPicture result;
  result.px_per_mm = px_per_mm;
  result.origin_px = origin_px;
  cv::Mat blurred;
  cv::GaussianBlur(picture, blurred, {}, blur_sd_px, blur_sd_px, cv::BORDER_REPLICATE);
  const cv::Matx13f difference(-0.5F, 0, 0.5F);
  const cv::Mat along = cv::Mat(difference) * px_per_mm;
  const cv::Mat one = cv::Mat::ones(1, 1, CV_32FC1);
  result.by_x = WithRoomBeside(picture.size());
  result.by_y = WithRoomBeside(picture.size());
  cv::sepFilter2D(blurred, result.by_x, CV_32F, along, one, {-1, -1}, 0, cv::BORDER_REPLICATE);
  cv::sepFilter2D(blurred, result.by_y, CV_32F, one, along, {-1, -1}, 0, cv::BORDER_REPLICATE);
  return result;
}

std::vector<ScoredPose> SearchPoses(const GradientPicture& gradient,
                                    const std::vector<EdgePiece>& pieces, const WallView& wall,
                                    const PoseGrid& grid) {
  PieceScorer scorer{gradient, grid, wall};
  scorer.reach_px = static_cast<int>(std::lround(grid.reach_mm * gradient.px_per_mm));
  scorer.side = 2 * scorer.reach_px + 1;
  scorer.blocks = (scorer.side + kWide - 1) / kWide;
  const size_t shifts = static_cast<size_t>(scorer.side) * scorer.blocks * kWide;
  scorer.edge.resize(shifts);
  scorer.foot.resize(shifts);
  double whole_mm = 0;
  for (const EdgePiece& piece : pieces) whole_mm += piece.length_mm;

  std::vector<ScoredPose> best;
  std::vector<float> scores(shifts);
  const int turns = static_cast<int>(std::floor(grid.turn_reach_deg / grid.turn_step_deg + 1e-9));
  for (int t = -turns; t <= turns; ++t) {
    const double turn_deg = grid.middle.turn_deg + t * grid.turn_step_deg;
    std::fill(scores.begin(), scores.end(), 0.F);
    for (const EdgePiece& piece : pieces) {
      scorer.Add(piece, Turn(turn_deg), static_cast<float>(piece.length_mm / whole_mm), scores);
    }
    best.push_back(scorer.Best(scores, turn_deg));
  }
  std::sort(best.begin(), best.end(),
            [](const ScoredPose& a, const ScoredPose& b) { return a.score > b.score; });
  return best;
}

}  // namespace laygauge
