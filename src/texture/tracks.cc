#include "texture/tracks.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <optional>

#include "base/error.h"
#include "texture/line_sums.h"

namespace laygauge {
namespace {

constexpr double kClip = 2.5;        // standard deviations
constexpr double kUnits = 64;        // of the whole-number image, one standard deviation
constexpr double kTurnDeg = 4;       // a followed track may turn by, a step
constexpr double kSwerveCost = 0.4;  // standard deviations that a turn or a sidestep must gain
constexpr double kLeastSeen = 0.5;   // share of a piece on the searched top

cv::Mat WholeNumbers(const TopView& view, double flatten_mm) {
  const cv::Mat flat = RemoveAlongRows(view.relative, view, flatten_mm);
  const double deviation = SpreadOn(flat, view.searched, 0.5);
  cv::Mat image;
  if (deviation <= 0) {
    return cv::Mat::zeros(flat.size(), CV_16SC1);
  }
  const cv::Mat scaled = flat / deviation;
  cv::Mat(cv::max(cv::min(scaled, kClip), -kClip)).convertTo(image, CV_16SC1, kUnits);
  return image;
}

std::vector<double> Directions(const TrackOptions& options) {
  constexpr double kSideMm = 0.2;  // between the ends of neighbouring directions
  const double step = kSideMm / (options.detect_length_mm / 2) * 180 / std::numbers::pi;
  const double span = 180 - 2 * options.min_angle_deg;
  const int steps = static_cast<int>(std::ceil(span / step));
  std::vector<double> directions;
  for (int i = 0; i <= steps; ++i) {
    directions.push_back(options.min_angle_deg + span * i / steps);
  }
  return directions;
}

// A piece of track: its centre, its direction and how far it stands out.
struct Piece {
  cv::Point2d centre;
  double direction_deg = 0;
  double sigmas = 0;  // signed
  bool seen = true;   // false: behind a hole or another track
};

// The image, of which tracks are wiped out as they are found.
class Follower {
 public:
  Follower(const TopView& view, const TrackOptions& options)
      : view_(view),
        options_(options),
        image_(WholeNumbers(view, options.flatten_mm)),
        seen_(view.searched.clone()),
        sums_(SumAlongLines(image_, view.searched, Directions(options),
                            options.detect_length_mm * view.px_per_mm, options.min_sigmas)) {}

  std::vector<Track> FindAll() {
    std::vector<Track> tracks;
    for (const LineHit& hit : sums_.hits) {
      const Piece seed{cv::Point2d(hit.centre),
                       sums_.directions_deg[static_cast<size_t>(hit.direction)]};
      const std::optional<double> sigmas = Sigmas(seed, options_.detect_length_mm);
      if (!sigmas || std::abs(*sigmas) < options_.min_sigmas) {
        continue;
      }
      Track track = Follow(seed, *sigmas < 0 ? -1 : 1);
      track.sigmas = std::abs(*sigmas);
      Wipe(track, seed);
      if (track.length_mm >= options_.min_length_mm) {
        tracks.push_back(std::move(track));
      }
    }
    return tracks;
  }

 private:
  // None: too little of the piece is on the searched top.
  [[nodiscard]] std::optional<double> Sigmas(const Piece& piece, double length_mm) const {
    const auto offsets = LineOffsets(piece.direction_deg, length_mm * view_.px_per_mm);
    const cv::Point centre(cvRound(piece.centre.x), cvRound(piece.centre.y));
    const cv::Rect frame({0, 0}, image_.size());
    int sum = 0;
    int seen = 0;
    for (const cv::Point& offset : offsets) {
      const cv::Point p = centre + offset;
      if (frame.contains(p) && seen_.at<std::uint8_t>(p) != 0) {
        sum += image_.at<std::int16_t>(p);
        ++seen;
      }
    }
    const double spread = sums_.SpreadAt(piece.direction_deg);
    if (seen < kLeastSeen * static_cast<double>(offsets.size()) || spread <= 0) {
      return std::nullopt;
    }
    return sum / (spread * std::sqrt(seen));
  }

  // The best continuation of `last` one step on, forwards (+1) or backwards (-1).
  [[nodiscard]] Piece Next(const Piece& last, int way, int sign) const {
    const double radians = last.direction_deg * std::numbers::pi / 180;
    const cv::Point2d along(std::cos(radians), -std::sin(radians));
    const cv::Point2d aside(-along.y, along.x);
    const cv::Point2d ahead = last.centre + along * (way * options_.step_mm * view_.px_per_mm);
    Piece best{ahead, last.direction_deg, 0, false};
    double best_worth = -1e9;
    for (const int side : {0, -1, 1}) {
      for (const int turn : {0, -1, 1}) {
        Piece piece{ahead + aside * side,
                    std::clamp(last.direction_deg + turn * kTurnDeg, options_.min_angle_deg,
                               180 - options_.min_angle_deg)};
        const auto sigmas = Sigmas(piece, options_.follow_length_mm);
        if (!sigmas) {
          continue;
        }
        piece.sigmas = sign * *sigmas;
        const double worth = piece.sigmas - kSwerveCost * (std::abs(side) + std::abs(turn));
        if (worth > best_worth) {
          best_worth = worth;
          best = piece;
        }
      }
    }
    return best;
  }

