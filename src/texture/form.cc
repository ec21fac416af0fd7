#include "texture/form.h"

#include <Eigen/Dense>

namespace laygauge {
namespace {

using Row = Eigen::Matrix<double, 6, 1>;

// From -1 to 1 over `count` pixels.
double Scaled(int pixel, int count) { return 2.0 * pixel / count - 1; }

Row Basis(double u, double v) { return {1, u, v, u * u, u * v, v * v}; }

double WeightAt(const cv::Mat& weights, int y, int x) {
  return weights.type() == CV_8UC1 ? weights.at<std::uint8_t>(y, x) : weights.at<float>(y, x);
}

}  // namespace

void RemoveForm(cv::Mat& values, const cv::Mat& weights, int step) {
  Eigen::Matrix<double, 6, 6> normal = Eigen::Matrix<double, 6, 6>::Zero();
  Row right = Row::Zero();
  for (int y = 0; y < values.rows; y += step) {
    for (int x = 0; x < values.cols; x += step) {
      const double weight = WeightAt(weights, y, x);
      if (weight > 0) {
        const Row row = Basis(Scaled(x, values.cols), Scaled(y, values.rows));
        normal += weight * row * row.transpose();
        right += weight * values.at<float>(y, x) * row;
      }
    }
  }
  const Row form = normal.ldlt().solve(right);
  for (int y = 0; y < values.rows; ++y) {
    const double v = Scaled(y, values.rows);
    // In powers of x from here on.
    const double slope = form[1] + form[4] * v;
    const double constant = form[0] + form[2] * v + form[5] * v * v;
    const double per_pixel = 2.0 / values.cols;
    const auto c0 = static_cast<float>(constant - slope + form[3]);
    const auto c1 = static_cast<float>((slope - 2 * form[3]) * per_pixel);
    const auto c2 = static_cast<float>(form[3] * per_pixel * per_pixel);
    auto* row = values.ptr<float>(y);
    for (int x = 0; x < values.cols; ++x) {
      const auto at = static_cast<float>(x);
      row[x] -= c0 + at * (c1 + at * c2);
    }
  }
}

}  // namespace laygauge
