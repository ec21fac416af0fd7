#include "coupon/locate.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <map>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/statistics.h"
#include "coupon/edge_fit.h"
#include "coupon/edge_search.h"
#include "coupon/rectify.h"
#include "photo/srgb.h"

namespace laygauge {
namespace {

constexpr double kFine_px_per_mm = 10;
constexpr int kReduction = 4;  // coarse: 2.5 px/mm

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

// The well in the plane of the coupon's top: encoded brightness over the paper's.
struct WellPicture {
  cv::Mat brightness;
  cv::Point2d origin_px;
};

WellPicture TakePicture(const Photo& photo, const View& view, const Light& light, const Well& well,
                        double height_mm, double half_side_mm) {
  PlaneFrame frame;
  const int side =
      kReduction * static_cast<int>(std::ceil(2 * half_side_mm * kFine_px_per_mm / kReduction));
  frame.size_px = {side, side};
  frame.px_per_mm = kFine_px_per_mm;
  frame.origin_px = {(side - 1) / 2.0, (side - 1) / 2.0};
  frame.center_mm = {well.x_mm, well.y_mm};
  frame.height_mm = height_mm;
  WellPicture picture;
  picture.origin_px = frame.origin_px;
  picture.brightness = RectifyEncoded(photo, view, frame);
  picture.brightness *= 1 / SrgbFromLinear(light.At(well.x_mm, well.y_mm));
  return picture;
}

WallView ViewOfWalls(const View& view, const Well& well, double height_mm) {
  const Eigen::Vector3d eye = -view.pose.camera_from_sheet_rotation.transpose() *
                              view.pose.camera_from_sheet_translation_mm;
  WallView wall;
  wall.per_mm = height_mm / -eye.z();  // the sheet's z points into the paper
  wall.offset_mm =
      (cv::Point2d(eye.x(), eye.y()) - cv::Point2d(well.x_mm, well.y_mm)) * wall.per_mm;
  return wall;
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

// Bare paper or an evenly printed floor: nothing within the well's frame stands out.
bool LooksBare(const cv::Mat& coarse, double px_per_mm, const Well& well, double floor,
               double tolerance, double share) {
  constexpr double kFrame_mm = 1.5;  // the printed frame, and neighbours' shadows
  const int half_x = static_cast<int>((well.width_mm / 2 - kFrame_mm) * px_per_mm);
  const int half_y = static_cast<int>((well.height_mm / 2 - kFrame_mm) * px_per_mm);
  const cv::Rect whole({0, 0}, coarse.size());
  const cv::Rect inside =
      cv::Rect(coarse.cols / 2 - half_x, coarse.rows / 2 - half_y, 2 * half_x, 2 * half_y) & whole;
  std::vector<double> values;
  for (int y = inside.y; y < inside.y + inside.height; ++y) {
    const float* row = coarse.ptr<float>(y);
    values.insert(values.end(), row + inside.x, row + inside.x + inside.width);
  }
  if (values.empty()) return false;
  const double middle = Median(values);
  const auto near = std::count_if(values.begin(), values.end(), [&](double value) {
    return std::abs(value / middle - 1) < tolerance;
  });
  return std::abs(middle / floor - 1) < 0.15 &&
         static_cast<double>(near) >= share * static_cast<double>(values.size());
}

bool IsWholeInPhoto(const Photo& photo, const View& view, const CouponDescription& coupon,
                    const Placement& placement) {
  return std::all_of(
      coupon.outline_mm.begin(), coupon.outline_mm.end(), [&](const cv::Point2d& corner) {
        const cv::Point2d at = cv::Point2d(placement.center_x_mm, placement.center_y_mm) +
                               Turned(corner, placement.turn_deg);
        return IsInPhoto(photo, view, at, coupon.thickness_mm, 2);
      });
}

struct Candidate {
  EdgeFit fit;
  bool upside_down = false;
};

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

// Coarse to fine: the few best of all turns and quarters on the reduced picture, then the best
// near these on the full one, then that to a fraction of a pixel.
Candidate Search(const WellPicture& picture, const cv::Mat& reduced,
                 const CouponDescription& coupon, const WallView& wall,
                 const LocateOptions& options) {
  const QuarterTurns quarters = QuarterTurnsOf(coupon);
  const auto starts = FindStarts(reduced, coupon, quarters, wall, options);
  const GradientPicture fine = GradientNear(picture, coupon, starts);
  const Pose near = SearchNearStarts(fine, coupon, quarters, wall, starts);
  Candidate candidate;
  candidate.fit = FitEdges(picture.brightness, kFine_px_per_mm, picture.origin_px, coupon, wall,
                           StartsOfFit(wall, near));
  candidate.upside_down =
      !coupon.holes.empty() && LooksUpsideDown(fine, coupon, wall, candidate.fit.pose);
  return candidate;
}

WellFinding Unclear(std::string reason) {
  WellFinding finding;
  finding.reason = std::move(reason);
  return finding;
}

Placement PlacementOf(const EdgeFit& fit, const Well& well, const CouponDescription& coupon) {
  Placement placement;
  placement.center_x_mm = well.x_mm + fit.pose.center_mm.x;
  placement.center_y_mm = well.y_mm + fit.pose.center_mm.y;
  placement.turn_deg = NormalisedTurn(fit.pose.turn_deg);
  placement.center_sd_mm = fit.center_sd_mm;
  placement.turn_sd_deg = fit.turn_sd_deg;
  placement.outline_seen = fit.outline_seen;
  placement.holes_seen = fit.holes_seen;
  placement.quality =
      coupon.holes.empty() ? fit.outline_seen : std::min(fit.outline_seen, fit.holes_seen);
  return placement;
}

// Holes that are all there bear out an outline of which a side drowns in a shadow.
bool IsOutlineSeen(const EdgeFit& fit, const LocateOptions& options) {
  constexpr double kSurelyHoles = 0.9;
  constexpr double kLessOutline = 0.7;
  return fit.outline_seen >=
         options.fewest_outline * (fit.holes_seen >= kSurelyHoles ? kLessOutline : 1);
}

WellFinding Found(const Placement& placement, const CouponDescription& coupon) {
  WellFinding finding;
  finding.state = WellState::kCoupon;
  finding.placement = placement;
  const double quarters = std::round(placement.turn_deg / 90);
  if (quarters != 0 && !LooksTheSameTurned(coupon, 90 * quarters)) {
    finding.reason = fmt::format("lies turned by {:.0f} degrees in its well", 90 * quarters);
  }
  return finding;
}

}  // namespace

void LocateOptions::Check() const {
  const auto require = [](const char* field, double value, double low, double high) {
    if (!(value >= low && value <= high)) {
      throw BadOption(
          fmt::format("LocateOptions.{} is {}; {} to {} is allowed", field, value, low, high));
    }
  };
  require("reach_mm", reach_mm, 0.4, 20);
  require("turn_reach_deg", turn_reach_deg, 0, 45);
  require("fewest_outline", fewest_outline, 0, 1);
  require("fewest_holes", fewest_holes, 0, 1);
}

WellFinding LocateCoupon(const Photo& photo, const View& view, const Light& light,
                         const SheetDescription& sheet, const Well& well,
                         const CouponDescription& coupon, const LocateOptions& options) {
  options.Check();
  if (!IsInPhoto(photo, view, {well.x_mm, well.y_mm}, 0, 0)) {
    return Unclear(
        fmt::format("{}: this well is not in the photo; frame the whole sheet", well.name));
  }
  const double half_side_mm =
      HalfSide_mm(coupon, options.turn_reach_deg + 1) + options.reach_mm + kBeyond_mm;
  const WellPicture picture =
      TakePicture(photo, view, light, well, coupon.thickness_mm, half_side_mm);
  cv::Mat reduced;
  cv::resize(picture.brightness, reduced, {}, 0.5, 0.5, cv::INTER_AREA);
  cv::resize(reduced, reduced, {}, 0.5, 0.5, cv::INTER_AREA);  // OpenCV is fast in halves only
  static_assert(kReduction == 4);
  const double coarse_px_per_mm = kFine_px_per_mm / kReduction;
  const double floor = SrgbFromLinear(sheet.well_floor_reflectance);
  if (LooksBare(reduced, coarse_px_per_mm, well, floor, 0.04, 0.99)) {
    return {WellState::kEmpty, std::nullopt, ""};
  }
  const Candidate best =
      Search(picture, reduced, coupon, ViewOfWalls(view, well, coupon.thickness_mm), options);
  const Placement placement = PlacementOf(best.fit, well, coupon);
  const bool outline_seen = IsOutlineSeen(best.fit, options);
  if (!outline_seen && LooksBare(reduced, coarse_px_per_mm, well, floor, 0.08, 0.85)) {
    return {WellState::kEmpty, std::nullopt, ""};
  }
  if (!IsWholeInPhoto(photo, view, coupon, placement)) {
    return Unclear(
        fmt::format("{}: the coupon is not wholly in the photo; frame the whole sheet", well.name));
  }
  if (!outline_seen) {
    return Unclear(fmt::format(
        "{}: something lies here, but only {:.0f} % of the outline of {} is to be seen in it; lay "
        "the coupon flat within the well's frame, with nothing on it",
        well.name, 100 * best.fit.outline_seen, coupon.name));
  }
  if (!coupon.holes.empty() && (best.fit.holes_seen < options.fewest_holes || best.upside_down)) {
    return Unclear(fmt::format(
        "{}: the outline of a coupon was found, but its holes are not where the drawing of {} has "
        "them; lay that coupon, top side up",
        well.name, coupon.name));
  }
  return Found(placement, coupon);
}

}  // namespace laygauge
