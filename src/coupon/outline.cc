#include "coupon/outline.h"

#include <algorithm>
#include <cmath>

namespace laygauge {
namespace {

constexpr double kCorner_mm = 0.6;
constexpr double kSame_mm = 0.2;

// Twice the signed area; positive: the corners run clockwise as seen (y down).
double SignedArea(const std::vector<cv::Point2d>& polygon) {
  double sum = 0;
  for (size_t i = 0; i < polygon.size(); ++i) {
    const cv::Point2d& a = polygon[i];
    const cv::Point2d& b = polygon[(i + 1) % polygon.size()];
    sum += a.x * b.y - a.y * b.x;
  }
  return sum;
}

void CutSide(const cv::Point2d& from, const cv::Point2d& to, const cv::Point2d& outward, int side,
             double piece_mm, double step_mm, std::vector<EdgePiece>& pieces) {
  const double length_mm = cv::norm(to - from);
  const double corner_mm = std::min(kCorner_mm, 0.2 * length_mm);
  const double used_mm = length_mm - 2 * corner_mm;
  const int count = std::max(1, static_cast<int>(std::lround(used_mm / piece_mm)));
  const cv::Point2d along = (to - from) / length_mm;
  for (int i = 0; i < count; ++i) {
    const double each_mm = used_mm / count;
    const double start_mm = corner_mm + i * each_mm;
    const int points = std::max(2, static_cast<int>(std::lround(each_mm / step_mm)));
    EdgePiece piece;
    piece.side = side;
    for (int k = 0; k < points; ++k) {
      piece.points_mm.push_back(from + along * (start_mm + (k + 0.5) * each_mm / points));
    }
    piece.outward.assign(points, outward);
    piece.middle_mm = from + along * (start_mm + each_mm / 2);
    piece.middle_outward = outward;
    piece.length_mm = each_mm;
    pieces.push_back(std::move(piece));
  }
}

void CutHole(const Hole& hole, int side, double piece_mm, double step_mm,
             std::vector<EdgePiece>& pieces) {
  const double radius_mm = hole.diameter_mm / 2;
  const double round_mm = 2 * CV_PI * radius_mm;
  // A piece of a small circle still spans little enough of it to have one direction.
  const int count = std::max(8, static_cast<int>(std::lround(round_mm / piece_mm)));
  const int points = std::max(3, static_cast<int>(std::lround(round_mm / count / step_mm)));
  const auto direction = [](double angle) { return cv::Point2d(std::cos(angle), std::sin(angle)); };
  const cv::Point2d center(hole.x_mm, hole.y_mm);
  for (int i = 0; i < count; ++i) {
    EdgePiece piece;
    piece.side = side;
    piece.is_hole = true;
    piece.length_mm = round_mm / count;
    for (int k = 0; k < points; ++k) {
      const cv::Point2d radial = direction(2 * CV_PI * (i + (k + 0.5) / points) / count);
      piece.points_mm.push_back(center + radial * radius_mm);
      piece.outward.push_back(-radial);
    }
    const cv::Point2d radial = direction(2 * CV_PI * (i + 0.5) / count);
    piece.middle_mm = center + radial * radius_mm;
    piece.middle_outward = -radial;
    pieces.push_back(std::move(piece));
  }
}

}  // namespace

std::vector<EdgePiece> CutEdges(const CouponDescription& coupon, double piece_mm, double step_mm) {
  std::vector<EdgePiece> pieces;
  const auto& outline = coupon.outline_mm;
  const double sign = SignedArea(outline) > 0 ? 1 : -1;
  for (size_t i = 0; i < outline.size(); ++i) {
    const cv::Point2d& from = outline[i];
    const cv::Point2d& to = outline[(i + 1) % outline.size()];
    const cv::Point2d along = (to - from) / cv::norm(to - from);
    CutSide(from, to, sign * cv::Point2d(along.y, -along.x), static_cast<int>(i), piece_mm, step_mm,
            pieces);
  }
  int side = static_cast<int>(outline.size());
  for (const Hole& hole : coupon.holes) CutHole(hole, side++, piece_mm, step_mm, pieces);
  return pieces;
}

Turn::Turn(double turn_deg)
    : cos_(std::cos(turn_deg * CV_PI / 180)), sin_(std::sin(turn_deg * CV_PI / 180)) {}

cv::Point2d Turned(const cv::Point2d& point, double turn_deg) { return Turn(turn_deg)(point); }

bool OutlineLooksTheSameTurned(const CouponDescription& coupon, double turn_deg) {
  const auto& outline = coupon.outline_mm;
  return std::all_of(outline.begin(), outline.end(), [&](const cv::Point2d& corner) {
    const cv::Point2d turned = Turned(corner, turn_deg);
    return std::any_of(outline.begin(), outline.end(), [&](const cv::Point2d& other) {
      return cv::norm(other - turned) < kSame_mm;
    });
  });
}

bool LooksTheSameTurned(const CouponDescription& coupon, double turn_deg) {
  return OutlineLooksTheSameTurned(coupon, turn_deg) &&
         std::all_of(coupon.holes.begin(), coupon.holes.end(), [&](const Hole& hole) {
           const cv::Point2d turned = Turned({hole.x_mm, hole.y_mm}, turn_deg);
           return std::any_of(coupon.holes.begin(), coupon.holes.end(), [&](const Hole& other) {
             return cv::norm(cv::Point2d(other.x_mm, other.y_mm) - turned) < kSame_mm &&
                    std::abs(other.diameter_mm - hole.diameter_mm) < kSame_mm;
           });
         });
}

}  // namespace laygauge
