#include "batch/open_photos.h"

#include <fmt/format.h>

#include <mutex>
#include <opencv2/core.hpp>

#include "sheet/match_sheet.h"

namespace laygauge {
namespace {

Expected<OpenedPhoto> OpenPhoto(const std::filesystem::path& path,
                                std::span<const SheetDescription> known,
                                const OpenPhotosOptions& options) {
  auto photo = ReadPhoto(path);
  if (!photo) return tl::unexpected(photo.error());
  const auto markers = FindMarkers(*photo, options.markers);
  if (!markers) return tl::unexpected(markers.error());
  auto found = MatchSheet(photo->file, *markers, known, options.markers.fewest_markers);
  if (!found) return tl::unexpected(found.error());
  OpenedPhoto opened;
  opened.path = path;
  opened.sighting = {photo->file, photo->size(), photo->tags, std::move(*found)};
  opened.photo = std::move(*photo);
  return opened;
}

}  // namespace

void OpenPhotosOptions::Check() const { markers.Check(); }

OpenedPhotos OpenPhotos(std::span<const std::filesystem::path> paths,
                        std::span<const SheetDescription> known, const OpenPhotosOptions& options,
                        const Progress& progress) {
  options.Check();
  std::vector<Expected<OpenedPhoto>> results(paths.size(), Unmeasurable("not opened"));
  std::mutex mutex;
  size_t kept_bytes = 0;
  int done = 0;
  cv::parallel_for_(cv::Range(0, static_cast<int>(paths.size())), [&](const cv::Range& range) {
    for (int i = range.start; i < range.end; ++i) {
      const auto index = static_cast<size_t>(i);
      auto result = OpenPhoto(paths[index], known, options);
      const std::lock_guard lock(mutex);
      if (result) {
        const cv::Mat& pixels = result->photo->encoded;
        const size_t bytes = pixels.total() * pixels.elemSize();
        if (kept_bytes > 0 && kept_bytes + bytes > options.most_kept_bytes) {
          result->photo.reset();
        } else {
          kept_bytes += bytes;
        }
      }
      results[index] = std::move(result);
      if (progress) progress(++done);
    }
  });
  OpenedPhotos photos;
  for (size_t i = 0; i < paths.size(); ++i) {
    if (results[i]) {
      photos.opened.push_back(std::move(*results[i]));
    } else {
      photos.refused.push_back({paths[i].string(), results[i].error()});
    }
  }
  return photos;
}

}  // namespace laygauge
