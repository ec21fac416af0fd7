#include "coupon/equalize.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>

#include "coupon/equalizing_kernel.h"
#include "sheet/slanted_edge.h"
#include "support/truth_view.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;

constexpr double kWorkingSd = 0.060;

LocalSpread Isotropic(const PointSpread& spread) { return {spread, spread, 16.5}; }

double TransferOf(const cv::Mat& taps, double f_per_sample) {
  double sum = 0;
  for (int i = 0; i < taps.rows; ++i) {
    sum += taps.at<float>(i) * std::cos(2 * std::numbers::pi * f_per_sample * (i - taps.rows / 2));
  }
  return sum;
}

// What cameras show: (blur mm, sharpening, halo mm), from none to strong, blurrier than the working
// resolution too.
const std::vector<PointSpread> kCameras = {
    {0.045, 0, 0},       {0.030, 0, 0},       {0.044, 0.45, 0.07}, {0.039, 0.08, 0.12},
    {0.042, 0.30, 0.09}, {0.050, 0.60, 0.06}, {0.066, 0, 0}};

// Analytic: filter times point spread must be the Gaussian of 60 um, exp(-2 pi^2 sd^2 f^2), along,
// across and between the axes. 0.008 of contrast: 0.005 for the two terms, 0.002 for the taps of
// either axis (design figures of DesignEqualizer).
TEST(DesignEqualizer, LeavesTheWorkingGaussian) {
  for (const PointSpread& camera : kCameras) {
    const SeparableFilter filter = DesignEqualizer(Isotropic(camera), 20, kWorkingSd, 2);
    for (const double angle_deg : {0.0, 30.0, 45.0, 90.0}) {
      for (double f = 0; f <= 8; f += 0.25) {
        const double fx = f * std::cos(angle_deg * std::numbers::pi / 180);
        const double fy = f * std::sin(angle_deg * std::numbers::pi / 180);
        double transfer = 0;
        for (const auto& term : filter.terms) {
          transfer += TransferOf(term.column, fy / 20) * TransferOf(term.row, fx / 20);
        }
        const double expected = std::exp(-2 * std::pow(std::numbers::pi * kWorkingSd * f, 2));
        EXPECT_NEAR(transfer * camera.Modulation(f), expected, 0.008)
            << camera.blur_sd_mm << " " << camera.sharpening << " " << f << " " << angle_deg;
      }
    }
  }
}

// OpenCV's own separable filter is the reference; both sum a few dozen products near 1 in single
// precision. Sizes that are and are not whole vectors, and one smaller than the filter.
TEST(SeparableFilter, IsOpenCvsSumOfTerms) {
  const LocalSpread spread{{0.042, 0.5, 0.09}, {0.05, 0.5, 0.09}, 16.5};
  const SeparableFilter filter = DesignEqualizer(spread, 20, kWorkingSd, 2);
  ASSERT_EQ(filter.terms.size(), 2U);
  for (const cv::Size size : {cv::Size(97, 61), cv::Size(64, 40), cv::Size(5, 4)}) {
    cv::Mat image(size, CV_32FC1);
    cv::theRNG().state = 1;
    cv::randu(image, 0.5, 1.5);
    cv::Mat expected = cv::Mat::zeros(size, CV_32FC1);
    for (const auto& term : filter.terms) {
      cv::Mat part;
      cv::sepFilter2D(image, part, CV_32F, term.row, term.column, {-1, -1}, 0,
                      cv::BORDER_REFLECT_101);
      expected += part;
    }
    int rows = 0;
    const cv::Mat filtered =
        filter.Apply(image, [&](const float* /*row*/, int y) { EXPECT_EQ(y, rows++); });
    EXPECT_EQ(rows, size.height);
    EXPECT_LE(cv::norm(filtered, expected, cv::NORM_INF), 5e-6) << size;
  }
}

// Blurs that differ by axis (astigmatism, a shaken hand along one of them).
TEST(DesignEqualizer, TreatsEachAxisByItself) {
  const LocalSpread spread = {{0.052, 0.2, 0.08}, {0.035, 0.2, 0.08}, 16.5};
  const SeparableFilter filter = DesignEqualizer(spread, 20, kWorkingSd, 2);
  for (const double f : {1.0, 2.5, 4.0}) {
    const double expected = std::exp(-2 * std::pow(std::numbers::pi * kWorkingSd * f, 2));
    double along_x = 0;
    double along_y = 0;
    for (const auto& term : filter.terms) {
      along_x += TransferOf(term.column, 0) * TransferOf(term.row, f / 20);
      along_y += TransferOf(term.column, f / 20) * TransferOf(term.row, 0);
    }
    EXPECT_NEAR(along_x * spread.along_x.Modulation(f), expected, 0.008);
    EXPECT_NEAR(along_y * spread.along_y.Modulation(f), expected, 0.008);
  }
}

