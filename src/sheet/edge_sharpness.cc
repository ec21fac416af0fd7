#include "sheet/edge_sharpness.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <numbers>
#include <optional>
#include <set>

#include "base/statistics.h"
#include "sheet/edge_samples.h"

namespace laygauge {

void EdgeSharpnessOptions::Check() const {
  const auto need = [](bool holds, const char* field, double value, const char* rule) {
    if (!holds) throw BadOption(fmt::format("{} = {}: {}", field, value, rule));
  };
  need(half_width_mm > 0.3, "half_width_mm", half_width_mm, "must be above 0.3");
  need(corner_trim_mm >= 0, "corner_trim_mm", corner_trim_mm, "must not be negative");
  need(bins_per_px >= 2 && bins_per_px <= 10, "bins_per_px", bins_per_px, "must be 2 to 10");
  need(min_contrast > 0 && min_contrast < 1, "min_contrast", min_contrast, "must be 0 to 1");
  need(max_offset_mm > 0 && max_offset_mm < half_width_mm, "max_offset_mm", max_offset_mm,
       "must be above 0 and below half_width_mm");
  need(max_residual > 0, "max_residual", max_residual, "must be above 0");
  need(min_square_edges >= 0, "min_square_edges", min_square_edges, "must not be negative");
  need(min_marker_turn_deg >= 0 && min_marker_turn_deg < 45, "min_marker_turn_deg",
       min_marker_turn_deg, "must be 0 to 45");
}

double SheetSharpness::Plane::At(double x_mm, double y_mm) const {
  return std::clamp(coefficients.dot(Eigen::Vector3d(1, x_mm, y_mm)), low, high);
}

LocalSpread SheetSharpness::At(double x_mm, double y_mm, double turn_deg) const {
  const double turn = turn_deg * std::numbers::pi / 180;
  const double along_sheet = std::pow(std::cos(turn), 2);
  const double x_variance = std::pow(blur_x_mm.At(x_mm, y_mm), 2);
  const double y_variance = std::pow(blur_y_mm.At(x_mm, y_mm), 2);
  const double pixel = pixel_mm.At(x_mm, y_mm);
  const double halo_sd_mm = halo_sd_px * pixel;
  LocalSpread spread;
  spread.px_per_mm = 1 / pixel;
  spread.along_x = {std::sqrt(along_sheet * x_variance + (1 - along_sheet) * y_variance),
                    sharpening, halo_sd_mm};
  spread.along_y = {std::sqrt(along_sheet * y_variance + (1 - along_sheet) * x_variance),
                    sharpening, halo_sd_mm};
  return spread;
}

namespace {

// An edge on its way to an EdgeSharpness.
struct MeasuredEdge {
  KnownEdge edge;
  EdgeStrip strip;
  EdgeProfile profile;
  EdgeFit fit;
};

double BinWidth(const EdgeStrip& strip, const EdgeSharpnessOptions& options) {
  return 1 / (strip.px_per_mm * options.bins_per_px);
}

// Fits and straightens in turn, with a typical sharpening: it hardly moves plateaus and middle, and
// the true one is found from all edges together. Why the edge is of no use, or nothing.
std::optional<std::string> FitStraightened(const EdgeSharpnessOptions& options, MeasuredEdge* e) {
  constexpr int kRounds = 2;
  const double bin_mm = BinWidth(e->strip, options);
  const double pixel_mm = 1 / e->strip.px_per_mm;
  for (int round = 0; round <= kRounds; ++round) {
    e->profile = BinEdge(e->strip.samples, bin_mm, options.half_width_mm);
    if (round == 0) e->fit = GuessEdge(e->profile, pixel_mm);
    if (e->fit.bright - e->fit.dark < options.min_contrast) {
      return fmt::format("its contrast is {:.2f}", e->fit.bright - e->fit.dark);
    }
    e->fit = FitEdge(e->profile, e->fit, pixel_mm, true);
    if (round < kRounds) StraightenEdge(e->strip.samples, e->fit, options.half_width_mm);
  }
  if (std::abs(e->fit.offset_mm) > options.max_offset_mm) {
    return fmt::format("it lies {:.2f} mm off its place", e->fit.offset_mm);
  }
  const double residual = SampleScatter(e->strip.samples, e->fit, options.half_width_mm);
  if (!(residual <= options.max_residual)) {
    return fmt::format("it is dirty, covered or torn (scatter {:.0f} % of its contrast)",
                       100 * residual);
  }
  return std::nullopt;
}

// Variance within bins of 0.1 mm: small when the edge lies where assumed.
double Scatter(const EdgeStrip& strip, double half_width_mm) {
  const EdgeProfile profile = BinEdge(strip.samples, 0.1, half_width_mm);
  double within = 0;
  for (const EdgeSample& sample : strip.samples) within += sample.value * sample.value;
  for (size_t bin = 0; bin < profile.size(); ++bin) {
    within -= profile.count[bin] * profile.value[bin] * profile.value[bin];
  }
  return within / static_cast<double>(strip.samples.size());
}

class Collector {
 public:
  Collector(const Photo& photo, const View& view, const EdgeSharpnessOptions& options)
      : photo_(photo), view_(view), options_(options) {}

