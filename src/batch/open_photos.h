#pragma once

#include <filesystem>
#include <functional>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "base/error.h"
#include "photo/photo.h"
#include "sheet/estimate_camera.h"
#include "sheet/find_markers.h"
#include "sheet/sheet_description.h"

namespace laygauge {

// A photo that cannot be used, and why.
struct RefusedPhoto {
  std::string file;
  Problem problem;
};

// A photo in which a sheet was found.
struct OpenedPhoto {
  std::filesystem::path path;
  std::optional<Photo> photo;  // decoded; none: it was let go to keep memory bounded, read it again
  SheetSighting sighting;
};

struct OpenedPhotos {
  std::vector<OpenedPhoto> opened;    // in the order given
  std::vector<RefusedPhoto> refused;  // in the order given
};

struct OpenPhotosOptions {
  FindMarkersOptions markers;
  // Decoded photos are kept for measuring up to this many bytes in all (one photo always is).
  size_t most_kept_bytes = 200'000'000;
  void Check() const;  // throws BadOption
};

// Called with the number of photos done, from any thread, one call at a time.
using Progress = std::function<void(int done)>;

// Decodes each photo, finds its markers and the sheet to which they belong (one of `known`), on all
// of OpenCV's threads.
[[nodiscard]] OpenedPhotos OpenPhotos(std::span<const std::filesystem::path> paths,
                                      std::span<const SheetDescription> known,
                                      const OpenPhotosOptions& options, const Progress& progress);

}  // namespace laygauge