// A patch whose reflectance is given by a function of the place, mm from its middle.
template <class Reflectance>
Patch MadeUpPatch(const Reflectance& reflectance) {
  Patch patch;
  patch.relative.create(300, 300, CV_32FC1);
  patch.regions = cv::Mat(300, 300, CV_8UC1, cv::Scalar(static_cast<int>(Region::kField)));
  patch.px_per_mm = 20;
  patch.origin_px = {149.5, 149.5};
  patch.level = 0.4;
  for (int y = 0; y < 300; ++y) {
    for (int x = 0; x < 300; ++x) {
      const cv::Point2d at = patch.CouponFromPixel(cv::Point2d(x, y));
      patch.relative.at<float>(y, x) = static_cast<float>(reflectance(at.x, at.y));
    }
  }
  return patch;
}

PatchPlace Place(const PointSpread& spread) {
  return {"made-up.png, well A1", Isotropic(spread), 0.6, 0, {1e-6, 2e-5}};
}

EdgeFit MeasureEdge(const cv::Mat& image, double turn_deg, Shoot* shoot) {
  const double turn = turn_deg * std::numbers::pi / 180;
  std::vector<EdgeSample> samples;
  for (int y = 104; y < 196; ++y) {
    for (int x = 60; x < 240; ++x) {
      const double u = (x - 149.5) / 20;
      const double v = (y - 149.5) / 20;
      samples.push_back({u * std::cos(turn) - v * std::sin(turn), 0, image.at<float>(y, x) / 4});
    }
  }
  const EdgeProfile profile = BinEdge(samples, 0.0125, 1.1);
  const EdgeFit fit = FitEdge(profile, GuessEdge(profile, 0.05), 0.05, false);
  *shoot = MeasureShoot(profile, fit);
  return fit;
}

// Analytic: an edge as each camera shows it becomes the edge of a Gaussian of 60 um. Blur (from
// the modulation at 3 cycles a mm, 0.527) within 1.5 %: 0.008 of contrast there is 1.2 %.
// Overshoot, up to 7 % before, below 0.8 %: the same 0.008 at most.
TEST(Equalize, EdgesBecomeAlikeAndLoseTheirOvershoot) {
  for (const PointSpread& camera : kCameras) {
    const double turn_deg = 12;
    const double turn = turn_deg * std::numbers::pi / 180;
    const Patch patch = MadeUpPatch([&](double x, double y) {
      return 0.2 + 1.6 * camera.EdgeResponse(x * std::cos(turn) - y * std::sin(turn));
    });
    const auto equalized = Equalize(patch, Place(camera));
    ASSERT_TRUE(equalized) << equalized.error().message;
    Shoot shoot;
    const EdgeFit fit = MeasureEdge(equalized->relative, turn_deg, &shoot);
    const double modulation = fit.spread.Modulation(3);
    const double sd_mm = std::sqrt(-std::log(modulation) / 2) / (std::numbers::pi * 3);
    EXPECT_NEAR(sd_mm, kWorkingSd, 0.015 * kWorkingSd) << camera.blur_sd_mm;
    EXPECT_LT(shoot.over_pct, 0.8) << camera.blur_sd_mm << " " << camera.sharpening;
    EXPECT_LT(shoot.under_pct, 0.8) << camera.blur_sd_mm << " " << camera.sharpening;
    EXPECT_EQ(equalized->blur_sd_mm, kWorkingSd);
  }
}

