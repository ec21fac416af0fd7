#include "texture/surface.h"

namespace laygauge {

Surface MakeSurface(const Patch& patch, const CouponDescription& coupon) {
  Surface surface;
  surface.patch = &patch;
  surface.coupon = &coupon;
  surface.spectrum = MeasureFieldSpectrum(patch);
  LineSpectrumOptions options;
  options.nominal_lay_deg = coupon.lay_deg;
  const Expected<Lines> lines = FindLines(surface.spectrum, options);
  if (lines) {
    surface.lines = *lines;
  } else {
    surface.no_lines_reason = lines.error().message;
  }
  const double lay = surface.lines ? surface.lines->lay_deg : coupon.lay_deg.value_or(0);
  surface.aligned = AlignField(patch, lay);
  surface.aligned_half = HalveField(surface.aligned);
  const auto pitch_mm =
      surface.lines ? std::optional<double>(surface.lines->pitch_mm) : std::nullopt;
  surface.valleys = FindLineValleys(surface.aligned, pitch_mm, patch.blur_sd_mm);
  const ReducedPatch reduced(patch);
  surface.torn = FindTornArea(
      reduced, surface.lines ? std::optional<double>(surface.lines->lay_deg) : std::nullopt);
  surface.top = MakeTopView(reduced, lay, surface.torn);
  if (!surface.torn.Failed()) {
    surface.scars = FindTracks(surface.top);
  }
  return surface;
}

}  // namespace laygauge
