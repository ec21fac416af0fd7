#pragma once

#include <optional>
#include <span>
#include <string>
#include <vector>

#include "base/error.h"
#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/match_sheet.h"

namespace laygauge {

// Priors' standard deviations, limits of refusal. docs/camera.md gives the reasons.
struct EstimateCameraOptions {
  double focal_model_sd = 0.03;        // share: what a focal tag is off by, beyond its rounding
  double untagged_focal_35mm = 40;     // 35 mm equivalent where no tag tells it,
  double untagged_focal_log_sd = 0.5;  // and its logarithm's standard deviation
  double center_sd = 0.01;             // principal point, share of the image's diagonal
  double k1_sd = 0.1, k2_sd = 0.1, p1_sd = 0.001, p2_sd = 0.001;
  double spread_sd_mm = 0.05;  // ink: how far each printed edge lies outside its place
  double stretch_sd = 0.001;   // share: the page longer down than across
  double top_height_mm = 2.5;  // above the paper, where the scale's uncertainty is reported
  int fewest_markers = 4;
  double most_rms_px = 2.0;  // reprojection: more in either unit is refused
  double most_rms_mm = 0.1;
  double least_px_per_mm = 10;  // at every well's centre
  int threads = 1;

  void Check() const;  // throws BadOption: field, value, rule
};

// A photo in which a sheet was found.
struct SheetSighting {
  std::string photo_file;
  cv::Size image_size_px;
  CameraTags tags;
  SheetInPhoto found;
};

struct MarkerResidual {
  int id = 0;
  double rms_px = 0;  // of its corners' distances from where the camera model puts them
  bool used = true;   // false: it disagrees with the others
};

struct CameraEstimate {
  View view;
  double rms_px = 0;  // reprojection, over the used corners' distances
  double rms_mm = 0;  // the same on the paper
  std::vector<MarkerResidual> markers;
  int photos_sharing = 1;                 // photos that this camera and focal length were fitted to
  std::optional<double> tagged_focal_px;  // what the tags tell; none: without a tag
  double focal_sd_pct = 0;                // standard uncertainty
  double top_scale_sd_pct = 0;            // of the scale in the plane of a coupon's top
  double spread_mm = 0;                   // ink: each printed edge outside its place
  double stretch_pct = 0;                 // the page longer down than across
  double least_px_per_mm = 0;             // over the wells' centres, on the paper
  double other_pose_rms_px = 0;           // of the second pose a plane allows, before the fit
  std::vector<std::string> notes;         // one sentence each
};

// One entry a sighting, in order. Photos with the same make, model, focal length, size and
// orientation share a camera; a photo without a focal tag stands alone. Pinhole with Brown's
// distortion (camera.h); initial poses by Collins & Bartoli 2014, "Infinitesimal plane-based pose
// estimation", IJCV 109(3), doi 10.1007/s11263-014-0725-5 (both its solutions are fitted).
// Problem (unmeasurable): fewer than `fewest_markers` agree; a reprojection error above the limits;
// fewer than `least_px_per_mm`. A refused photo does not touch the others.
[[nodiscard]] std::vector<Expected<CameraEstimate>> EstimateCameras(
    std::span<const SheetSighting> sightings, const EstimateCameraOptions& options = {});

}  // namespace laygauge