// Lines of 0.3 to 0.8 mm pitch, each camera's picture of them: afterwards one amplitude, the
// Gaussian's. 0.008 of contrast, as above; before, they differ by up to a factor of 2.
TEST(Equalize, LinesBecomeAlike) {
  for (const double pitch_mm : {0.3, 0.42, 0.8}) {
    const double f = 1 / pitch_mm;
    const double expected = std::exp(-2 * std::pow(std::numbers::pi * kWorkingSd * f, 2));
    for (const PointSpread& camera : kCameras) {
      const auto phase = [&](double x, double y) {
        return 2 * std::numbers::pi * f * (0.8 * x + 0.6 * y);
      };
      const Patch patch = MadeUpPatch([&](double x, double y) {
        return 1 + 0.5 * camera.Modulation(f) * std::cos(phase(x, y));
      });
      const auto equalized = Equalize(patch, Place(camera));
      ASSERT_TRUE(equalized);
      double product = 0;
      double square = 0;
      for (int y = 40; y < 260; ++y) {
        for (int x = 40; x < 260; ++x) {
          const cv::Point2d at = patch.CouponFromPixel(cv::Point2d(x, y));
          const double wave = std::cos(phase(at.x, at.y));
          product += (equalized->relative.at<float>(y, x) - 1) * wave;
          square += wave * wave;
        }
      }
      EXPECT_NEAR(product / square / 0.5, expected, 0.008) << pitch_mm << " " << camera.blur_sd_mm;
    }
  }
}

// A photo of 40 pixels a mm, blurred before it was sampled at 20: the two blurs add in quadrature
// (analytic: Gaussians). Lines of 0.4 mm, as above.
TEST(Equalize, CountsTheBlurOfResampling) {
  const PointSpread camera{0.018, 0, 0};
  const double resampling_sd_mm = 0.0217;
  const double f = 2.5;
  const double shown =
      camera.Modulation(f) * std::exp(-2 * std::pow(std::numbers::pi * resampling_sd_mm * f, 2));
  const Patch patch = MadeUpPatch(
      [&](double x, double) { return 1 + 0.5 * shown * std::cos(2 * std::numbers::pi * f * x); });
  PatchPlace place = Place(camera);
  place.resampling_sd_mm = resampling_sd_mm;
  const auto equalized = Equalize(patch, place);
  ASSERT_TRUE(equalized);
  double low = 1;
  double high = 1;
  cv::minMaxLoc(equalized->relative(cv::Rect(50, 50, 200, 200)), &low, &high);
  const double expected = std::exp(-2 * std::pow(std::numbers::pi * kWorkingSd * f, 2));
  // Pixels fall within a sixteenth of a wave from its crests: up to 7.6 % short of the amplitude
  // at worst, but the phase here (half a pixel off a whole wave of 8) is known: cos(pi / 8).
  EXPECT_NEAR((high - low) / 2, 0.5 * expected * std::cos(std::numbers::pi / 8), 0.004);
}

// The field's mean is 1 and level keeps what is left: both are exact by definition (float sums of
// 90000 pixels: 1e-5).
TEST(Equalize, KeepsTheFieldsMeanAtOne) {
  const Patch patch = MadeUpPatch([](double x, double) { return 1.1 + 0.02 * x; });
  const auto equalized = Equalize(patch, Place({0.04, 0.3, 0.08}));
  ASSERT_TRUE(equalized);
  EXPECT_NEAR(cv::mean(equalized->relative)[0], 1, 1e-5);
  EXPECT_NEAR(equalized->level, 0.44, 1e-4);
  // Variance 1e-6 + 2e-5 * light, light = level * paper.
  const double light = 0.44 * 0.6;
  EXPECT_NEAR(equalized->noise_sd, std::sqrt(1e-6 + 2e-5 * light) / light, 1e-5);
}

// The rule: modulation at 5.69 cycles a mm at least 5 % (max_gain 2); a Gaussian of 0.0684 mm has
// just that: sqrt(ln(1 / 0.05) / 2) / (pi 5.692).
TEST(Equalize, RefusesWhatIsBlurrier) {
  const Patch patch = MadeUpPatch([](double, double) { return 1.0; });
  EXPECT_TRUE(Equalize(patch, Place({0.0680, 0, 0})));
  const auto refused = Equalize(patch, Place({0.0690, 0, 0}));
  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().kind, ProblemKind::kUnmeasurable);
  EXPECT_THAT(refused.error().message, HasSubstr("made-up.png, well A1: the photo is blurrier"));
  // One blurred axis is enough.
  PatchPlace place = Place({0.05, 0, 0});
  place.spread.along_y.blur_sd_mm = 0.08;
  EXPECT_FALSE(Equalize(patch, place));
}

TEST(Equalize, ChecksItsOptions) {
  EqualizeOptions options;
  options.max_gain = 0.5;
  EXPECT_THROW(options.Check(), BadOption);
  options = {};
  options.working_blur_sd_mm = 0;
  EXPECT_THROW(options.Check(), BadOption);
}

