#pragma once

#include <Eigen/Core>

namespace laygauge {

// Brown's distortion of a point of the normalised image plane (x/z, y/z), in OpenCV's form:
// radial 1 + k1 r^2 + k2 r^4, decentring p1, p2. Source: Brown 1971, "Close-range camera
// calibration", Photogrammetric Engineering 37(8):855-866; signs and order of p1, p2 as in
// OpenCV's calib3d. T: double, or a type that carries derivatives.
template <class T>
Eigen::Matrix<T, 2, 1> DistortBrown(const Eigen::Matrix<T, 2, 1>& point, const T& k1, const T& k2,
                                    const T& p1, const T& p2) {
  const T& x = point.x();
  const T& y = point.y();
  const T r2 = x * x + y * y;
  const T radial = T(1) + r2 * (k1 + r2 * k2);
  return {x * radial + T(2) * p1 * x * y + p2 * (r2 + T(2) * x * x),
          y * radial + p1 * (r2 + T(2) * y * y) + T(2) * p2 * x * y};
}

// Its derivative by the point; rows: distorted x, y; columns: by x, by y.
inline Eigen::Matrix2d DistortBrownDerivative(const Eigen::Vector2d& point, double k1, double k2,
                                              double p1, double p2) {
  const double x = point.x();
  const double y = point.y();
  const double r2 = x * x + y * y;
  const double radial = 1 + r2 * (k1 + r2 * k2);
  const double slope = 2 * (k1 + 2 * k2 * r2);  // d radial / d x = slope x
  const double mixed = slope * x * y + 2 * p1 * x + 2 * p2 * y;
  Eigen::Matrix2d derivative;
  derivative << radial + slope * x * x + 2 * p1 * y + 6 * p2 * x, mixed, mixed,
      radial + slope * y * y + 6 * p1 * y + 2 * p2 * x;
  return derivative;
}

}  // namespace laygauge