  void AddSquare(const std::string& target, const SharpnessSquare& square) {
    const auto edges_with = [&](double tilt_deg) {
      return EdgesOfSquare(target, {square.x_mm, square.y_mm}, square.side_mm, tilt_deg);
    };
    // One edge tells the tilt's sense.
    auto given = Read(edges_with(square.tilt_deg).front());
    auto other = Read(edges_with(-square.tilt_deg).front());
    if (!given || !other) return Skip((given ? other : given).error().message);
    const bool as_given =
        Scatter(*given, options_.half_width_mm) <= Scatter(*other, options_.half_width_mm);
    const auto known = edges_with(as_given ? square.tilt_deg : -square.tilt_deg);
    AddIfUsable({known.front(), std::move(*(as_given ? given : other)), {}, {}});
    for (size_t i = 1; i < known.size(); ++i) {
      if (auto strip = Read(known[i])) {
        AddIfUsable({known[i], std::move(*strip), {}, {}});
      } else {
        Skip(strip.error().message);
      }
    }
  }

  // `min_turn_deg`: edges nearer to the pixel rows or columns are left out.
  void AddMarker(const SheetMarker& marker, double min_turn_deg) {
    const std::string target = fmt::format("marker {}", marker.id);
    for (const KnownEdge& edge :
         EdgesOfSquare(target, {marker.x_mm, marker.y_mm}, marker.side_mm, 0)) {
      auto strip = Read(edge);
      if (!strip) {
        Skip(strip.error().message);
      } else if (strip->turn_deg >= min_turn_deg) {
        AddIfUsable({edge, std::move(*strip), {}, {}});
      }
    }
  }

  std::vector<MeasuredEdge> edges;
  std::vector<std::string> skipped;

 private:
  Expected<EdgeStrip> Read(const KnownEdge& edge) const {
    return ReadEdge(photo_, view_, edge, options_.half_width_mm, options_.corner_trim_mm);
  }
  void Skip(std::string why) { skipped.push_back(std::move(why)); }
  void AddIfUsable(MeasuredEdge edge) {
    if (const auto why = FitStraightened(options_, &edge)) {
      Skip(fmt::format("{}: the {} edge of {} is not used: {}.", photo_.file, edge.edge.side,
                       edge.edge.target, *why));
    } else {
      edges.push_back(std::move(edge));
    }
  }