// A sample plate's square at 20 px/mm, as a patch (true view, cubic resampling), equalised.
cv::Mat EqualizedSquare(const Photo& photo, const View& view, const SheetSharpness& sharpness,
                        const SharpnessSquare& square) {
  Patch patch = MadeUpPatch([](double, double) { return 1.0; });
  cv::Mat map(patch.relative.size(), CV_32FC2);
  const Eigen::Vector2d middle = view.PixelFromSheet(square.x_mm, square.y_mm, 0);
  const cv::Rect box =
      cv::Rect(cv::Point2d(middle.x() - 200, middle.y() - 200), cv::Size(400, 400)) &
      cv::Rect({}, photo.size());
  for (int y = 0; y < map.rows; ++y) {
    for (int x = 0; x < map.cols; ++x) {
      const cv::Point2d at = patch.CouponFromPixel(cv::Point2d(x, y));
      const Eigen::Vector2d pixel = view.PixelFromSheet(square.x_mm + at.x, square.y_mm + at.y, 0);
      map.at<cv::Point2f>(y, x) = cv::Point2f(cv::Point2d(pixel.x() - box.x, pixel.y() - box.y));
    }
  }
  cv::remap(LinearRegion(photo, box), patch.relative, map, {}, cv::INTER_CUBIC,
            cv::BORDER_REPLICATE);
  PatchPlace place = Place({});
  place.spread = sharpness.At(square.x_mm, square.y_mm, 0);
  const auto equalized = Equalize(patch, place);
  if (!equalized) throw std::runtime_error(equalized.error().message);
  return equalized->relative;
}

// For the table in docs/resolution.md: --gtest_output=json:FILE writes these.
void Record(const std::string& name, const SheetSharpness& sharpness, double sd_mm,
            double over_pct) {
  double mtf50 = 0;
  double at_3 = 0;
  double over = 0;
  const auto n = static_cast<double>(sharpness.edges.size());
  for (const EdgeSharpness& edge : sharpness.edges) {
    mtf50 += edge.mtf50_per_mm / n;
    at_3 += edge.modulation[2] / n;
    over += edge.shoot.over_pct / n;
  }
  ::testing::Test::RecordProperty(
      name, fmt::format("px_per_mm {:.1f}, mtf50_per_mm {:.2f}, modulation at 3 per mm {:.3f}, "
                        "overshoot_pct {:.1f}; equalised: blur_sd_mm {:.4f}, overshoot_pct {:.1f}",
                        1 / sharpness.pixel_mm.At(100, 70), mtf50, at_3, over, sd_mm, over_pct));
}

// The sample plates' own squares, after rectification: from MTF50 of 4.2 (d3, no sharpening) to
// 5.4 cycles a mm to one edge. 2.5 %: the four edges of one square scatter by 1 to 2 % for their
// pixel phases, and cubic resampling moves 3 cycles a mm by up to 1 %. Left edges, turned by the
// squares' 5 degrees (clockwise on these plates).
TEST(Equalize, SamplePlatesReachOneResolution) {
  for (const char* name : {"d1", "d2", "d3", "d4", "d5", "d6", "d7"}) {
    const auto photo =
        ReadPhoto(std::string(LAYGAUGE_SOURCE_DIR) + "/sample-images/" + name + ".jpg");
    ASSERT_TRUE(photo);
    const nlohmann::json truth = PlateTruth(name);
    const View view = TruthView(truth, photo->size());
    const SheetDescription& sheet = ShippedSheet(truth["sheet"]);
    const auto sharpness = MeasureSharpness(*photo, view, sheet);
    ASSERT_TRUE(sharpness);
    double sd_mm = 0;
    double over_pct = 0;
    for (SharpnessSquare square : sheet.sharpness_squares) {
      square.x_mm -= 3.5;  // the left edge to the patch's middle
      Shoot shoot;
      const cv::Mat image = EqualizedSquare(*photo, view, *sharpness, square);
      cv::Mat flipped;  // bright to the right
      cv::flip(image, flipped, -1);
      const EdgeFit fit = MeasureEdge(flipped, -5, &shoot);
      const double modulation = fit.spread.Modulation(3);
      sd_mm += std::sqrt(-std::log(modulation) / 2) / (std::numbers::pi * 3) / 4;
      over_pct = std::max(over_pct, shoot.over_pct);
    }
    Record(name, *sharpness, sd_mm, over_pct);
    EXPECT_LT(over_pct, 1.5) << name;
    EXPECT_NEAR(sd_mm, kWorkingSd, 0.025 * kWorkingSd) << name;
  }
}

}  // namespace
}  // namespace laygauge
