#include "sheet/edge_samples.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

namespace laygauge {

std::vector<KnownEdge> EdgesOfSquare(const std::string& target, const Eigen::Vector2d& center_mm,
                                     double side_mm, double turn_deg) {
  const double turn = turn_deg * std::numbers::pi / 180;
  const Eigen::Vector2d right(std::cos(turn), -std::sin(turn));
  const Eigen::Vector2d down(std::sin(turn), std::cos(turn));
  std::vector<KnownEdge> edges;
  const auto add = [&](const char* side, const Eigen::Vector2d& outward) {
    edges.push_back({target, side, center_mm + outward * side_mm / 2, outward,
                     Eigen::Vector2d(-outward.y(), outward.x()), side_mm});
  };
  add("right", right);
  add("bottom", down);
  add("left", -right);
  add("top", -down);
  return edges;
}

namespace {

constexpr int kCubicTerms = 10;

// Pixel -> (distance, along), a full cubic about the strip's middle.
class LocalMap {
 public:
  LocalMap(const View& view, const KnownEdge& edge, double half_width_mm) {
    constexpr int kGrid = 7;
    Eigen::Matrix<double, kGrid * kGrid, 2> pixels;
    Eigen::Matrix<double, kGrid * kGrid, 2> places;
    for (int i = 0; i < kGrid; ++i) {
      for (int j = 0; j < kGrid; ++j) {
        const double distance = half_width_mm * (2.0 * i / (kGrid - 1) - 1);
        const double along = edge.length_mm / 2 * (2.0 * j / (kGrid - 1) - 1);
        const Eigen::Vector2d at = edge.middle_mm + distance * edge.outward + along * edge.along;
        pixels.row(i * kGrid + j) = view.PixelFromSheet(at.x(), at.y(), 0).transpose();
        places.row(i * kGrid + j) << distance, along;
      }
    }
    center_ = pixels.colwise().mean().transpose();
    scale_ = 1 / (pixels.rowwise() - center_.transpose()).cwiseAbs().maxCoeff();
    low_ = pixels.colwise().minCoeff().transpose();
    high_ = pixels.colwise().maxCoeff().transpose();
    Eigen::Matrix<double, kGrid * kGrid, kCubicTerms> terms;
    for (int i = 0; i < terms.rows(); ++i) terms.row(i) = Terms(pixels(i, 0), pixels(i, 1));
    coefficients_ = terms.colPivHouseholderQr().solve(places);
  }

  // The places along a row of pixels: a cubic in x of two parts.
  class Row {
   public:
    Row(const LocalMap& map, double y_px) : map_(map) {
      const double y = (y_px - map.center_.y()) * map.scale_;
      const auto& c = map.coefficients_;  // of the terms in the order of Terms()
      powers_[0] = c.row(0) + y * (c.row(2) + y * (c.row(5) + y * c.row(9)));
      powers_[1] = c.row(1) + y * (c.row(4) + y * c.row(8));
      powers_[2] = c.row(3) + y * c.row(7);
      powers_[3] = c.row(6);
    }
    [[nodiscard]] Eigen::Vector2d Place(double x_px) const {
      const double x = (x_px - map_.center_.x()) * map_.scale_;
      return powers_[0] + x * (powers_[1] + x * (powers_[2] + x * powers_[3]));
    }

   private:
    const LocalMap& map_;
    std::array<Eigen::Vector2d, 4> powers_;
  };
  [[nodiscard]] const Eigen::Vector2d& low() const { return low_; }
  [[nodiscard]] const Eigen::Vector2d& high() const { return high_; }

 private:
  [[nodiscard]] Eigen::Matrix<double, 1, kCubicTerms> Terms(double x_px, double y_px) const {
    const double x = (x_px - center_.x()) * scale_;
    const double y = (y_px - center_.y()) * scale_;
    Eigen::Matrix<double, 1, kCubicTerms> terms;
    terms << 1, x, y, x * x, x * y, y * y, x * x * x, x * x * y, x * y * y, y * y * y;
    return terms;
  }

  Eigen::Vector2d center_, low_, high_;
  double scale_ = 1;
  Eigen::Matrix<double, kCubicTerms, 2> coefficients_;
};

}  // namespace

Expected<EdgeStrip> ReadEdge(const Photo& photo, const View& view, const KnownEdge& edge,
                             double half_width_mm, double trim_mm) {
  const LocalMap map(view, edge, half_width_mm);
  const cv::Point low(static_cast<int>(std::floor(map.low().x())),
                      static_cast<int>(std::floor(map.low().y())));
  const cv::Point high(static_cast<int>(std::ceil(map.high().x())) + 1,
                       static_cast<int>(std::ceil(map.high().y())) + 1);
  const cv::Rect box(low, high);
  if ((box & cv::Rect({}, photo.size())) != box) {
    return Unmeasurable(fmt::format("{}: the {} edge of {} is not wholly in the photo.", photo.file,
                                    edge.side, edge.target));
  }
  EdgeStrip strip;
  const cv::Mat linear = LinearRegion(photo, box);
  for (int row = 0; row < box.height; ++row) {
    const auto* values = linear.ptr<float>(row);
    const LocalMap::Row places(map, box.y + row);
    for (int column = 0; column < box.width; ++column) {
      const Eigen::Vector2d place = places.Place(box.x + column);
      if (std::abs(place.x()) >= half_width_mm) continue;
      if (std::abs(place.y()) >= edge.length_mm / 2 - trim_mm) continue;
      strip.samples.push_back({place.x(), place.y(), values[column]});
    }
  }
  const Eigen::Matrix2d pixel = view.PixelBySheet(edge.middle_mm.x(), edge.middle_mm.y(), 0);
  const Eigen::Vector2d along = (pixel * edge.along).normalized();
  const Eigen::Vector2d outward = pixel * edge.outward;
  strip.px_per_mm = std::abs(outward.x() * along.y() - outward.y() * along.x());
  const double steep =
      std::atan2(std::abs(along.y()), std::abs(along.x())) * 180 / std::numbers::pi;
  strip.turn_deg = std::min(steep, 90 - steep);
  return strip;
}

}  // namespace laygauge
