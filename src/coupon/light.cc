#include "coupon/light.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>

#include "base/statistics.h"
#include "coupon/rectify.h"
#include "photo/srgb.h"

namespace laygauge {
namespace {

constexpr double kClipped = 0.992;  // encoded: 253 of 255; brighter, the noise is cut off

struct PaperSample {
  double x_mm = 0;
  double y_mm = 0;
  double log_light = 0;
  bool clipped = false;
};

// Rectangles of the sheet on which something is printed or lies.
std::vector<cv::Rect2d> PrintedParts(const SheetDescription& sheet, double keep_off_mm) {
  std::vector<cv::Rect2d> parts;
  const auto add = [&](double x, double y, double width, double height) {
    parts.emplace_back(x - width / 2 - keep_off_mm, y - height / 2 - keep_off_mm,
                       width + 2 * keep_off_mm, height + 2 * keep_off_mm);
  };
  for (const Well& well : sheet.wells) {
    add(well.x_mm, well.y_mm, well.width_mm, well.height_mm);
    // The name stands over the upper left corner, 3 mm high.
    add(well.x_mm - well.width_mm / 2 + 4, well.y_mm - well.height_mm / 2 - 1.5, 9, 3);
  }
  for (const SheetMarker& m : sheet.markers) add(m.x_mm, m.y_mm, m.side_mm, m.side_mm);
  for (const SharpnessSquare& s : sheet.sharpness_squares) {
    const double turned_mm = s.side_mm * (std::abs(std::cos(s.tilt_deg * CV_PI / 180)) +
                                          std::abs(std::sin(s.tilt_deg * CV_PI / 180)));
    add(s.x_mm, s.y_mm, turned_mm, turned_mm);
  }
  for (const GrayPatch& g : sheet.grays) add(g.x_mm, g.y_mm, g.side_mm, g.side_mm);
  const ScaleBar& bar = sheet.scale_bar;
  add((bar.x0_mm + bar.x1_mm) / 2, bar.y_mm, bar.length_mm(), 3);
  return parts;
}

bool IsInAny(const std::vector<cv::Rect2d>& parts, const cv::Point2d& point) {
  return std::any_of(parts.begin(), parts.end(),
                     [&](const cv::Rect2d& part) { return part.contains(point); });
}

// Mean encoded value, 0..1, of the square of (2 reach + 1) pixels. On plain paper the mean before
// and after linearising differ by less than 1e-4.
double MeanEncoded(const cv::Mat& encoded, int x, int y, int reach) {
  double sum = 0;
  for (int r = y - reach; r <= y + reach; ++r) {
    if (encoded.depth() == CV_8U) {
      const auto* row = encoded.ptr<std::uint8_t>(r);
      int row_sum = 0;
      for (int c = x - reach; c <= x + reach; ++c) row_sum += row[c];
      sum += row_sum;
    } else {
      const auto* row = encoded.ptr<std::uint16_t>(r);
      for (int c = x - reach; c <= x + reach; ++c) sum += row[c];
    }
  }
  const int side = 2 * reach + 1;
  return sum / (side * side * (encoded.depth() == CV_8U ? 255.0 : 65535.0));
}

// Mean encoded value round a sheet point; none if it is not in the photo.
std::optional<double> SampleSheet(const Photo& photo, const View& view, const cv::Point2d& at_mm,
                                  int reach_px) {
  const Eigen::Vector2d pixel = view.PixelFromSheet(at_mm.x, at_mm.y, 0);
  const double border = reach_px + 1;
  if (!(pixel.x() >= border && pixel.y() >= border && pixel.x() < photo.size().width - 1 - border &&
        pixel.y() < photo.size().height - 1 - border)) {
    return std::nullopt;
  }
  return MeanEncoded(photo.encoded, static_cast<int>(std::lround(pixel.x())),
                     static_cast<int>(std::lround(pixel.y())), reach_px);
}

std::vector<PaperSample> SamplePaper(const Photo& photo, const View& view,
                                     const SheetDescription& sheet, const LightOptions& options) {
  constexpr double kEdge_mm = 2;
  const auto parts = PrintedParts(sheet, options.keep_off_mm);
  const double step_mm = std::sqrt(sheet.page_width_mm * sheet.page_height_mm / 8000);
  const double px_per_mm = view.PxPerMm(sheet.page_width_mm / 2, sheet.page_height_mm / 2, 0);
  const int reach_px = std::max(1, static_cast<int>(0.25 * px_per_mm));
  std::vector<PaperSample> samples;
  for (double y = kEdge_mm; y <= sheet.page_height_mm - kEdge_mm; y += step_mm) {
    for (double x = kEdge_mm; x <= sheet.page_width_mm - kEdge_mm; x += step_mm) {
      if (IsInAny(parts, {x, y})) continue;
      const auto encoded = SampleSheet(photo, view, {x, y}, reach_px);
      if (!encoded) continue;
      const double linear = std::max(LinearFromSrgb(*encoded), 1e-4);
      samples.push_back({x, y, std::log(linear), *encoded > kClipped});
    }
  }
  return samples;
}

Eigen::VectorXd Terms(const cv::Point2d& page_mm, int degree, double x_mm, double y_mm) {
  const double x = 2 * x_mm / page_mm.x - 1;
  const double y = 2 * y_mm / page_mm.y - 1;
  Eigen::VectorXd terms((degree + 1) * (degree + 2) / 2);
  int k = 0;
  double x_power = 1;
  for (int i = 0; i <= degree; ++i, x_power *= x) {
    double power = x_power;
    for (int j = 0; i + j <= degree; ++j, power *= y) terms[k++] = power;
  }
  return terms;
}

// Weight of a residual (paper minus field, in ln): Tukey's biweight, with half the reach for what
// is darker. A clipped sample is a lower bound: a brighter field satisfies it.
double Weight(double residual, double sd, bool clipped) {
  if (clipped) return residual > 0 ? 1 : 0;
  const double u = residual / (residual < 0 ? 2 * sd : 4 * sd);
  return std::abs(u) < 1 ? (1 - u * u) * (1 - u * u) : 0;
}

void FitField(const std::vector<PaperSample>& samples, Light& light) {
  constexpr int kRounds = 12;
  constexpr double kSmallestSd = 0.003;  // the paper's own structure and the noise of a sample
  const auto n = static_cast<Eigen::Index>(samples.size());
  const int terms = (light.degree + 1) * (light.degree + 2) / 2;
  Eigen::MatrixXd design(n, terms);
  Eigen::VectorXd values(n);
  for (Eigen::Index i = 0; i < n; ++i) {
    design.row(i) = Terms(light.page_mm, light.degree, samples[i].x_mm, samples[i].y_mm);
    values[i] = samples[i].log_light;
  }
  std::vector<double> logs(values.data(), values.data() + n);
  // Table, thick shadow or a hand: far below the bright tenth of the paper; not even a start.
  const double floor = Quantile(logs, 0.9) - 1.2;
  Eigen::VectorXd weights = (values.array() > floor).cast<double>();
  Eigen::VectorXd solution;
  std::vector<double> used;
  for (int round = 0; round < kRounds; ++round) {
    const Eigen::MatrixXd weighted = weights.asDiagonal() * design;
    // A ridge of 1e-6 of a sample each keeps the solution defined where no paper was seen.
    Eigen::MatrixXd normal = design.transpose() * weighted;
    normal.diagonal().array() += 1e-6 * static_cast<double>(n);
    solution = normal.ldlt().solve(weighted.transpose() * values);
    const Eigen::VectorXd residuals = values - design * solution;
    used.clear();
    for (Eigen::Index i = 0; i < n; ++i) {
      if (values[i] > floor && !samples[i].clipped) used.push_back(residuals[i]);
    }
    light.residual_sd = used.size() < 10 ? kSmallestSd : RobustDeviation(used);
    const double sd = std::max(light.residual_sd, kSmallestSd);
    for (Eigen::Index i = 0; i < n; ++i) {
      weights[i] = values[i] > floor ? Weight(residuals[i], sd, samples[i].clipped) : 0;
    }
    // All clipped and all satisfied: the bounds are all there is to know.
    if (weights.sum() < 2.0 * terms) weights = (values.array() > floor).cast<double>();
  }
  light.coefficients.assign(solution.data(), solution.data() + solution.size());
  light.used_pct =
      100.0 * static_cast<double>((weights.array() > 0).count()) / static_cast<double>(n);
}

double Unevenness(const Light& light, const SheetDescription& sheet) {
  double darkest = INFINITY;
  double brightest = 0;
  for (const Well& well : sheet.wells) {
    for (const double across : {-0.5, 0.0, 0.5}) {
      for (const double down : {-0.5, 0.0, 0.5}) {
        const double here =
            light.At(well.x_mm + across * well.width_mm, well.y_mm + down * well.height_mm);
        darkest = std::min(darkest, here);
        brightest = std::max(brightest, here);
      }
    }
  }
  return sheet.wells.empty() ? 0 : brightest / darkest - 1;
}

std::optional<ToneCheck> CheckTone(const Photo& photo, const View& view,
                                   const SheetDescription& sheet, const Light& light) {
  ToneCheck tone;
  std::vector<double> xs;
  std::vector<double> ys;
  for (const GrayPatch& gray : sheet.grays) {
    const double px_per_mm = view.PxPerMm(gray.x_mm, gray.y_mm, 0);
    const int reach = std::max(1, static_cast<int>(0.3 * gray.side_mm * px_per_mm));
    const auto encoded = SampleSheet(photo, view, {gray.x_mm, gray.y_mm}, reach);
    tone.measured.push_back(NAN);
    if (!encoded || *encoded > kClipped || gray.reflectance <= 0) continue;
    tone.measured.back() = LinearFromSrgb(*encoded) / light.At(gray.x_mm, gray.y_mm);
    xs.push_back(std::log(gray.reflectance));
    ys.push_back(std::log(std::max(tone.measured.back(), 1e-4)));
  }
  if (xs.size() < 3) return std::nullopt;
  const double mean_x = Mean(xs);
  const double mean_y = Mean(ys);
  double sxx = 0;
  double sxy = 0;
  for (size_t i = 0; i < xs.size(); ++i) {
    sxx += (xs[i] - mean_x) * (xs[i] - mean_x);
    sxy += (xs[i] - mean_x) * (ys[i] - mean_y);
  }
  if (sxx <= 0) return std::nullopt;
  tone.gamma = sxy / sxx;
  tone.scale = std::exp(mean_y - tone.gamma * mean_x);
  double squares = 0;
  for (size_t i = 0; i < xs.size(); ++i) {
    squares += std::pow(ys[i] - mean_y - tone.gamma * (xs[i] - mean_x), 2);
  }
  tone.residual_sd = std::sqrt(squares / static_cast<double>(xs.size() - 2));
  return tone;
}

// Paper at full scale only bounds the light from below; the grays are not clipped, and tell the
// rest as far as they are printed as they should be.
void RaiseByGrays(const Photo& photo, const View& view, const SheetDescription& sheet,
                  Light& light) {
  constexpr double kMostlyClippedPct = 50;
  if (light.clipped_pct < kMostlyClippedPct || !light.tone) return;
  std::vector<double> logs;
  for (size_t i = 0; i < sheet.grays.size(); ++i) {
    const double ratio = light.tone->measured[i] / sheet.grays[i].reflectance;
    if (ratio > 0) logs.push_back(std::log(ratio));
  }
  light.coefficients[0] += std::max(0.0, Median(logs));
  light.tone = CheckTone(photo, view, sheet, light);
}

void AddWarnings(const Photo& photo, const LightOptions& options, Light& light) {
  if (light.clipped_pct > 2) {
    light.warnings.push_back(fmt::format(
        "{}: {:.0f} % of the paper is over-exposed, so the light is levelled less exactly there; "
        "take the photo with less exposure",
        photo.file, light.clipped_pct));
  }
  if (light.unevenness > 1) {
    light.warnings.push_back(fmt::format(
        "{}: the light on the brightest well is {:.1f} times that on the darkest; light the sheet "
        "more evenly",
        photo.file, 1 + light.unevenness));
  }
  if (light.tone && std::abs(light.tone->gamma - 1) > options.allowed_gamma_error) {
    light.warnings.push_back(fmt::format(
        "{}: the gray patches come out with an exponent of {:.2f} instead of 1, so the camera's "
        "tone curve is far from sRGB (or the sheet's print is); switch off HDR and filters",
        photo.file, light.tone->gamma));
  }
}

}  // namespace

void LightOptions::Check() const {
  const auto require = [](const char* field, double value, double low, double high) {
    if (!(value >= low && value <= high)) {
      throw BadOption(
          fmt::format("LightOptions.{} is {}; {} to {} is allowed", field, value, low, high));
    }
  };
  require("degree", degree, 0, 8);
  require("keep_off_mm", keep_off_mm, 0, 10);
  require("darkest_paper", darkest_paper, 0, 0.5);
  require("allowed_gamma_error", allowed_gamma_error, 0, 5);
}

double Light::At(double x_mm, double y_mm) const {
  // Horner's rule per power of x; the order of coefficients is that of Terms().
  const double x = 2 * x_mm / page_mm.x - 1;
  const double y = 2 * y_mm / page_mm.y - 1;
  double sum = 0;
  double x_power = 1;
  size_t first = 0;
  for (int i = 0; i <= degree; ++i, x_power *= x) {
    const int count = degree + 1 - i;
    double in_y = 0;
    for (int j = count - 1; j >= 0; --j) in_y = in_y * y + coefficients[first + j];
    sum += x_power * in_y;
    first += count;
  }
  return std::exp(sum);
}

Expected<Light> EstimateLight(const Photo& photo, const View& view, const SheetDescription& sheet,
                              const LightOptions& options) {
  options.Check();
  const std::vector<PaperSample> samples = SamplePaper(photo, view, sheet, options);
  constexpr size_t kFewestSamples = 200;
  if (samples.size() < kFewestSamples) {
    return Unmeasurable(fmt::format(
        "{}: too little of the sheet's bare paper is in the photo to level the light by; frame "
        "the whole sheet",
        photo.file));
  }
  Light light;
  light.page_mm = {sheet.page_width_mm, sheet.page_height_mm};
  light.degree = options.degree;
  FitField(samples, light);
  const auto clipped =
      std::count_if(samples.begin(), samples.end(), [](const PaperSample& s) { return s.clipped; });
  light.clipped_pct = 100.0 * static_cast<double>(clipped) / static_cast<double>(samples.size());
  const double middle = light.At(sheet.page_width_mm / 2, sheet.page_height_mm / 2);
  if (middle < options.darkest_paper) {
    return Unmeasurable(
        fmt::format("{}: the photo is too dark: white paper reaches {:.1f} % of full scale in its "
                    "middle, {:.0f} "
                    "% is the least; use more exposure or more light",
                    photo.file, 100 * middle, 100 * options.darkest_paper));
  }
  light.unevenness = Unevenness(light, sheet);
  light.tone = CheckTone(photo, view, sheet, light);
  RaiseByGrays(photo, view, sheet, light);
  AddWarnings(photo, options, light);
  return light;
}

}  // namespace laygauge
