#include "coupon/locate.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
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

// Half the side of the square, round the well's centre, in which the coupon's edges can lie.
double HalfSide_mm(const CouponDescription& coupon, const LocateOptions& options) {
  constexpr double kBeyond_mm = 1.5;  // walls' feet, profiles
  double furthest_mm = 0;
  for (const double quarter_deg : {0.0, 90.0}) {
    for (const double turn_deg : {-options.turn_reach_deg - 1, 0.0, options.turn_reach_deg + 1}) {
      for (const cv::Point2d& corner : coupon.outline_mm) {
        const cv::Point2d turned = Turned(corner, quarter_deg + turn_deg);
        furthest_mm = std::max({furthest_mm, std::abs(turned.x), std::abs(turned.y)});
      }
    }
  }
  return furthest_mm + options.reach_mm + kBeyond_mm;
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

// The quarter turns at which the drawing looks new.
std::vector<double> QuarterTurns(const CouponDescription& coupon) {
  std::vector<double> turns = {0};
  if (!LooksTheSameTurned(coupon, 90)) {
    turns.push_back(90);
    if (!LooksTheSameTurned(coupon, 180)) turns.insert(turns.end(), {180, 270});
  }
  return turns;
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

// FitEdges from `start`, and from where the coupon lies if `start` took a narrow visible wall's
// foot for its edge: that much further from the camera. The one that more edges agree with.
EdgeFit FitBoth(const WellPicture& picture, const CouponDescription& coupon, const WallView& wall,
                const Pose& start) {
  const auto fit = [&](const Pose& pose) {
    return FitEdges(picture.brightness, kFine_px_per_mm, picture.origin_px, coupon, wall, pose);
  };
  const EdgeFit first = fit(start);
  const cv::Point2d foot_mm = wall.offset_mm - start.center_mm * wall.per_mm;
  const double length_mm = cv::norm(foot_mm);
  constexpr double kNarrowest_mm = 0.05;
  constexpr double kWidest_mm = 0.5;  // wider, edge and foot are told apart from the start
  if (length_mm < kNarrowest_mm || length_mm > kWidest_mm) return first;
  const EdgeFit second = fit({start.center_mm - foot_mm * 0.5, start.turn_deg});
  return second.matched_mm > first.matched_mm ? second : first;
}

// Coarse to fine: the few best of all turns and quarters on the reduced picture, then those on the
// full one, then the best of these to a fraction of a pixel.
Candidate Search(const WellPicture& picture, const cv::Mat& reduced,
                 const CouponDescription& coupon, const WallView& wall,
                 const LocateOptions& options) {
  constexpr size_t kStarts = 3;
  const GradientPicture coarse =
      MakeGradient(reduced, kFine_px_per_mm / kReduction,
                   {(reduced.cols - 1) / 2.0, (reduced.rows - 1) / 2.0}, 0.8);
  const auto coarse_pieces = CutEdges(coupon, 6, 0.8);
  std::vector<ScoredPose> starts;
  for (const double quarter_deg : QuarterTurns(coupon)) {
    PoseGrid grid;
    grid.middle.turn_deg = quarter_deg;
    grid.reach_mm = options.reach_mm;
    grid.turn_reach_deg = options.turn_reach_deg;
    grid.turn_step_deg = 1;
    const auto found = SearchPoses(coarse, coarse_pieces, wall, grid);
    starts.insert(starts.end(), found.begin(), found.begin() + std::min<size_t>(2, found.size()));
  }
  std::sort(starts.begin(), starts.end(), IsBetter);

  const GradientPicture fine =
      MakeGradient(picture.brightness, kFine_px_per_mm, picture.origin_px, 1.0);
  const auto fine_pieces = CutEdges(coupon, 4, 0.3);
  ScoredPose best;
  best.score = -1;
  for (size_t i = 0; i < std::min(kStarts, starts.size()); ++i) {
    PoseGrid near;
    near.middle = starts[i].pose;
    near.reach_mm = 0.7;
    near.turn_reach_deg = 1.0;
    near.turn_step_deg = 0.25;
    const ScoredPose found = SearchPoses(fine, fine_pieces, wall, near).front();
    if (found.score > best.score) best = found;
  }
  Candidate candidate;
  candidate.fit = FitBoth(picture, coupon, wall, best.pose);
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
  const WellPicture picture =
      TakePicture(photo, view, light, well, coupon.thickness_mm, HalfSide_mm(coupon, options));
  cv::Mat reduced;
  cv::resize(picture.brightness, reduced, {}, 1.0 / kReduction, 1.0 / kReduction, cv::INTER_AREA);
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
