#include "coupon/edge_fit.h"

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <numeric>

namespace laygauge {
namespace {

constexpr double kProfileStep_mm = 0.05;
constexpr double kProfileReach_mm = 0.6;   // inward, and outward of whatever lies outermost
constexpr double kFaintest_per_mm = 0.10;  // slopes below are noise, of the paper's brightness
constexpr double kHalfWeight_per_mm = 0.4;
constexpr double kExpectedInset_mm = 0.03;  // a bead of 0.2 mm height, rounded
constexpr double kInsetSd_mm = 0.03;
constexpr double kVisibleFoot_mm = 0.12;  // closer, edge and foot blur into one

constexpr double kNowhere_mm = 1e6;

constexpr double kFaintestSeen_per_mm = 0.05;  // for long pieces, with less noise
constexpr double kSeenWithin_mm = 0.15;

// Neighbouring pieces err together: about 10 mm of edge make one independent observation. On top,
// what a whole side may be off by its rounding and shading.
constexpr double kCorrelated_mm = 10;
constexpr double kCommon_mm = 0.01;
constexpr double kCommon_deg = 0.02;

struct Extreme {
  double outward_mm = 0;
  double slope_per_mm = 0;  // its size
};

float Bilinear(const cv::Mat& picture, double x, double y) {
  x = std::clamp(x, 0.0, picture.cols - 1.001);
  y = std::clamp(y, 0.0, picture.rows - 1.001);
  const int column = static_cast<int>(x);
  const int row = static_cast<int>(y);
  const auto right = static_cast<float>(x - column);
  const auto down = static_cast<float>(y - row);
  const float* p = picture.ptr<float>(row) + column;
  const float* q = picture.ptr<float>(row + 1) + column;
  const float upper = p[0] + right * (p[1] - p[0]);
  return upper + down * (q[0] + right * (q[1] - q[0]) - upper);
}

// Adds the picture's values at start + k * step, k = 0, 1, ..., to `sums`.
void AddProfile(const cv::Mat& picture, const cv::Point2d& start, const cv::Point2d& step,
                std::vector<double>& sums) {
  const auto is_inside = [&](const cv::Point2d& at) {
    return at.x >= 0 && at.y >= 0 && at.x <= picture.cols - 1.001 && at.y <= picture.rows - 1.001;
  };
  if (!is_inside(start) || !is_inside(start + step * static_cast<double>(sums.size()))) {
    for (size_t k = 0; k < sums.size(); ++k) {
      const cv::Point2d at = start + step * static_cast<double>(k);
      sums[k] += Bilinear(picture, at.x, at.y);
    }
    return;
  }
  // Fixed point: a fifth of the time.
  constexpr double kOne = 1LL << 32;
  constexpr float kPart = 1.F / (1 << 16);
  auto x = static_cast<std::int64_t>(start.x * kOne);
  auto y = static_cast<std::int64_t>(start.y * kOne);
  const auto step_x = static_cast<std::int64_t>(step.x * kOne);
  const auto step_y = static_cast<std::int64_t>(step.y * kOne);
  const auto stride = static_cast<std::int64_t>(picture.step1());
  const auto* data = picture.ptr<float>();
  for (double& sum : sums) {
    const float* p = data + (y >> 32) * stride + (x >> 32);
    const float* q = p + stride;
    const auto right = static_cast<float>(static_cast<int>(x >> 16) & 0xffff) * kPart;
    const auto down = static_cast<float>(static_cast<int>(y >> 16) & 0xffff) * kPart;
    const float upper = p[0] + right * (p[1] - p[0]);
    sum += upper + down * (q[0] + right * (q[1] - q[0]) - upper);
    x += step_x;
    y += step_y;
  }
}

// The extreme that best is the one expected at `expected_mm`, and the weight of that; 0: none. One
// that lies closer to `other_mm`, where another edge is expected, is left to that.
struct Match {
  double outward_mm = 0;
  double weight = 0;
};
Match FindMatch(const std::vector<Extreme>& extremes, double expected_mm, double other_mm,
                double width_mm) {
  Match best;
  for (const Extreme& extreme : extremes) {
    const double off_mm = std::abs(extreme.outward_mm - expected_mm);
    if (off_mm > std::abs(extreme.outward_mm - other_mm)) continue;
    const double weight = std::exp(-0.5 * off_mm * off_mm / (width_mm * width_mm)) *
                          extreme.slope_per_mm / (extreme.slope_per_mm + kHalfWeight_per_mm);
    if (weight > best.weight) best = {extreme.outward_mm, weight};
  }
  return best;
}

// Unknowns: shift x, y (mm), turn (radians, counter-clockwise), insets of outline and holes (mm).
using Vector5 = Eigen::Matrix<double, 5, 1>;
using Matrix5 = Eigen::Matrix<double, 5, 5>;

struct Equations {
  Matrix5 normal = Matrix5::Identity() * 1e-6;
  Vector5 right = Vector5::Zero();
  double squares = 0;
  double weights = 0;

