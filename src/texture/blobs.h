#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "texture/top_view.h"
#include "texture/tracks.h"

namespace laygauge {

struct BlobOptions {
  double scale_mm = 0.25;      // standard deviation of the Gaussian that lumps are matched with
  double separation_mm = 1.8;  // nearer ones are one blob
  double min_excess = 3.7;     // see FindBlobs
  double scar_seam_mm = 1.2;   // not searched beside a scar
  double scar_beyond_mm = 6;   // nor beyond its ends, where it may go on
  void Check() const;          // throws BadOption: field, value, rule
};

struct Blob {
  cv::Point2d centre_px;  // in the view
  double area_mm2 = 0;    // where the response is above half of its peak
  double excess = 0;      // of its peak, see FindBlobs
};

// A lump has a bright and a dark side, or shines, as the light falls: the response is the energy
// of brightness and of both its slopes at one scale, each over its own spread on the coupon. It is
// taken twice: on the view without its lines, and on the brightest within 0.9 mm across the
// lines, in which narrow dark valleys are closed. The local maxima of a surface without blobs thin
// out exponentially; `excess` counts from their median in units of the distance from the median to
// the 90 % quantile. min_excess 3.7 is a false blob on about every third coupon if
// they did so exactly; less in fact (docs/metrics.md).
[[nodiscard]] std::vector<Blob> FindBlobs(const TopView& view, const std::vector<Track>& scars,
                                          const BlobOptions& options = {});

}  // namespace laygauge
