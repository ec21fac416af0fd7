#pragma once

#include <filesystem>
#include <functional>
#include <optional>
#include <string>
#include <vector>

#include "base/error.h"
#include "batch/measure_photo.h"
#include "batch/open_photos.h"
#include "batch/run_sheet.h"
#include "coupon/coupon_description.h"
#include "grade/scale.h"
#include "report/record.h"
#include "report/result.h"
#include "sheet/estimate_camera.h"
#include "sheet/sheet_description.h"

namespace laygauge {

struct ScoreRunRequest {
  std::vector<std::filesystem::path> photos;
  std::vector<SheetDescription> sheets;  // those that may be in the photos, scaled by their bar
  CouponDescription coupon;
  std::optional<RunSheet> runs;
  std::optional<PhotoList> photo_list;
  Scale scale;
  std::string scale_file;  // as named by the caller, for messages
  bool each_take = false;  // one row a coupon and photo
  bool with_loss = false;
  OpenPhotosOptions open;
  EstimateCameraOptions camera;
  MeasurePhotoOptions measure;
};

// What is done with each photo's measurement as soon as it is there: records, pictures. Called from
// one thread, photos in the order given. A Problem ends the run.
using TakePhoto = std::function<Done(const PhotoMeasurement&)>;

// How well a photo could be measured as a whole.
struct PhotoSummary {
  std::string file;
  std::string sheet;
  int markers_used = 0;
  int markers_on_sheet = 0;
  double rms_px = 0;  // reprojection
  double rms_mm = 0;
  double least_px_per_mm = 0;
};

struct ScoreRun {
  ResultTable table;
  std::vector<RefusedPhoto> refused;  // the photos that could not be used, and why
  std::vector<std::string> notes;     // for the person: one sentence each
  std::vector<PhotoSummary> photos;   // those that were measured
};

// Photographs to scores. Problem: what is wrong with the request as a whole (an unknown well in the
// run sheet, a scale of another metric version), or the first Problem of `take`. Photos that cannot
// be used are in `refused`.
[[nodiscard]] Expected<ScoreRun> RunScoring(const ScoreRunRequest& request, const TakePhoto& take,
                                            const Progress& progress);

}  // namespace laygauge