  [[nodiscard]] std::vector<Piece> FollowOneWay(Piece last, int way, int sign) const {
    std::vector<Piece> path;
    size_t kept = 0;
    double hidden_mm = 0;
    const cv::Rect2d frame(0, 0, image_.cols - 1, image_.rows - 1);
    for (;;) {
      last = Next(last, way, sign);
      hidden_mm = last.seen ? 0 : hidden_mm + options_.step_mm;
      if (!frame.contains(last.centre) || hidden_mm > options_.max_hidden_mm ||
          (last.seen && last.sigmas < options_.follow_sigmas)) {
        break;
      }
      path.push_back(last);
      if (last.seen) {
        kept = path.size();
      }
    }
    path.resize(kept);
    return path;
  }

  [[nodiscard]] Track Follow(Piece seed, int sign) const {
    seed.sigmas = sign * Sigmas(seed, options_.follow_length_mm).value_or(0);
    std::vector<Piece> path = FollowOneWay(seed, -1, sign);
    std::reverse(path.begin(), path.end());
    path.push_back(seed);
    const std::vector<Piece> onwards = FollowOneWay(seed, 1, sign);
    path.insert(path.end(), onwards.begin(), onwards.end());
    CutEnds(path);
    Track track;
    for (const Piece& piece : path) {
      if (!track.path_px.empty() && OnTop(piece.centre)) {
        track.length_mm += cv::norm(piece.centre - track.path_px.back()) / view_.px_per_mm;
      }
      track.path_px.push_back(piece.centre);
    }
    return track;
  }

  [[nodiscard]] bool OnTop(cv::Point2d p) const {
    return view_.searched.at<std::uint8_t>(cvRound(p.y), cvRound(p.x)) != 0;
  }

  // A piece whose centre is the track's end holds half of it: the ends are where half of the
  // track's usual strength is left.
  static void CutEnds(std::vector<Piece>& path) {
    std::vector<double> strengths;
    for (const Piece& piece : path) {
      if (piece.seen) {
        strengths.push_back(piece.sigmas);
      }
    }
    const auto at = strengths.begin() + static_cast<std::ptrdiff_t>(strengths.size() * 3 / 4);
    std::nth_element(strengths.begin(), at, strengths.end());
    const double least = *at / 2;
    const auto strong = [least](const Piece& p) { return p.seen && p.sigmas >= least; };
    const auto first = std::find_if(path.begin(), path.end(), strong);
    const auto last = std::find_if(path.rbegin(), path.rend(), strong).base();
    path = std::vector<Piece>(first, last);
  }

  void Wipe(const Track& track, const Piece& seed) {
    const int half_width = static_cast<int>(std::lround(options_.half_width_mm * view_.px_per_mm));
    const cv::Point centre(cvRound(seed.centre.x), cvRound(seed.centre.y));
    cv::circle(seen_, centre, half_width, cv::Scalar::all(0), cv::FILLED);
    std::vector<cv::Point> points;
    for (const cv::Point2d& p : track.path_px) {
      points.emplace_back(cvRound(p.x), cvRound(p.y));
    }
    cv::polylines(seen_, points, false, cv::Scalar::all(0), 2 * half_width + 1);
  }

  const TopView& view_;
  const TrackOptions& options_;
  cv::Mat image_;  // CV_16SC1
  cv::Mat seen_;   // CV_8UC1: searched, and not yet wiped out
  LineSums sums_;
};

void Need(bool holds, const char* field, double value, const char* rule) {
  if (!holds) {
    throw BadOption(fmt::format("{} is {}: {}", field, value, rule));
  }
}

}  // namespace

void TrackOptions::Check() const {
  Need(flatten_mm >= 0.5, "flatten_mm", flatten_mm, "at least 0.5, a track's width");
  Need(detect_length_mm >= 2 && detect_length_mm <= 15, "detect_length_mm", detect_length_mm,
       "from 2 to 15");
  Need(follow_length_mm >= 1 && follow_length_mm <= detect_length_mm, "follow_length_mm",
       follow_length_mm, "from 1 to detect_length_mm");
  Need(step_mm > 0 && step_mm <= follow_length_mm, "step_mm", step_mm,
       "more than 0, at most follow_length_mm");
  Need(min_angle_deg > 0 && min_angle_deg < 90, "min_angle_deg", min_angle_deg, "between 0 and 90");
  Need(min_sigmas > 0, "min_sigmas", min_sigmas, "more than 0");
  Need(follow_sigmas > 0, "follow_sigmas", follow_sigmas, "more than 0");
  Need(min_length_mm > 0, "min_length_mm", min_length_mm, "more than 0");
  Need(half_width_mm > 0, "half_width_mm", half_width_mm, "more than 0");
  Need(max_hidden_mm >= 0, "max_hidden_mm", max_hidden_mm, "0 or more");
}

std::vector<Track> FindTracks(const TopView& view, const TrackOptions& options) {
  options.Check();
  if (view.relative.empty()) {
    return {};
  }
  return Follower(view, options).FindAll();
}

}  // namespace laygauge