  void Add(const Vector5& row, double value, double residual, double weight) {
    normal += weight * row * row.transpose();
    right += weight * value * row;
    squares += weight * residual * residual;
    weights += weight;
  }
};

struct Estimate {
  Pose pose;
  double outline_inset_mm = kExpectedInset_mm;
  double hole_inset_mm = kExpectedInset_mm;
};

struct Fitter {
  const cv::Mat& picture;
  double px_per_mm;
  cv::Point2d origin_px;
  const WallView& wall;
  Estimate now;
  std::vector<double> profile{};
  Pose looked_from{};                          // the pose of `looked`...
  Turn looked_turn{0};                         // ...and its turn
  std::vector<std::vector<Extreme>> looked{};  // the extremes across each piece

  double Inset_mm(const EdgePiece& piece) const {
    return piece.is_hole ? now.hole_inset_mm : now.outline_inset_mm;
  }

  // `turn` is that of `now`, here and below.
  double Foot_mm(const EdgePiece& piece, const Turn& turn) const {
    return wall.FootOutward_mm(now.pose.center_mm + turn(piece.middle_mm),
                               turn(piece.middle_outward));
  }

  // How far the piece's edge has moved outward since Look().
  double Moved_mm(const EdgePiece& piece, const Turn& turn) const {
    const cv::Point2d moved = now.pose.center_mm + turn(piece.middle_mm) - looked_from.center_mm -
                              looked_turn(piece.middle_mm);
    return moved.dot(turn(piece.middle_outward));
  }

