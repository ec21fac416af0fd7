#include "coupon/edge_search.h"

#include <algorithm>
#include <cmath>
#include <opencv2/imgproc.hpp>

namespace laygauge {
namespace {

// A step of this much per mm, of the paper's encoded brightness, scores one half. Plain paper's
// noise gives a tenth of it; the faintest edge seen, of a white coupon on white paper, about it.
constexpr float kHalfScore_per_mm = 0.15F;
constexpr double kVisibleFoot_mm = 0.15;  // closer, edge and foot blur into one

// Steps across one line of points, for all shifts of the grid: side x side values, row by row.
void AddSteps(const GradientPicture& gradient, const cv::Point2d& first_px,
              const cv::Point2f& outward, int side, std::vector<float>& steps) {
  const int x0 = std::clamp(static_cast<int>(std::lround(first_px.x)), 0,
                            std::max(0, gradient.by_x.cols - side));
  const int y0 = std::clamp(static_cast<int>(std::lround(first_px.y)), 0,
                            std::max(0, gradient.by_x.rows - side));
  for (int y = 0; y < side; ++y) {
    const float* gx = gradient.by_x.ptr<float>(y0 + y) + x0;
    const float* gy = gradient.by_y.ptr<float>(y0 + y) + x0;
    float* out = steps.data() + static_cast<size_t>(y) * side;
    for (int x = 0; x < side; ++x) out[x] += gx[x] * outward.x + gy[x] * outward.y;
  }
}

struct PieceScorer {
  const GradientPicture& gradient;
  const PoseGrid& grid;
  const WallView& wall;
  int reach_px = 0;
  int side = 0;
  std::vector<float> edge{};
  std::vector<float> foot{};

  void Steps(const EdgePiece& piece, double turn_deg, double outward_mm,
             std::vector<float>& steps) const {
    std::fill(steps.begin(), steps.end(), 0.F);
    const cv::Point2d corner = grid.middle.center_mm * gradient.px_per_mm + gradient.origin_px -
                               cv::Point2d(reach_px, reach_px);
    for (size_t i = 0; i < piece.points_mm.size(); ++i) {
      const cv::Point2d point_mm = piece.points_mm[i] + piece.outward[i] * outward_mm;
      AddSteps(gradient, corner + Turned(point_mm, turn_deg) * gradient.px_per_mm,
               Turned(piece.outward[i], turn_deg), side, steps);
    }
    const float mean = 1.F / static_cast<float>(piece.points_mm.size());
    for (float& step : steps) {
      const float size = std::abs(step) * mean;
      step = size / (size + kHalfScore_per_mm);
    }
  }

  void Add(const EdgePiece& piece, double turn_deg, float weight, std::vector<float>& scores) {
    Steps(piece, turn_deg, 0, edge);
    const double foot_mm =
        wall.FootOutward_mm(grid.middle.center_mm + Turned(piece.middle_mm, turn_deg),
                            Turned(piece.middle_outward, turn_deg));
    if (foot_mm < kVisibleFoot_mm) {
      for (size_t i = 0; i < scores.size(); ++i) scores[i] += weight * edge[i];
      return;
    }
    Steps(piece, turn_deg, foot_mm, foot);
    for (size_t i = 0; i < scores.size(); ++i) {
      scores[i] += weight * 0.5F * (edge[i] + foot[i]);
    }
  }
};

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
  const size_t shifts = static_cast<size_t>(scorer.side) * scorer.side;
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
      scorer.Add(piece, turn_deg, static_cast<float>(piece.length_mm / whole_mm), scores);
    }
    const auto top = std::max_element(scores.begin(), scores.end()) - scores.begin();
    const cv::Point2d shift_px(static_cast<double>(top % scorer.side - scorer.reach_px),
                               static_cast<double>(top / scorer.side - scorer.reach_px));
    best.push_back(
        {{grid.middle.center_mm + shift_px / gradient.px_per_mm, turn_deg}, scores[top]});
  }
  std::sort(best.begin(), best.end(),
            [](const ScoredPose& a, const ScoredPose& b) { return a.score > b.score; });
  return best;
}

}  // namespace laygauge
