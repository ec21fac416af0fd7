#include "coupon/find_pose.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <map>
#include <vector>

namespace laygauge {
namespace {

// How far off the coupon's outline edges are looked for: walls' feet, profiles.
constexpr double kBeyond_mm = 1.5;

// Half the side of the square round the coupon's origin that holds its outline, turned by up to
// `turn_reach_deg` and by whole quarters.
double HalfSide_mm(const CouponDescription& coupon, double turn_reach_deg) {
  double furthest_mm = 0;
  for (const double turn_deg : {-turn_reach_deg, 0.0, turn_reach_deg}) {
    for (const cv::Point2d& corner : coupon.outline_mm) {
      const cv::Point2d turned = Turned(corner, turn_deg);
      furthest_mm = std::max({furthest_mm, std::abs(turned.x), std::abs(turned.y)});
    }
  }
  return furthest_mm;
}

double NormalisedTurn(double turn_deg) { return std::remainder(turn_deg, 360); }

// The quarter turns at which the drawing looks new: each of `outline_deg` plus each of `holes_deg`.
// After the latter the outline looks the same.
struct QuarterTurns {
  std::vector<double> outline_deg = {0};
  std::vector<double> holes_deg = {0};
};

QuarterTurns QuarterTurnsOf(const CouponDescription& coupon) {
  if (LooksTheSameTurned(coupon, 90)) return {};
  const bool half_is_new = !LooksTheSameTurned(coupon, 180);
  if (OutlineLooksTheSameTurned(coupon, 90)) {
    return {{0}, half_is_new ? std::vector<double>{0, 90, 180, 270} : std::vector<double>{0, 90}};
  }
  if (OutlineLooksTheSameTurned(coupon, 180)) {
    return {{0, 90}, half_is_new ? std::vector<double>{0, 180} : std::vector<double>{0}};
  }
  return {{0, 90, 180, 270}, {0}};
}

bool IsBetter(const ScoredPose& a, const ScoredPose& b) { return a.score > b.score; }

// How strongly the holes' edges show where the drawing has them, in one pose: 0..1.
double HoleContrast(const GradientPicture& fine, const CouponDescription& coupon,
                    const WallView& wall, const Pose& pose) {
  auto pieces = CutEdges(coupon, 4, 0.3);
  std::erase_if(pieces, [](const EdgePiece& piece) { return !piece.is_hole; });
  PoseGrid grid;
  grid.middle = pose;
  grid.reach_mm = 0.2;
  grid.turn_reach_deg = 0;
  return SearchPoses(fine, pieces, wall, grid).front().score;
}

// Whether the holes lie rather where they would with the top side down.
bool LooksUpsideDown(const GradientPicture& fine, const CouponDescription& coupon,
                     const WallView& wall, const Pose& pose) {
  CouponDescription mirrored = coupon;
  for (cv::Point2d& corner : mirrored.outline_mm) corner.x = -corner.x;
  for (Hole& hole : mirrored.holes) hole.x_mm = -hole.x_mm;
  const double as_drawn = HoleContrast(fine, coupon, wall, pose);
  return std::ranges::any_of(std::array{0.0, 90.0, 180.0, 270.0}, [&](double quarter_deg) {
    const Pose turned{pose.center_mm, pose.turn_deg + quarter_deg};
    return HoleContrast(fine, mirrored, wall, turned) > as_drawn + 0.02;
  });
}

// `found`, and where the coupon lies if there a narrow visible wall's foot was taken for its edge:
// that much further from the camera.
std::vector<Pose> StartsOfFit(const WallView& wall, const Pose& found) {
  const cv::Point2d foot_mm = wall.offset_mm - found.center_mm * wall.per_mm;
  const double length_mm = cv::norm(foot_mm);
  constexpr double kNarrowest_mm = 0.05;
  constexpr double kWidest_mm = 0.5;  // wider, edge and foot are told apart from the start
  if (length_mm < kNarrowest_mm || length_mm > kWidest_mm) return {found};
  return {found, {found.center_mm - foot_mm * 0.5, found.turn_deg}};
}

// The few best poses of the reduced picture, at most two of a quarter.
std::vector<ScoredPose> FindStarts(const cv::Mat& reduced, const CouponDescription& coupon,
                                   const QuarterTurns& quarters, const WallView& wall,
                                   const LocateOptions& options) {
  constexpr size_t kStarts = 3;
  constexpr int kOfQuarter = 2;
  const GradientPicture coarse =
      MakeGradient(reduced, kFine_px_per_mm / kReduction,
                   {(reduced.cols - 1) / 2.0, (reduced.rows - 1) / 2.0}, 0.8);
  const auto pieces = CutEdges(coupon, 6, 0.8);
  std::vector<ScoredPose> starts;
  for (const double outline_deg : quarters.outline_deg) {
    PoseGrid grid;
    grid.middle.turn_deg = outline_deg;
    grid.reach_mm = options.reach_mm;
    grid.turn_reach_deg = options.turn_reach_deg;
    grid.turn_step_deg = 1;
    grid.same_outline_deg = quarters.holes_deg;
    std::map<long, int> taken;
    for (const ScoredPose& found : SearchPoses(coarse, pieces, wall, grid)) {
      if (taken[std::lround(found.pose.turn_deg / 90)]++ < kOfQuarter) starts.push_back(found);
    }
  }
  std::sort(starts.begin(), starts.end(), IsBetter);
  starts.resize(std::min(kStarts, starts.size()));
  return starts;
}

constexpr double kNearReach_mm = 0.7;
constexpr double kNearTurnReach_deg = 1;

// The full picture's gradient where a coupon lies that is near one of the starts.
GradientPicture GradientNear(const WellPicture& picture, const CouponDescription& coupon,
                             const std::vector<ScoredPose>& starts) {
  cv::Rect part;
  for (const ScoredPose& start : starts) {
    const double turn_deg = std::abs(std::remainder(start.pose.turn_deg, 90));
    const double half_side_mm =
        HalfSide_mm(coupon, turn_deg + 2 * kNearTurnReach_deg) + kNearReach_mm + kBeyond_mm;
    const cv::Point2d half(half_side_mm, half_side_mm);
    const cv::Point2d center_mm = start.pose.center_mm;
    part |= cv::Rect((center_mm - half) * kFine_px_per_mm + picture.origin_px,
                     (center_mm + half) * kFine_px_per_mm + picture.origin_px);
  }
  part &= cv::Rect({0, 0}, picture.brightness.size());
  return MakeGradient(picture.brightness(part), kFine_px_per_mm,
                      picture.origin_px - cv::Point2d(part.tl()), 1.0);
}

// How far `turn_deg` is off the grid's middle turn in any of its quarters.
double OffMiddle_deg(const PoseGrid& grid, double turn_deg) {
  double least_deg = 360;
  for (const double quarter_deg : grid.same_outline_deg) {
    const double off_deg = NormalisedTurn(turn_deg - grid.middle.turn_deg - quarter_deg);
    least_deg = std::min(least_deg, std::abs(off_deg));
  }
  return least_deg;
}

// Whether a search from `pose` would find what that of the grid has found: it is the next on the
// reduced picture.
bool IsSearched(const PoseGrid& grid, const Pose& pose) {
  constexpr double kNext_mm = 1.1 * kReduction / kFine_px_per_mm;
  const cv::Point2d off_mm = pose.center_mm - grid.middle.center_mm;
  return std::max(std::abs(off_mm.x), std::abs(off_mm.y)) <= kNext_mm &&
         OffMiddle_deg(grid, pose.turn_deg) <= grid.turn_reach_deg;
}

// The best pose of the full picture near the starts, in any of their quarters.
Pose SearchNearStarts(const GradientPicture& fine, const CouponDescription& coupon,
                      const QuarterTurns& quarters, const WallView& wall,
                      const std::vector<ScoredPose>& starts) {
  constexpr int kMostRounds = 3;
  const auto pieces = CutEdges(coupon, 4, 0.3);
  std::vector<PoseGrid> searched;
  ScoredPose best;
  best.score = -1;
  for (const ScoredPose& start : starts) {
    ScoredPose found = start;
    // A best turn at the end of those that were tried need not be the best.
    for (int round = 0; round < kMostRounds; ++round) {
      const auto covers = [&](const PoseGrid& grid) { return IsSearched(grid, found.pose); };
      if (round == 0 && std::ranges::any_of(searched, covers)) break;
      PoseGrid near;
      near.middle = found.pose;
      near.reach_mm = kNearReach_mm;
      near.turn_reach_deg = kNearTurnReach_deg;
      near.turn_step_deg = 0.25;
      near.same_outline_deg = quarters.holes_deg;
      found = SearchPoses(fine, pieces, wall, near).front();
      if (found.score > best.score) best = found;
      searched.push_back(near);
      if (OffMiddle_deg(near, found.pose.turn_deg) < near.turn_reach_deg - near.turn_step_deg / 2) {
        break;
      }
    }
  }
  return best.pose;
}

}  // namespace

double HalfSideOfWell_mm(const CouponDescription& coupon, const LocateOptions& options) {
  return HalfSide_mm(coupon, options.turn_reach_deg + 1) + options.reach_mm + kBeyond_mm;
}

FoundPose FindPose(const WellPicture& picture, const CouponDescription& coupon,
                   const WallView& wall, const LocateOptions& options) {
  const QuarterTurns quarters = QuarterTurnsOf(coupon);
  const auto starts = FindStarts(picture.reduced, coupon, quarters, wall, options);
  const GradientPicture fine = GradientNear(picture, coupon, starts);
  const Pose near = SearchNearStarts(fine, coupon, quarters, wall, starts);
  FoundPose found;
  found.fit = FitEdges(picture.brightness, kFine_px_per_mm, picture.origin_px, coupon, wall,
                       StartsOfFit(wall, near));
  found.upside_down = !coupon.holes.empty() && LooksUpsideDown(fine, coupon, wall, found.fit.pose);
  return found;
}

}  // namespace laygauge