  void TakeProfile(const EdgePiece& piece, const Turn& turn, int count);
  std::vector<Extreme> Extremes(const EdgePiece& piece, double faintest_per_mm);
  void Look(const std::vector<EdgePiece>& pieces);
  void AddPiece(const EdgePiece& piece, const Turn& turn, const std::vector<Extreme>& extremes,
                double width_mm, Equations& equations) const;
  Equations Improve(const std::vector<EdgePiece>& pieces, double width_mm);
  bool IsSeen(const EdgePiece& piece);
};

// Mean brightness along the piece, from kProfileReach_mm inward, every kProfileStep_mm outward.
void Fitter::TakeProfile(const EdgePiece& piece, const Turn& turn, int count) {
  profile.assign(count, 0.0);
  for (size_t i = 0; i < piece.points_mm.size(); ++i) {
    const cv::Point2d outward = turn(piece.outward[i]) * px_per_mm;
    const cv::Point2d edge_px =
        (now.pose.center_mm + turn(piece.points_mm[i])) * px_per_mm + origin_px;
    AddProfile(picture, edge_px - outward * kProfileReach_mm, outward * kProfileStep_mm, profile);
  }
  for (double& value : profile) value /= static_cast<double>(piece.points_mm.size());
}

// Extremes of slope across the piece, from inward of its edge to outward of its wall's foot.
std::vector<Extreme> Fitter::Extremes(const EdgePiece& piece, double faintest_per_mm) {
  const Turn turn(now.pose.turn_deg);
  const double outermost_mm = std::max(0.0, Foot_mm(piece, turn));
  const int count = static_cast<int>((outermost_mm + 2 * kProfileReach_mm) / kProfileStep_mm) + 1;
  TakeProfile(piece, turn, count);
  std::vector<double> slope(count, 0.0);
  for (int k = 2; k + 2 < count; ++k) {
    // Differences over four steps and over two: a slope, smoothed over 0.15 mm.
    slope[k] = std::abs(profile[k + 2] - profile[k - 2] + profile[k + 1] - profile[k - 1]) /
               (6 * kProfileStep_mm);
  }
  std::vector<Extreme> extremes;
  for (int k = 3; k + 3 < count; ++k) {
    if (slope[k] < faintest_per_mm || slope[k] < slope[k - 1] || slope[k] <= slope[k + 1]) {
      continue;
    }
    const double bend = slope[k - 1] - 2 * slope[k] + slope[k + 1];
    const double shift = bend < 0 ? 0.5 * (slope[k - 1] - slope[k + 1]) / bend : 0;
    extremes.push_back({(k + shift) * kProfileStep_mm - kProfileReach_mm, slope[k]});
  }
  return extremes;
}

// Finds the extremes for the rounds to come, in which the pose moves little.
void Fitter::Look(const std::vector<EdgePiece>& pieces) {
  looked_from = now.pose;
  looked_turn = Turn(now.pose.turn_deg);
  looked.clear();
  for (const EdgePiece& piece : pieces) looked.push_back(Extremes(piece, kFaintest_per_mm));
}

void Fitter::AddPiece(const EdgePiece& piece, const Turn& turn,
                      const std::vector<Extreme>& extremes, double width_mm,
                      Equations& equations) const {
  const cv::Point2d outward = turn(piece.middle_outward);
  const cv::Point2d arm = turn(piece.middle_mm);
  Vector5 row;
  row << outward.x, outward.y, outward.dot({arm.y, -arm.x}), piece.is_hole ? 0.0 : -1.0,
      piece.is_hole ? -1.0 : 0.0;
  const double moved_mm = Moved_mm(piece, turn);
  const double foot_mm = Foot_mm(piece, turn);
  const bool foot_visible = foot_mm > kVisibleFoot_mm;
  // Edge and foot too close to be told apart: what is seen lies between the two.
  const double merged_mm = foot_mm > 0 && !foot_visible ? foot_mm / 2 : 0;
  const double expected_mm = merged_mm - Inset_mm(piece);
  const Match edge = FindMatch(extremes, moved_mm + expected_mm,
                               foot_visible ? moved_mm + foot_mm : kNowhere_mm, width_mm);
  const double edge_mm = edge.outward_mm - moved_mm;
  equations.Add(row, edge_mm - merged_mm, edge_mm - expected_mm, edge.weight * piece.length_mm);
  if (!foot_visible) return;
  const Match foot = FindMatch(extremes, moved_mm + foot_mm, moved_mm + expected_mm, width_mm);
  const double off_mm = foot.outward_mm - moved_mm - foot_mm;
  row.tail<2>().setZero();
  equations.Add(row, off_mm, off_mm, foot.weight * piece.length_mm);
}

// One round of least squares: moves `pose` and the insets.
Equations Fitter::Improve(const std::vector<EdgePiece>& pieces, double width_mm) {
  Equations equations;
  const Turn turn(now.pose.turn_deg);
  for (size_t i = 0; i < pieces.size(); ++i) {
    AddPiece(pieces[i], turn, looked[i], width_mm, equations);
  }
  for (const int i : {3, 4}) {
    // Known before: as good as 20 mm of edge that is located to the round's width.
    const double weight = 20 * width_mm * width_mm / (kInsetSd_mm * kInsetSd_mm);
    equations.normal(i, i) += weight;
    equations.right(i) += weight * kExpectedInset_mm;
  }
  const Vector5 step = equations.normal.ldlt().solve(equations.right);
  now.pose.center_mm += cv::Point2d(step[0], step[1]);
  now.pose.turn_deg += step[2] * 180 / CV_PI;
  now.outline_inset_mm = step[3];
  now.hole_inset_mm = step[4];
  return equations;
}

// Whether an edge lies where the fit has the piece's edge, or its wall's foot.
bool Fitter::IsSeen(const EdgePiece& piece) {
  const double foot_mm = Foot_mm(piece, Turn(now.pose.turn_deg));
  const auto extremes = Extremes(piece, kFaintestSeen_per_mm);
  return std::any_of(extremes.begin(), extremes.end(), [&](const Extreme& extreme) {
    return std::abs(extreme.outward_mm + Inset_mm(piece)) < kSeenWithin_mm ||
           (foot_mm > kVisibleFoot_mm && std::abs(extreme.outward_mm - foot_mm) < kSeenWithin_mm);
  });
}

// Shares of the outline, and of the worst hole, that are seen. Long pieces: texture that is not
// parallel to the edge averages out along them.
void CountSeen(const CouponDescription& coupon, Fitter& fitter, EdgeFit& fit) {
  const size_t corners = coupon.outline_mm.size();
  double outline_mm = 0;
  double outline_seen_mm = 0;
  std::vector<double> hole_mm(coupon.holes.size(), 0.0);
  std::vector<double> hole_seen_mm(coupon.holes.size(), 0.0);
  for (const EdgePiece& piece : CutEdges(coupon, 8, 0.2)) {
    double& whole = piece.is_hole ? hole_mm[piece.side - corners] : outline_mm;
    double& seen = piece.is_hole ? hole_seen_mm[piece.side - corners] : outline_seen_mm;
    whole += piece.length_mm;
    if (fitter.IsSeen(piece)) seen += piece.length_mm;
  }
  fit.outline_seen = outline_seen_mm / outline_mm;
  fit.holes_seen = coupon.holes.empty() ? 0 : 1;
  for (size_t i = 0; i < hole_mm.size(); ++i) {
    fit.holes_seen = std::min(fit.holes_seen, hole_seen_mm[i] / hole_mm[i]);
  }
}

}  // namespace

EdgeFit FitEdges(const cv::Mat& picture, double px_per_mm, const cv::Point2d& origin_px,
                 const CouponDescription& coupon, const WallView& wall,
                 const std::vector<Pose>& starts) {
  constexpr std::array<double, 6> kWidths_mm = {0.2, 0.14, 0.1, 0.07, 0.07, 0.07};
  constexpr std::array<double, 3> kLastWidths_mm = {0.1, 0.07, 0.07};
  constexpr int kMostLooks = 3;
  constexpr double kSettled_mm = 0.002;
  const auto pieces = CutEdges(coupon, 2, 0.1);
  Fitter fitter{picture, px_per_mm, origin_px, wall, {starts.front()}};
  fitter.Look(pieces);
  Estimate best;
  double most_matched_mm = -1;
  Equations last;
  for (const Pose& start : starts) {
    fitter.now = {start};
    for (const double width_mm : kWidths_mm) last = fitter.Improve(pieces, width_mm);
    if (last.weights <= most_matched_mm) continue;
    most_matched_mm = last.weights;
    best = fitter.now;
  }
  fitter.now = best;
  // Extremes are exact where they were looked for: again, as long as that is elsewhere.
  for (int look = 0; look < kMostLooks; ++look) {
    fitter.Look(pieces);
    for (const double width_mm : kLastWidths_mm) last = fitter.Improve(pieces, width_mm);
    if (cv::norm(fitter.now.pose.center_mm - fitter.looked_from.center_mm) < kSettled_mm) break;
  }

  EdgeFit fit;
  fit.pose = fitter.now.pose;
  fit.outline_inset_mm = fitter.now.outline_inset_mm;
  fit.hole_inset_mm = fitter.now.hole_inset_mm;
  fit.residual_mm = last.weights > 0 ? std::sqrt(last.squares / last.weights) : 0;
  fit.matched_mm = last.weights;
  const Matrix5 covariance =
      last.normal.inverse() * kCorrelated_mm * std::pow(std::max(fit.residual_mm, 0.01), 2);
  fit.center_sd_mm = std::sqrt(std::max(covariance(0, 0), covariance(1, 1))) + kCommon_mm;
  fit.turn_sd_deg = std::sqrt(covariance(2, 2)) * 180 / CV_PI + kCommon_deg;
  CountSeen(coupon, fitter, fit);
  return fit;
}

}  // namespace laygauge
