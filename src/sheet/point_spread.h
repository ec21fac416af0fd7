#pragma once

namespace laygauge {

// A camera's point spread with a phone's sharpening, in linear light, in lengths on the sheet: a
// Gaussian of standard deviation blur_sd, then unsharp masking, which adds `sharpening` times the
// difference from a copy blurred by halo_sd. Hence with G(sd) a Gaussian of unit integral
//   spread     = (1 + a) G(s) - a G(sqrt(s^2 + r^2)),   a sharpening, s blur_sd, r halo_sd
//   edge       = the same with G's integral, the normal distribution function
//   modulation = the same with exp(-2 pi^2 sd^2 f^2), G's Fourier transform.
// Closed forms (analytic; Gonzalez & Woods, "Digital Image Processing", for unsharp masking).
struct PointSpread {
  double blur_sd_mm = 0;
  double sharpening = 0;
  double halo_sd_mm = 0;

  // How a step from 0 to 1 appears at a signed distance from it.
  [[nodiscard]] double EdgeResponse(double distance_mm) const;
  // Its derivative, a mm: the line spread.
  [[nodiscard]] double LineSpread(double distance_mm) const;
  // 1 at frequency 0; above 1 where sharpening exceeds the blur.
  [[nodiscard]] double Modulation(double cycles_per_mm) const;
  // The frequency at which the modulation has fallen to a half, cycles a mm. blur_sd_mm > 0.
  [[nodiscard]] double Mtf50PerMm() const;
  // From 10 to 90 % of the step, mm: between the first place where the response reaches either.
  [[nodiscard]] double RiseMm() const;
};

// MTF50 times the standard deviation of a Gaussian: sqrt(ln 2 / 2) / pi.
constexpr double kMtf50OfGaussian = 0.187390625129;

}  // namespace laygauge
