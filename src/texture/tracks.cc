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
constexpr double kLumpMm = 1.6;  // the most that one lump or gap, and its shadow, take of a track
constexpr int kWeakSteps = 2;    // a track may be too weak to follow for so long: 1.2 mm
constexpr double kLeastSeen = 0.5;  // share of a piece on the searched top

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

// See FindTracks.
double Chance(const Track& track, double min_sigmas) {
  constexpr double kNever = 5.7;
  constexpr double kSurely = 7.1;
  const double evidence = (track.sigmas + track.strength) / 2;
  return std::clamp(std::min((evidence - kNever) / (kSurely - kNever), track.sigmas - min_sigmas),
                    0.0, 1.0);
}

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
      const int sign = *sigmas < 0 ? -1 : 1;
      Track track = Follow(seed, sign);
      track.sigmas = std::abs(*sigmas);
      track.strength = Strength(track.path_px, sign);
      track.chance = Chance(track, options_.min_sigmas);
      Wipe(track, seed);
      if (track.chance > 0) {
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
    size_t kept = 0;  // up to the last piece that is seen, and the one beyond at which it ends
    double hidden_mm = 0;
    int weak = 0;
    const cv::Rect2d frame(0, 0, image_.cols - 1, image_.rows - 1);
    for (;;) {
      last = Next(last, way, sign);
      hidden_mm = last.seen ? 0 : hidden_mm + options_.step_mm;
      if (!frame.contains(last.centre) || hidden_mm > options_.max_hidden_mm) {
        break;
      }
      path.push_back(last);
      if (last.seen) {
        kept = path.size();
        weak = last.sigmas < options_.follow_sigmas ? weak + 1 : 0;
        if (weak > kWeakSteps) break;
      }
    }
    path.resize(kept);
    return path;
  }

  [[nodiscard]] Track Follow(Piece seed, int sign) const {
    seed.sigmas = sign * Sigmas(seed, options_.follow_length_mm).value_or(0);
    std::vector<Piece> path = FollowOneWay(seed, -1, sign);
    std::reverse(path.begin(), path.end());
    const size_t at_seed = path.size();
    path.push_back(seed);
    const std::vector<Piece> onwards = FollowOneWay(seed, 1, sign);
    path.insert(path.end(), onwards.begin(), onwards.end());
    path = StandsOutMost(path, at_seed);
    CutEnds(path);
    Track track;
    for (const Piece& piece : path) {
      if (!track.path_px.empty()) {
        track.length_mm += LengthOnTop(track.path_px.back(), piece.centre);
      }
      track.path_px.push_back(piece.centre);
    }
    return track;
  }

  // The part about the seed whose sum stands out most, with a piece more at each end: by chance, a
  // track is followed into noise, which would dilute it.
  [[nodiscard]] static std::vector<Piece> StandsOutMost(const std::vector<Piece>& path,
                                                        size_t at_seed) {
    std::vector<double> sums{0};  // of what is seen before each piece, and how many
    std::vector<int> counts{0};
    for (const Piece& piece : path) {
      sums.push_back(sums.back() + (piece.seen ? piece.sigmas : 0));
      counts.push_back(counts.back() + (piece.seen ? 1 : 0));
    }
    size_t first = at_seed;
    size_t end = at_seed + 1;
    double most = 0;
    for (size_t i = 0; i <= at_seed; ++i) {
      for (size_t j = at_seed + 1; j <= path.size(); ++j) {
        const double sum = (sums[j] - sums[i]) / std::sqrt(counts[j] - counts[i]);
        if (sum > most) {
          most = sum;
          first = i;
          end = j;
        }
      }
    }
    const auto from = static_cast<std::ptrdiff_t>(first > 0 ? first - 1 : first);
    const auto to = static_cast<std::ptrdiff_t>(std::min(end + 1, path.size()));
    return {path.begin() + from, path.begin() + to};
  }

  // The sum along the whole path in units of its spread, without the strongest part that one lump
  // could give.
  [[nodiscard]] double Strength(const std::vector<cv::Point2d>& path, int sign) const {
    std::vector<double> sums{0};
    for (size_t i = 1; i < path.size(); ++i) {
      const cv::Point2d way = path[i] - path[i - 1];
      const double direction_deg = std::atan2(-way.y, way.x) * 180 / std::numbers::pi;
      const double spread = sums_.SpreadAt(std::fmod(direction_deg + 360, 180));
      const int steps = cvRound(std::max(std::abs(way.x), std::abs(way.y)));
      for (int k = 0; k < steps; ++k) {
        const cv::Point2d p = path[i - 1] + way * (static_cast<double>(k) / steps);
        const cv::Point pixel(cvRound(p.x), cvRound(p.y));
        if (seen_.at<std::uint8_t>(pixel) != 0 && spread > 0) {
          sums.push_back(sums.back() + sign * image_.at<std::int16_t>(pixel) / spread);
        }
      }
    }
    const auto window = static_cast<size_t>(std::lround(kLumpMm * view_.px_per_mm));
    constexpr size_t kFewest = 4;
    if (sums.size() <= window + kFewest) {
      return 0;
    }
    double most = 0;
    for (size_t i = window; i < sums.size(); ++i) {
      most = std::max(most, sums[i] - sums[i - window]);
    }
    return (sums.back() - most) / std::sqrt(static_cast<double>(sums.size() - 1 - window));
  }

  [[nodiscard]] double LengthOnTop(cv::Point2d from, cv::Point2d to) const {
    constexpr int kParts = 4;  // of a step: a pixel each
    int on_top = 0;
    for (int i = 0; i < kParts; ++i) {
      const cv::Point2d p = from + (to - from) * ((i + 0.5) / kParts);
      on_top += view_.searched.at<std::uint8_t>(cvRound(p.y), cvRound(p.x)) != 0 ? 1 : 0;
    }
    return cv::norm(to - from) / view_.px_per_mm * on_top / kParts;
  }

  // A piece whose centre is the track's end holds half of it: the ends are where half of the
  // track's usual strength is left, between the last piece that has it and the next; or where a
  // hole or another track begins.
  void CutEnds(std::vector<Piece>& path) const {
    std::vector<double> strengths;
    for (const Piece& piece : path) {
      if (piece.seen) {
        strengths.push_back(piece.sigmas);
      }
    }
    const auto at = strengths.begin() + static_cast<std::ptrdiff_t>(strengths.size() * 3 / 4);
    std::nth_element(strengths.begin(), at, strengths.end());
    CutFront(path, *at / 2);
    std::reverse(path.begin(), path.end());
    CutFront(path, *at / 2);
    std::reverse(path.begin(), path.end());
  }

  void CutFront(std::vector<Piece>& path, double least) const {
    const auto first = std::find_if(path.begin(), path.end(), [least](const Piece& piece) {
      return piece.seen && piece.sigmas >= least;
    });
    Piece end = *first;
    if (first != path.begin() && (first - 1)->seen) {
      const Piece& before = *(first - 1);
      const double share = (first->sigmas - least) / (first->sigmas - before.sigmas);
      end.centre += (before.centre - first->centre) * share;
    } else {
      end.centre += SeenBeyond(*first, path.back().centre);
    }
    path.erase(path.begin(), first);
    path.insert(path.begin(), end);
  }

  // From a piece's centre away from the other end, as far as the piece can be seen.
  [[nodiscard]] cv::Point2d SeenBeyond(const Piece& piece, cv::Point2d other_end) const {
    const double radians = piece.direction_deg * std::numbers::pi / 180;
    cv::Point2d along(std::cos(radians), -std::sin(radians));
    if (along.dot(piece.centre - other_end) < 0) along = -along;
    const int most = cvRound(options_.follow_length_mm / 2 * view_.px_per_mm);
    int steps = 0;
    while (steps < most && IsSeen(piece.centre + along * (steps + 1))) {
      ++steps;
    }
    return along * steps;
  }

  [[nodiscard]] bool IsSeen(cv::Point2d p) const {
    const cv::Point pixel(cvRound(p.x), cvRound(p.y));
    return cv::Rect({0, 0}, seen_.size()).contains(pixel) && seen_.at<std::uint8_t>(pixel) != 0;
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
