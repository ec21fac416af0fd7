#include "sheet/find_markers.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <opencv2/aruco.hpp>
#include <opencv2/imgproc.hpp>

namespace laygauge {
namespace {

struct RoughMarker {
  int id = 0;
  SquareCorners corners_px;
};

// The photo reduced by `factor` by averaging, 8 bit. A reduced pixel's centre lies in the middle of
// its factor x factor block.
cv::Mat Reduced(const cv::Mat& encoded, int factor) {
  cv::Mat reduced =
      encoded(cv::Rect(0, 0, encoded.cols / factor * factor, encoded.rows / factor * factor));
  // OpenCV has fast code for halves only.
  while (factor > 1) {
    const int step = factor % 2 == 0 ? 2 : factor;
    cv::Mat smaller;
    cv::resize(reduced, smaller, {}, 1.0 / step, 1.0 / step, cv::INTER_AREA);
    reduced = smaller;
    factor /= step;
  }
  if (reduced.depth() == CV_16U) reduced.convertTo(reduced, CV_8U, 1.0 / 257);
  return reduced;
}

cv::Ptr<cv::aruco::DetectorParameters> DetectorFor(cv::Size size_px) {
  constexpr double kSmallestSide_px = 12;  // a cell of 1.5 px
  auto parameters = cv::aruco::DetectorParameters::create();
  // One threshold window, wider than a marker's border and about as wide as a small marker.
  parameters->adaptiveThreshWinSizeMin = 23;
  parameters->adaptiveThreshWinSizeMax = 23;
  parameters->minMarkerPerimeterRate =
      4 * kSmallestSide_px / std::max(size_px.width, size_px.height);
  parameters->polygonalApproxAccuracyRate = 0.05;
  parameters->cornerRefinementMethod = cv::aruco::CORNER_REFINE_CONTOUR;
  return parameters;
}

std::vector<RoughMarker> DetectRoughly(const cv::Mat& reduced, int factor) {
  static const auto dictionary = cv::aruco::getPredefinedDictionary(cv::aruco::DICT_APRILTAG_36h11);
  std::vector<std::vector<cv::Point2f>> corners;
  std::vector<int> ids;
  cv::aruco::detectMarkers(reduced, dictionary, corners, ids, DetectorFor(reduced.size()));
  std::vector<RoughMarker> markers;
  for (size_t i = 0; i < ids.size(); ++i) {
    RoughMarker marker{ids[i], {}};
    for (size_t k = 0; k < 4; ++k) {
      const cv::Point2f& c = corners[i][k];
      marker.corners_px[k] = {(c.x + 0.5) * factor - 0.5, (c.y + 0.5) * factor - 0.5};
    }
    markers.push_back(marker);
  }
  std::sort(markers.begin(), markers.end(),
            [](const RoughMarker& a, const RoughMarker& b) { return a.id < b.id; });
  return markers;
}

bool IsMirrored(const cv::Mat& reduced, int fewest) {
  cv::Mat flipped;
  cv::flip(reduced, flipped, 1);
  return static_cast<int>(DetectRoughly(flipped, 1).size()) >= fewest;
}

// The marker's box with room for the profiles, inside the photo.
cv::Rect BoxRound(const SquareCorners& corners, double reach, cv::Size photo_size) {
  Eigen::Vector2d low = corners[0];
  Eigen::Vector2d high = corners[0];
  for (const Eigen::Vector2d& corner : corners) {
    low = low.cwiseMin(corner);
    high = high.cwiseMax(corner);
  }
  const double room = 2 * reach * (high - low).maxCoeff() + 4;
  const cv::Point top_left(static_cast<int>(low.x() - room), static_cast<int>(low.y() - room));
  const cv::Point bottom_right(static_cast<int>(high.x() + room) + 1,
                               static_cast<int>(high.y() + room) + 1);
  return cv::Rect(top_left, bottom_right) & cv::Rect({0, 0}, photo_size);
}

FoundMarkers RefineAll(const Photo& photo, const std::vector<RoughMarker>& rough,
                       const RefineCornersOptions& options) {
  FoundMarkers found;
  for (const RoughMarker& marker : rough) {
    const cv::Rect box = BoxRound(marker.corners_px, options.first_reach, photo.size());
    const auto refined =
        RefineCorners(LinearRegion(photo, box), box.tl(), marker.corners_px, options);
    if (refined) {
      found.markers.push_back({marker.id, refined->corners_px, refined->scatter_px});
    } else {
      found.notes.push_back(
          fmt::format("{}: marker {} was left out: an edge of its black square is not clear and "
                      "straight (is something lying on it?)",
                      photo.file, marker.id));
    }
  }
  return found;
}

Problem TooFew(const Photo& photo, const FoundMarkers& found, int fewest) {
  std::string message = fmt::format(
      "{}: {} of the sheet's markers found, at least {} are needed; keep the whole sheet in the "
      "picture, sharp, evenly lit and nothing on its markers",
      photo.file, found.markers.empty() ? "none" : fmt::format("only {}", found.markers.size()),
      fewest);
  if (!found.notes.empty()) {
    message +=
        fmt::format(" ({} more were seen, but their edges are not clear)", found.notes.size());
  }
  return {ProblemKind::kUnmeasurable, message};
}

}  // namespace

void FindMarkersOptions::Check() const {
  if (reduced_size_px < 200) {
    throw BadOption(
        fmt::format("reduced_size_px = {}: at least 200 pixels are needed", reduced_size_px));
  }
  if (fewest_markers < 1) {
    throw BadOption(fmt::format("fewest_markers = {}: at least 1 is needed", fewest_markers));
  }
  refine.Check();
}

Expected<FoundMarkers> FindMarkers(const Photo& photo, const FindMarkersOptions& options) {
  options.Check();
  const int longest_px = std::max(photo.size().width, photo.size().height);
  int factor = std::max(
      1, static_cast<int>(std::lround(static_cast<double>(longest_px) / options.reduced_size_px)));
  std::vector<RoughMarker> rough;
  for (const int finest = std::max(1, factor / 2);; factor = finest) {
    const cv::Mat reduced = Reduced(photo.encoded, factor);
    rough = DetectRoughly(reduced, factor);
    if (static_cast<int>(rough.size()) >= options.fewest_markers) break;
    if (rough.empty() && IsMirrored(reduced, options.fewest_markers)) {
      return Unmeasurable(
          fmt::format("{}: the photo is mirrored: its markers read only from behind; switch off "
                      "mirroring in the camera and take it again",
                      photo.file));
    }
    if (factor == finest) break;
  }
  for (size_t i = 1; i < rough.size(); ++i) {
    if (rough[i].id == rough[i - 1].id) {
      return Unmeasurable(
          fmt::format("{}: marker {} is in the picture twice; photograph one sheet at a time",
                      photo.file, rough[i].id));
    }
  }
  FoundMarkers found = RefineAll(photo, rough, options.refine);
  if (static_cast<int>(found.markers.size()) < options.fewest_markers) {
    return tl::unexpected(TooFew(photo, found, options.fewest_markers));
  }
  return found;
}

}  // namespace laygauge