  const Photo& photo_;
  const View& view_;
  const EdgeSharpnessOptions& options_;
};

// The sharpening that all edges share, in pixels: all profiles laid over one another, normalised.
PointSpread FitCommonSpread(const std::vector<MeasuredEdge>& edges, double half_width_px) {
  std::vector<EdgeSample> pooled;
  for (const MeasuredEdge& e : edges) {
    for (size_t bin = 0; bin < e.profile.size(); ++bin) {
      if (e.profile.count[bin] == 0) continue;
      const double modelled = e.fit.Value(e.profile.distance_mm[bin]);
      constexpr double kClear = 0.002;  // of black and white, where the image clips
      if (modelled < kClear || modelled > 1 - kClear) continue;
      pooled.push_back({(e.profile.distance_mm[bin] - e.fit.offset_mm) * e.strip.px_per_mm, 0,
                        (e.profile.value[bin] - e.fit.dark) / (e.fit.bright - e.fit.dark)});
    }
  }
  // FitEdge clips at 0 and 1 as an image does; the normalised edge must not be clipped there.
  constexpr double kShrink = 0.5;
  for (EdgeSample& sample : pooled) sample.value = 0.25 + kShrink * sample.value;
  const EdgeProfile profile = BinEdge(pooled, 0.125, half_width_px);
  std::optional<EdgeFit> best;
  for (const double sharpening : {0.02, 0.2, 0.6}) {
    EdgeFit start = GuessEdge(profile, 1);
    start.spread.sharpening = sharpening;
    const EdgeFit fit = FitEdge(profile, start, 1, false);
    if (!best || fit.residual_rms < best->residual_rms) best = fit;
  }
  return best->spread;
}

// Least squares, when the edges stand on three places or more that are not in line; else constant.
SheetSharpness::Plane FitPlane(const std::vector<Eigen::Vector2d>& places,
                               const std::vector<double>& values) {
  SheetSharpness::Plane plane;
  plane.low = *std::min_element(values.begin(), values.end());
  plane.high = *std::max_element(values.begin(), values.end());
  const auto n = static_cast<Eigen::Index>(values.size());
  Eigen::MatrixX3d terms(n, 3);
  for (Eigen::Index i = 0; i < n; ++i) {
    terms.row(i) << 1, places[static_cast<size_t>(i)].transpose();
  }
  const Eigen::Map<const Eigen::VectorXd> right(values.data(), n);
  const Eigen::RowVector3d mean = terms.colwise().mean();
  const Eigen::MatrixX2d centred = (terms.rowwise() - mean).rightCols<2>();
  constexpr double kSpread = 20;  // mm, standard deviation of the places across their line
  const double narrow = Eigen::JacobiSVD<Eigen::MatrixX2d>(centred).singularValues()[1];
  if (n < 5 || narrow < kSpread * std::sqrt(static_cast<double>(n))) {
    plane.coefficients = {right.mean(), 0, 0};
  } else {
    plane.coefficients = terms.colPivHouseholderQr().solve(right);
  }
  return plane;
}

EdgeSharpness Describe(const MeasuredEdge& e) {
  EdgeSharpness sharpness;
  sharpness.target = e.edge.target;
  sharpness.side = e.edge.side;
  sharpness.at_mm = e.edge.middle_mm;
  sharpness.across_x = std::abs(e.edge.outward.x()) > std::abs(e.edge.outward.y());
  sharpness.turn_deg = e.strip.turn_deg;
  sharpness.px_per_mm = e.strip.px_per_mm;
  sharpness.fit = e.fit;
  sharpness.modulation = ModulationTransfer(e.profile, e.fit, kReportedCyclesPerMm);
  sharpness.shoot = MeasureShoot(e.profile, e.fit);
  sharpness.mtf50_per_mm = Mtf50(e.profile, e.fit);
  sharpness.rise_mm = e.fit.spread.RiseMm();
  return sharpness;
}

// Blur, pixel and paper as planes over the sheet; with the sharpening held, an edge's blur is the
// one thing left that tells its sharpness.
void FitPlanes(SheetSharpness* sheet) {
  std::vector<Eigen::Vector2d> places[2];
  std::vector<double> blurs[2];
  std::vector<Eigen::Vector2d> all;
  std::vector<double> pixels;
  std::vector<double> papers;
  for (const EdgeSharpness& edge : sheet->edges) {
    places[edge.across_x ? 0 : 1].push_back(edge.at_mm);
    blurs[edge.across_x ? 0 : 1].push_back(edge.fit.spread.blur_sd_mm);
    all.push_back(edge.at_mm);
    pixels.push_back(1 / edge.px_per_mm);
    papers.push_back(edge.fit.bright);
  }
  // Edges of one direction only (a fallback's): it speaks for both.
  for (const int axis : {0, 1}) {
    if (!blurs[axis].empty()) continue;
    places[axis] = places[1 - axis];
    blurs[axis] = blurs[1 - axis];
  }
  sheet->blur_x_mm = FitPlane(places[0], blurs[0]);
  sheet->blur_y_mm = FitPlane(places[1], blurs[1]);
  sheet->pixel_mm = FitPlane(all, pixels);
  sheet->paper = FitPlane(all, papers);
}

}  // namespace

Expected<SheetSharpness> MeasureSharpness(const Photo& photo, const View& view,
                                          const SheetDescription& sheet,
                                          const EdgeSharpnessOptions& options) {
  options.Check();
  Collector collector(photo, view, options);
  for (size_t i = 0; i < sheet.sharpness_squares.size(); ++i) {
    collector.AddSquare(fmt::format("sharpness square {}", i + 1), sheet.sharpness_squares[i]);
  }
  SheetSharpness result;
  if (static_cast<double>(collector.edges.size()) < options.min_square_edges) {
    result.from_markers = true;
    const size_t before = collector.edges.size();
    for (const SheetMarker& marker : sheet.markers) {
      collector.AddMarker(marker, options.min_marker_turn_deg);
    }
    if (collector.edges.size() == before) {
      for (const SheetMarker& marker : sheet.markers) collector.AddMarker(marker, 0);
    }
  }
  result.skipped = std::move(collector.skipped);
  if (collector.edges.empty()) {
    return Unmeasurable(fmt::format(
        "{}: no edge of the sheet's sharpness squares or markers can be read, so the photo's "
        "sharpness is unknown: keep the squares clean, uncovered and in the picture.",
        photo.file));
  }
  double half_width_px = 0;
  for (const MeasuredEdge& e : collector.edges) {
    half_width_px = std::max(half_width_px, options.half_width_mm * e.strip.px_per_mm);
  }
  const PointSpread common = FitCommonSpread(collector.edges, half_width_px);
  result.sharpening = common.sharpening;
  result.halo_sd_px = common.halo_sd_mm;
  for (MeasuredEdge& e : collector.edges) {
    const double pixel_mm = 1 / e.strip.px_per_mm;
    EdgeFit start = e.fit;
    start.spread = {common.blur_sd_mm * pixel_mm, common.sharpening, common.halo_sd_mm * pixel_mm};
    e.fit = FitEdge(e.profile, start, pixel_mm, true);
    result.edges.push_back(Describe(e));
  }
  FitPlanes(&result);
  return result;
}

}  // namespace laygauge
