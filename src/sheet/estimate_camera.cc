#include "sheet/estimate_camera.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <tuple>

#include "base/statistics.h"
#include "sheet/fit_camera.h"
#include "sheet/planar_pose.h"

namespace laygauge {
namespace {

constexpr double kDiagonalOf35mm_mm = 43.2666;  // of 36 x 24 mm

double Diagonal(cv::Size size) { return std::hypot(size.width, size.height); }

// CIPA DC-008 (EXIF), tag FocalLengthIn35mmFilm: by the diagonal; cameras round it to whole mm.
std::optional<double> TaggedFocal(const SheetSighting& sighting) {
  const auto& focal_35mm = sighting.tags.focal_length_35mm;
  if (!focal_35mm || !(*focal_35mm > 0)) return std::nullopt;
  return *focal_35mm / kDiagonalOf35mm_mm * Diagonal(sighting.image_size_px);
}

CameraPriors PriorsFor(const SheetSighting& sighting, const EstimateCameraOptions& options) {
  CameraPriors priors;
  const double diagonal_px = Diagonal(sighting.image_size_px);
  const auto tagged_px = TaggedFocal(sighting);
  const double focal_px =
      tagged_px.value_or(options.untagged_focal_35mm / kDiagonalOf35mm_mm * diagonal_px);
  double log_focal_sd = options.untagged_focal_log_sd;
  if (tagged_px) {
    const double rounding = 1 / std::sqrt(12.0) / *sighting.tags.focal_length_35mm;
    log_focal_sd = std::hypot(rounding, options.focal_model_sd);
  }
  const double center_sd_px = options.center_sd * diagonal_px;
  priors.lens_mean << std::log(focal_px), (sighting.image_size_px.width - 1) / 2.0,
      (sighting.image_size_px.height - 1) / 2.0, 0, 0, 0, 0;
  priors.lens_sd << log_focal_sd, center_sd_px, center_sd_px, options.k1_sd, options.k2_sd,
      options.p1_sd, options.p2_sd;
  priors.spread_sd_mm = options.spread_sd_mm;
  priors.stretch_sd = options.stretch_sd;
  return priors;
}

Eigen::Vector2d CentreOf(const SheetDescription& sheet) {
  return {sheet.page_width_mm / 2, sheet.page_height_mm / 2};
}

std::vector<MarkerSighting> MarkersOf(const SheetInPhoto& found) {
  std::vector<MarkerSighting> markers;
  for (const FoundMarker& seen : found.markers) {
    const SheetMarker* drawn = found.sheet.FindMarker(seen.id);
    markers.push_back({seen.id, Eigen::Vector2d(drawn->x_mm, drawn->y_mm) - CentreOf(found.sheet),
                       drawn->side_mm / 2, seen.corners_px});
  }
  return markers;
}

double MarkerRms(const CameraFit& fit, size_t photo, const MarkerSighting& marker) {
  double sum = 0;
  for (const Eigen::Vector2d& r : CornerResiduals(fit.lens, fit.photos[photo], marker)) {
    sum += r.squaredNorm();
  }
  return std::sqrt(sum / 4);
}

double Rms(const CameraFit& fit, size_t photo, const std::vector<MarkerSighting>& markers) {
  double sum = 0;
  for (const MarkerSighting& marker : markers) sum += std::pow(MarkerRms(fit, photo, marker), 2);
  return std::sqrt(sum / static_cast<double>(markers.size()));
}

// A photo fitted by itself.
struct SinglePhoto {
  CameraFit fit;
  std::vector<MarkerSighting> used;
  std::vector<MarkerSighting> rejected;
  double other_pose_rms_px = 0;
};

// From both poses that a plane allows; the better fit is kept.
std::optional<SinglePhoto> FitFromBothPoses(const std::vector<MarkerSighting>& markers,
                                            const CameraPriors& priors, const LensVector& lens,
                                            int threads) {
  std::optional<SinglePhoto> best;
  double other_pose_rms_px = 0;
  for (const PhotoVector& pose : PlanarPoses(markers, lens)) {
    CameraFit start;
    start.lens = lens;
    start.photos = {pose};
    other_pose_rms_px = Rms(start, 0, markers);  // the last one is the worse
    const CameraFit fit = FitCamera(start, {markers}, priors, threads);
    if (!fit.converged) continue;
    if (!best || Rms(fit, 0, markers) < Rms(best->fit, 0, markers)) best = {fit, markers, {}, 0};
  }
  if (best) best->other_pose_rms_px = other_pose_rms_px;
  return best;
}

// Markers far from where the others put them: lifted, or something lies on an edge.
bool MoveOutliers(SinglePhoto& photo) {
  constexpr double kTimesMedian = 5;
  constexpr double kLeast_px = 0.5;
  std::vector<double> rms_px;
  rms_px.reserve(photo.used.size());
  for (const MarkerSighting& marker : photo.used) rms_px.push_back(MarkerRms(photo.fit, 0, marker));
  const double limit_px = std::max(kLeast_px, kTimesMedian * Median(rms_px));
  std::vector<MarkerSighting> kept;
  for (size_t i = 0; i < photo.used.size(); ++i) {
    (rms_px[i] > limit_px ? photo.rejected : kept).push_back(photo.used[i]);
  }
  const bool moved = kept.size() < photo.used.size();
  photo.used = std::move(kept);
  return moved;
}

Problem Disagree(const SheetSighting& sighting, double rms_px, double rms_mm,
                 const EstimateCameraOptions& options) {
  return {ProblemKind::kUnmeasurable,
          fmt::format("{}: the markers do not fit sheet {}: reprojection error {:.2f} px, {:.3f} "
                      "mm root mean square, at most {} px and {} mm are allowed; lay the paper "
                      "flat, check that this is the sheet that was printed, and take it again",
                      sighting.photo_file, sighting.found.sheet.name, rms_px, rms_mm,
                      options.most_rms_px, options.most_rms_mm)};
}

Expected<SinglePhoto> FitAlone(const SheetSighting& sighting,
                               const EstimateCameraOptions& options) {
  const CameraPriors priors = PriorsFor(sighting, options);
  const std::vector<MarkerSighting> markers = MarkersOf(sighting.found);
  const auto fewest = static_cast<size_t>(options.fewest_markers);
  if (markers.size() < fewest) {
    return Unmeasurable(fmt::format("{}: {} markers of sheet {} found, at least {} are needed",
                                    sighting.photo_file, markers.size(), sighting.found.sheet.name,
                                    fewest));
  }
  LensVector lens = priors.lens_mean;
  if (!TaggedFocal(sighting)) {
    lens[kLogFocal] = std::log(
        GuessFocal(markers, lens, Diagonal(sighting.image_size_px), options.untagged_focal_log_sd));
  }
  auto photo = FitFromBothPoses(markers, priors, lens, options.threads);
  if (!photo) {
    return Unmeasurable(fmt::format(
        "{}: no camera position explains where the markers of sheet {} lie; check that this is the "
        "sheet that was printed",
        sighting.photo_file, sighting.found.sheet.name));
  }
  while (MoveOutliers(*photo)) {
    if (photo->used.size() < fewest) {
      const double rms_px = Rms(photo->fit, 0, markers);
      const View view = ViewOf(photo->fit.lens, photo->fit.photos[0], sighting.image_size_px,
                               CentreOf(sighting.found.sheet));
      const Eigen::Vector2d centre = CentreOf(sighting.found.sheet);
      return tl::unexpected(
          Disagree(sighting, rms_px, rms_px / view.PxPerMm(centre.x(), centre.y(), 0), options));
    }
    photo->fit = FitCamera(photo->fit, {photo->used}, priors, options.threads);
  }
  return *photo;
}

// Standard uncertainty of a quantity that depends on lens and one photo, by its gradient.
template <class Quantity>
double Deviation(const CameraFit& fit, size_t photo, const Quantity& quantity) {
  constexpr int kBoth = kLensUnknowns + kPhotoUnknowns;
  Eigen::Matrix<double, kBoth, 1> gradient;
  const int first = kLensUnknowns + kPhotoUnknowns * static_cast<int>(photo);
  std::array<int, kBoth> index{};
  for (int i = 0; i < kBoth; ++i) {
    index[static_cast<size_t>(i)] = i < kLensUnknowns ? i : first + i - kLensUnknowns;
  }
  for (int i = 0; i < kBoth; ++i) {
    const int at = index[static_cast<size_t>(i)];
    const double step = 1e-3 * std::sqrt(fit.covariance(at, at));
    const auto moved = [&](double by) {
      LensVector lens = fit.lens;
      PhotoVector pose = fit.photos[photo];
      (i < kLensUnknowns ? lens[i] : pose[i - kLensUnknowns]) += by;
      return quantity(lens, pose);
    };
    gradient[i] = (moved(step) - moved(-step)) / (2 * step);
  }
  double variance = 0;
  for (int i = 0; i < kBoth; ++i) {
    for (int k = 0; k < kBoth; ++k) {
      variance += gradient[i] * gradient[k] *
                  fit.covariance(index[static_cast<size_t>(i)], index[static_cast<size_t>(k)]);
    }
  }
  return std::sqrt(std::max(0.0, variance));
}

double LeastPxPerMm(const View& view, const SheetDescription& sheet) {
  double least = std::numeric_limits<double>::infinity();
  for (const Well& well : sheet.wells)
    least = std::min(least, view.PxPerMm(well.x_mm, well.y_mm, 0));
  return least;
}

// Root mean square of the used markers' mean residuals: what a flat sheet and a lens leave
// unexplained from marker to marker.
double BetweenMarkers(const CameraFit& fit, size_t photo,
                      const std::vector<MarkerSighting>& markers) {
  double sum = 0;
  for (const MarkerSighting& marker : markers) {
    Eigen::Vector2d mean = Eigen::Vector2d::Zero();
    for (const Eigen::Vector2d& r : CornerResiduals(fit.lens, fit.photos[photo], marker)) {
      mean += r / 4;
    }
    sum += mean.squaredNorm();
  }
  return std::sqrt(sum / static_cast<double>(markers.size()));
}

void AddNotes(const SheetSighting& sighting, const SinglePhoto& photo, double between_mm,
              CameraEstimate& estimate) {
  constexpr double kCurl_mm = 0.02;
  constexpr double kStretch_pct = 0.1;
  for (const MarkerSighting& marker : photo.rejected) {
    estimate.notes.push_back(
        fmt::format("{}: marker {} does not agree with the others and was left out; check that the "
                    "paper lies flat and nothing lies on it",
                    sighting.photo_file, marker.id));
  }
  if (between_mm > kCurl_mm) {
    estimate.notes.push_back(fmt::format(
        "{}: the markers lie {:.3f} mm root mean square off a flat sheet; the paper may "
        "be curled: lay it flat",
        sighting.photo_file, between_mm));
  }
  if (std::abs(estimate.stretch_pct) > kStretch_pct) {
    estimate.notes.push_back(
        fmt::format("{}: the page seems to be printed {:.2f} % {} down than across, which is "
                    "corrected, or the photo "
                    "to be cropped; print at true scale and give whole photos",
                    sighting.photo_file, std::abs(estimate.stretch_pct),
                    estimate.stretch_pct > 0 ? "longer" : "shorter"));
  }
  if (!estimate.tagged_focal_px) {
    estimate.notes.push_back(
        fmt::format("{}: no focal length in the photo's tags: it is estimated from the markers "
                    "alone, to {:.1f} %",
                    sighting.photo_file, estimate.focal_sd_pct));
  }
}

Expected<CameraEstimate> Describe(const SheetSighting& sighting, const SinglePhoto& photo,
                                  const CameraFit& fit, size_t index, int photos_sharing,
                                  const EstimateCameraOptions& options) {
  const SheetDescription& sheet = sighting.found.sheet;
  const Eigen::Vector2d centre = CentreOf(sheet);
  const PhotoVector& unknowns = fit.photos[index];
  CameraEstimate estimate;
  estimate.view = ViewOf(fit.lens, unknowns, sighting.image_size_px, centre);
  estimate.rms_px = Rms(fit, index, photo.used);
  const double px_per_mm = estimate.view.PxPerMm(centre.x(), centre.y(), 0);
  estimate.rms_mm = estimate.rms_px / px_per_mm;
  if (!(estimate.rms_px <= options.most_rms_px && estimate.rms_mm <= options.most_rms_mm)) {
    return tl::unexpected(Disagree(sighting, estimate.rms_px, estimate.rms_mm, options));
  }
  estimate.least_px_per_mm = LeastPxPerMm(estimate.view, sheet);
  if (!(estimate.least_px_per_mm >= options.least_px_per_mm)) {
    return Unmeasurable(
        fmt::format("{}: the photo shows {:.1f} pixels a mm, at least {} are needed; go closer, or "
                    "use the camera's full resolution",
                    sighting.photo_file, estimate.least_px_per_mm, options.least_px_per_mm));
  }
  for (const MarkerSighting& marker : photo.used) {
    estimate.markers.push_back({marker.id, MarkerRms(fit, index, marker), true});
  }
  for (const MarkerSighting& marker : photo.rejected) {
    estimate.markers.push_back({marker.id, MarkerRms(fit, index, marker), false});
  }
  estimate.photos_sharing = photos_sharing;
  estimate.tagged_focal_px = TaggedFocal(sighting);
  estimate.focal_sd_pct = 100 * std::sqrt(fit.covariance(kLogFocal, kLogFocal));
  estimate.top_scale_sd_pct =
      100 * Deviation(fit, index, [&](const LensVector& lens, const PhotoVector& pose) {
        const View view = ViewOf(lens, pose, sighting.image_size_px, centre);
        return std::log(
                   view.PixelBySheet(centre.x(), centre.y(), options.top_height_mm).determinant()) /
               2;
      });
  estimate.spread_mm = unknowns[kSpread];
  estimate.stretch_pct = 100 * unknowns[kStretch];
  estimate.other_pose_rms_px = photo.other_pose_rms_px;
  AddNotes(sighting, photo, BetweenMarkers(fit, index, photo.used) / px_per_mm, estimate);
  return estimate;
}

using CameraKey = std::tuple<std::string, std::string, std::optional<double>, std::optional<double>,
                             int, int, int, size_t>;

// Equal for photos that share a camera; without a focal tag nothing equals it but itself.
CameraKey KeyOf(const SheetSighting& sighting, size_t index) {
  const CameraTags& tags = sighting.tags;
  const bool alone = !tags.focal_length_mm && !tags.focal_length_35mm;
  return {tags.make.value_or(""), tags.model.value_or(""),      tags.focal_length_mm,
          tags.focal_length_35mm, sighting.image_size_px.width, sighting.image_size_px.height,
          tags.orientation,       alone ? index + 1 : 0};
}

// Fits the photos of one camera together, from their single fits.
CameraFit FitTogether(const std::vector<const SinglePhoto*>& photos, const CameraPriors& priors,
                      int threads) {
  if (photos.size() == 1) return photos[0]->fit;
  CameraFit start;
  start.lens.setZero();
  std::vector<std::vector<MarkerSighting>> markers;
  for (const SinglePhoto* photo : photos) {
    start.lens += photo->fit.lens / static_cast<double>(photos.size());
    start.photos.push_back(photo->fit.photos[0]);
    markers.push_back(photo->used);
  }
  return FitCamera(start, markers, priors, threads);
}

}  // namespace

void EstimateCameraOptions::Check() const {
  const auto positive = [](double value, std::string_view field) {
    if (!(value > 0 && std::isfinite(value))) {
      throw BadOption(fmt::format("{} = {}: more than 0 is needed", field, value));
    }
  };
  positive(focal_model_sd, "focal_model_sd");
  positive(untagged_focal_35mm, "untagged_focal_35mm");
  positive(untagged_focal_log_sd, "untagged_focal_log_sd");
  positive(center_sd, "center_sd");
  positive(k1_sd, "k1_sd");
  positive(k2_sd, "k2_sd");
  positive(p1_sd, "p1_sd");
  positive(p2_sd, "p2_sd");
  positive(spread_sd_mm, "spread_sd_mm");
  positive(stretch_sd, "stretch_sd");
  positive(most_rms_px, "most_rms_px");
  positive(most_rms_mm, "most_rms_mm");
  positive(least_px_per_mm, "least_px_per_mm");
  if (fewest_markers < 2) {
    throw BadOption(fmt::format("fewest_markers = {}: at least 2 are needed", fewest_markers));
  }
  if (threads < 1) throw BadOption(fmt::format("threads = {}: at least 1 is needed", threads));
}

std::vector<Expected<CameraEstimate>> EstimateCameras(std::span<const SheetSighting> sightings,
                                                      const EstimateCameraOptions& options) {
  options.Check();
  std::vector<Expected<SinglePhoto>> single;
  std::vector<Expected<CameraEstimate>> estimates;
  std::map<CameraKey, std::vector<size_t>> groups;
  for (size_t i = 0; i < sightings.size(); ++i) {
    single.push_back(FitAlone(sightings[i], options));
    if (!single[i]) {
      estimates.emplace_back(tl::unexpected(single[i].error()));
      continue;
    }
    estimates.push_back(Describe(sightings[i], *single[i], single[i]->fit, 0, 1, options));
    if (estimates[i]) groups[KeyOf(sightings[i], i)].push_back(i);
  }
  for (const auto& [key, members] : groups) {
    if (members.size() < 2) continue;
    std::vector<const SinglePhoto*> photos;
    photos.reserve(members.size());
    for (const size_t i : members) photos.push_back(&*single[i]);
    const CameraFit fit =
        FitTogether(photos, PriorsFor(sightings[members[0]], options), options.threads);
    if (!fit.converged) continue;  // the single fits stand
    for (size_t k = 0; k < members.size(); ++k) {
      const size_t i = members[k];
      estimates[i] =
          Describe(sightings[i], *single[i], fit, k, static_cast<int>(members.size()), options);
    }
  }
  return estimates;
}

}  // namespace laygauge
