#include "sheet/fit_camera.h"

#include <ceres/ceres.h>
#include <ceres/rotation.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <memory>
#include <thread>

#include "sheet/brown.h"

namespace laygauge {
namespace {

template <class T>
Eigen::Matrix<T, 3, 1> Centre(const T* lens, const T* photo) {
  using std::exp;
  const T mm_per_px = exp(-photo[kLogScale]);
  return {(photo[kSeenX] - lens[kCenterX]) * mm_per_px,
          (photo[kSeenY] - lens[kCenterY]) * mm_per_px, exp(lens[kLogFocal]) * mm_per_px};
}

template <class T>
Eigen::Matrix<T, 2, 1> Project(const T* lens, const T* photo, const Eigen::Matrix<T, 3, 1>& point) {
  Eigen::Matrix<T, 3, 1> seen;
  ceres::AngleAxisRotatePoint(photo + kTurn, point.data(), seen.data());
  seen += Centre(lens, photo);
  const Eigen::Matrix<T, 2, 1> normalised(seen[0] / seen[2], seen[1] / seen[2]);
  const Eigen::Matrix<T, 2, 1> distorted =
      DistortBrown<T>(normalised, lens[kK1], lens[kK2], lens[kP1], lens[kP2]);
  using std::exp;
  const T focal_px = exp(lens[kLogFocal]);
  return {focal_px * distorted[0] + lens[kCenterX], focal_px * distorted[1] + lens[kCenterY]};
}

// Seen minus expected corners, two numbers a corner.
template <class T>
void Compare(const MarkerSighting& marker, const T* lens, const T* photo, T* residuals) {
  constexpr std::array<std::array<int, 2>, 4> kSigns{{{-1, -1}, {1, -1}, {1, 1}, {-1, 1}}};
  const T half = T(marker.half_side_mm) + photo[kSpread];
  const T stretch = T(1) + photo[kStretch];
  for (size_t k = 0; k < 4; ++k) {
    const Eigen::Matrix<T, 3, 1> corner(
        T(marker.centre_mm.x()) + T(kSigns[k][0]) * half,
        (T(marker.centre_mm.y()) + T(kSigns[k][1]) * half) * stretch, T(0));
    const Eigen::Matrix<T, 2, 1> expected = Project(lens, photo, corner);
    residuals[2 * k] = T(marker.corners_px[k].x()) - expected[0];
    residuals[2 * k + 1] = T(marker.corners_px[k].y()) - expected[1];
  }
}

class MarkerCost {
 public:
  MarkerCost(const MarkerSighting& marker, double corner_sd_px)
      : marker_(&marker), corner_sd_px_(corner_sd_px) {}

  template <class T>
  bool operator()(const T* lens, const T* photo, T* residuals) const {
    Compare(*marker_, lens, photo, residuals);
    for (int i = 0; i < 8; ++i) residuals[i] /= T(corner_sd_px_);
    return true;
  }

 private:
  const MarkerSighting* marker_;
  double corner_sd_px_;
};

template <int kSize>
class PriorCost {
 public:
  using Vector = Eigen::Matrix<double, kSize, 1>;
  PriorCost(Vector mean, Vector sd) : mean_(std::move(mean)), sd_(std::move(sd)) {}

  template <class T>
  bool operator()(const T* values, T* residuals) const {
    for (int i = 0; i < kSize; ++i) residuals[i] = (values[i] - T(mean_[i])) / T(sd_[i]);
    return true;
  }

