#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "texture/top_view.h"
#include "texture/tracks.h"

namespace laygauge {

struct BlobOptions {
  double scale_mm = 0.2;       // standard deviation of the Gaussian that lumps are matched with
  double separation_mm = 1.3;  // nearer ones are one blob
  double min_excess = 3.8;     // see FindBlobs
  double scar_seam_mm = 1.2;   // beside a scar, blobs are not told from its edges
  double scar_beyond_mm = 6;   // nor beyond its ends, where it may go on
  void Check() const;          // throws BadOption: field, value, rule
};

struct Blob {
  cv::Point2d centre_px;  // in the view
  double area_mm2 = 0;    // of the response, if all of it were as high as its peak
  double excess = 0;      // of its peak, see FindBlobs
};

// A lump has a bright and a dark side, or shines, as the light falls: the response is the energy
// of brightness and of both its slopes at one scale, each over its own spread on the coupon. Lines
// and the gaps between them must not answer: what is darker than the surroundings by more than one
// deviation, whether a shallow valley or a deep channel, is taken to be just that dark, and the
// mean along the lay is taken out. The local maxima of a surface without blobs thin out about
// exponentially; `excess` counts from their median in units of the distance from the median to the
// 90 % quantile.
[[nodiscard]] std::vector<Blob> FindBlobs(const TopView& view, const std::vector<Track>& scars,
                                          const BlobOptions& options = {});

}  // namespace laygauge