 private:
  Vector mean_;
  Vector sd_;
};

// The problem over `fit`'s unknowns, which it changes in place. The blocks' order: lens, photos.
std::unique_ptr<ceres::Problem> MakeProblem(CameraFit& fit,
                                            const std::vector<std::vector<MarkerSighting>>& photos,
                                            const CameraPriors& priors) {
  // A marker's eight residuals, each of unit variance, have a length of 2.8; three times that is
  // not chance.
  constexpr double kHuber = 8.5;
  auto problem = std::make_unique<ceres::Problem>();
  problem->AddParameterBlock(fit.lens.data(), kLensUnknowns);
  problem->AddResidualBlock(
      new ceres::AutoDiffCostFunction<PriorCost<kLensUnknowns>, kLensUnknowns, kLensUnknowns>(
          new PriorCost<kLensUnknowns>(priors.lens_mean, priors.lens_sd)),
      nullptr, fit.lens.data());
  PhotoVector photo_sd = PhotoVector::Constant(std::numeric_limits<double>::infinity());
  photo_sd[kSpread] = priors.spread_sd_mm;
  photo_sd[kStretch] = priors.stretch_sd;
  for (size_t i = 0; i < photos.size(); ++i) {
    double* unknowns = fit.photos[i].data();
    problem->AddParameterBlock(unknowns, kPhotoUnknowns);
    problem->AddResidualBlock(
        new ceres::AutoDiffCostFunction<PriorCost<kPhotoUnknowns>, kPhotoUnknowns, kPhotoUnknowns>(
            new PriorCost<kPhotoUnknowns>(PhotoVector::Zero(), photo_sd)),
        nullptr, unknowns);
    for (const MarkerSighting& marker : photos[i]) {
      problem->AddResidualBlock(
          new ceres::AutoDiffCostFunction<MarkerCost, 8, kLensUnknowns, kPhotoUnknowns>(
              new MarkerCost(marker, fit.corner_sd_px)),
          new ceres::HuberLoss(kHuber), fit.lens.data(), unknowns);
    }
  }
  return problem;
}

// Standard deviation of one coordinate, from the lengths of two-dimensional errors: their squares'
// median is 2 ln 2 variances. By the median, so that one bad marker does not set it.
double DeviationByMedian(std::vector<double> squares) {
  const auto middle = squares.begin() + static_cast<std::ptrdiff_t>(squares.size() / 2);
  std::nth_element(squares.begin(), middle, squares.end());
  return std::sqrt(*middle / (2 * std::log(2)));
}

// Of a corner's coordinate; where corners of a marker err together (paper that is not flat, uneven
// printing), so large that the four of them count as one.
double CornerDeviation(const CameraFit& fit,
                       const std::vector<std::vector<MarkerSighting>>& photos) {
  std::vector<double> corner_squares;
  std::vector<double> marker_squares;
  for (size_t i = 0; i < photos.size(); ++i) {
    for (const MarkerSighting& marker : photos[i]) {
      Eigen::Vector2d mean = Eigen::Vector2d::Zero();
      for (const Eigen::Vector2d& r : CornerResiduals(fit.lens, fit.photos[i], marker)) {
        corner_squares.push_back(r.squaredNorm());
        mean += r / 4;
      }
      marker_squares.push_back(mean.squaredNorm());
    }
  }
  return std::max(DeviationByMedian(corner_squares), 2 * DeviationByMedian(marker_squares));
}

Eigen::MatrixXd Covariance(ceres::Problem& problem) {
  ceres::CRSMatrix jacobian;
  problem.Evaluate({}, nullptr, nullptr, nullptr, &jacobian);
  Eigen::MatrixXd information = Eigen::MatrixXd::Zero(jacobian.num_cols, jacobian.num_cols);
  for (int row = 0; row < jacobian.num_rows; ++row) {
    for (int a = jacobian.rows[row]; a < jacobian.rows[row + 1]; ++a) {
      for (int b = jacobian.rows[row]; b < jacobian.rows[row + 1]; ++b) {
        information(jacobian.cols[a], jacobian.cols[b]) += jacobian.values[a] * jacobian.values[b];
      }
    }
  }
  // Unknowns differ in size by six decades: scaled to a unit diagonal before it is inverted.
  const Eigen::VectorXd scale = information.diagonal().cwiseSqrt().cwiseInverse();
  const Eigen::MatrixXd scaled = scale.asDiagonal() * information * scale.asDiagonal();
  const Eigen::MatrixXd inverse =
      scaled.ldlt().solve(Eigen::MatrixXd::Identity(scaled.rows(), scaled.cols()));
  return scale.asDiagonal() * inverse * scale.asDiagonal();
}

}  // namespace

Eigen::Vector3d CentreInCamera(const LensVector& lens, const PhotoVector& photo) {
  return Centre(lens.data(), photo.data());
}

SquareCorners CornerResiduals(const LensVector& lens, const PhotoVector& photo,
                              const MarkerSighting& marker) {
  std::array<double, 8> values{};
  Compare(marker, lens.data(), photo.data(), values.data());
  SquareCorners residuals;
  for (size_t k = 0; k < 4; ++k) residuals[k] = {values[2 * k], values[2 * k + 1]};
  return residuals;
}

View ViewOf(const LensVector& lens, const PhotoVector& photo, cv::Size image_size_px,
            const Eigen::Vector2d& centre_mm) {
  View view;
  view.camera = {image_size_px,  std::exp(lens[kLogFocal]),
                 lens[kCenterX], lens[kCenterY],
                 lens[kK1],      lens[kK2],
                 lens[kP1],      lens[kP2]};
  ceres::AngleAxisToRotationMatrix(photo.data() + kTurn,
                                   view.pose.camera_from_sheet_rotation.data());
  view.pose.camera_from_sheet_translation_mm =
      CentreInCamera(lens, photo) -
      view.pose.camera_from_sheet_rotation * Eigen::Vector3d(centre_mm.x(), centre_mm.y(), 0);
  return view;
}

CameraFit FitCamera(CameraFit fit, const std::vector<std::vector<MarkerSighting>>& photos,
                    const CameraPriors& priors, int threads) {
  constexpr double kFirstGuess_px = 0.3;
  constexpr double kFinest_px = 0.02;  // what rendering noise-free squares leaves
  ceres::Solver::Options options;
  options.linear_solver_type = ceres::DENSE_SCHUR;
  // More than there are cores only draws a warning of the solver's.
  const auto cores = static_cast<int>(std::thread::hardware_concurrency());
  options.num_threads = std::min(threads, std::max(1, cores));
  options.max_num_iterations = 100;
  options.function_tolerance = 1e-9;
  options.logging_type = ceres::SILENT;
  fit.corner_sd_px = kFirstGuess_px;
  for (int round = 0; round < 2; ++round) {
    const auto problem = MakeProblem(fit, photos, priors);
    ceres::Solver::Summary summary;
    ceres::Solve(options, problem.get(), &summary);
    fit.converged = summary.IsSolutionUsable();
    if (!fit.converged) return fit;
    fit.corner_sd_px = std::max(kFinest_px, CornerDeviation(fit, photos));
  }
  fit.covariance = Covariance(*MakeProblem(fit, photos, priors));
  return fit;
}

}  // namespace laygauge
