#include "texture/gradient_energy.h"

#include <gtest/gtest.h>

#include <cmath>
#include <complex>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <random>

#include "base/error.h"
#include "support/render_lines.h"

namespace laygauge {
namespace {

constexpr double kPi = std::numbers::pi;

cv::Mat Everywhere(const cv::Mat& image) { return {image.size(), CV_8UC1, cv::Scalar(255)}; }

// A cos(2 pi x / period) with the wave vector at an angle from +x towards +y (down).
cv::Mat Grating(double period_px, double angle_deg, double amplitude) {
  cv::Mat image(386, 386, CV_32FC1);
  const double a = angle_deg * kPi / 180;
  for (int y = 0; y < image.rows; ++y) {
    for (int x = 0; x < image.cols; ++x) {
      const double v = x * std::cos(a) + y * std::sin(a);
      image.at<float>(y, x) = static_cast<float>(1 + amplitude * std::cos(2 * kPi * v / period_px));
    }
  }
  return image;
}

// Sobel's operator is 8 times the slope: on a ramp of m a pixel the energy is m^2 px_per_mm^2.
TEST(GradientEnergy, RampHasItsSlope) {
  cv::Mat ramp(100, 100, CV_32FC1);
  for (int y = 0; y < ramp.rows; ++y) {
    for (int x = 0; x < ramp.cols; ++x) {
      ramp.at<float>(y, x) = static_cast<float>(0.01 * x + 0.002 * y);
    }
  }
  const auto energy = MeasureGradientEnergy(ramp, Everywhere(ramp), 10);
  ASSERT_TRUE(energy.has_value());
  EXPECT_NEAR(energy->along, 0.1 * 0.1, 1e-6);
  EXPECT_NEAR(energy->across, 0.02 * 0.02, 1e-6);
  const double total = 0.1 * 0.1 + 0.02 * 0.02;
  EXPECT_NEAR(energy->coherence, total / (total + 0.01), 1e-5);  // one direction over the floor
  EXPECT_NEAR(energy->orientation_deg, std::atan2(0.02, 0.1) * 180 / kPi, 1e-3);
}

// Closed form: the mean square of Sobel's x-derivative of a grating of period T along x is
// 32 A^2 sin^2(2 pi / T); over 64 and the square of a pixel's mm.
TEST(GradientEnergy, GratingInClosedForm) {
  for (const double period : {4.0, 8.0, 12.0}) {
    const cv::Mat image = Grating(period, 0, 0.2);
    const auto energy =
        MeasureGradientEnergy(image, Everywhere(image), 20, {.cell_mm = 1.2, .floor_per_mm2 = 0});
    ASSERT_TRUE(energy.has_value());
    const double want = 32 * 0.04 * std::pow(std::sin(2 * kPi / period), 2) / 64 * 20 * 20;
    EXPECT_NEAR(energy->along, want, 1e-4 * want) << period;  // cells of 24 px: whole periods
    EXPECT_NEAR(energy->across, 0, 1e-6);
    EXPECT_NEAR(energy->coherence, 1, 1e-5);
  }
}

// Sobel's operator turns a grating's direction towards the diagonal: period 12 px at 20 degrees
// shows as 19.6747 (from sin(2 pi fx)(1 + cos(2 pi fy)) over its counterpart), 0 and 45 as such.
TEST(GradientEnergy, OrientationWithSobelsBias) {
  const auto at = [](double angle) {
    const cv::Mat image = Grating(12, angle, 0.2);
    return MeasureGradientEnergy(image, Everywhere(image), 20)->orientation_deg;
  };
  EXPECT_NEAR(at(0), 0, 1e-3);
  EXPECT_NEAR(at(45), 45, 1e-2);
  EXPECT_NEAR(at(20), 19.6747, 0.01);  // cells hold no whole periods
  EXPECT_NEAR(at(70), 70.3253, 0.01);
}

// White noise of s: 12 s^2 of the raw operator on either axis; 140000 pixels, neighbours alike:
// 2 % is four standard errors.
TEST(GradientEnergy, WhiteNoise) {
  std::mt19937 random(3);
  std::normal_distribution<float> normal(1, 0.1F);
  cv::Mat image(386, 386, CV_32FC1);
  std::generate(image.begin<float>(), image.end<float>(), [&] { return normal(random); });
  const auto energy = MeasureGradientEnergy(image, Everywhere(image), 8);
  ASSERT_TRUE(energy.has_value());
  EXPECT_NEAR(energy->along, 12 * 0.01, 0.02 * 0.12);
  EXPECT_NEAR(energy->across, 12 * 0.01, 0.02 * 0.12);
  EXPECT_LT(energy->coherence, 0.02);
}

// Two halves at +10 and -10 degrees: doubled angles +-20, resultant cos 20, circular deviation
// sqrt(-2 ln cos 20) / 2.
TEST(GradientEnergy, SpreadOfTwoHalves) {
  const cv::Mat top = Grating(12, 10, 0.2);
  const cv::Mat low = Grating(12, -10, 0.2);
  cv::Mat both;
  cv::vconcat(top.rowRange(0, 193), low.rowRange(0, 193), both);
  const auto energy = MeasureGradientEnergy(both, Everywhere(both), 20);
  const double want = 0.5 * std::sqrt(-2 * std::log(std::cos(20 * kPi / 180))) * 180 / kPi;
  // Sobel's bias (0.3 degrees at 20) and the row of cells that holds the seam (1 of 24).
  EXPECT_NEAR(energy->orientation_spread_deg, want, 0.4);
}

// A photo's noise has some direction by chance or by its coding; a top that holds no more is not
// called directed. Horizontal stripes with an energy of a hundredth of the floor: 0.01 / 1.01.
TEST(GradientEnergy, CoherenceSinksToZeroWithTheTexture) {
  const double amplitude =
      std::sqrt(0.01 * 0.01 * 64 / (32 * 100 * std::pow(std::sin(kPi / 4), 2)));
  const cv::Mat faint = Grating(8, 90, amplitude);
  const auto energy = MeasureGradientEnergy(faint, Everywhere(faint), 10);  // cells of one period
  EXPECT_NEAR(energy->across, 1e-4, 1e-6);
  EXPECT_NEAR(energy->coherence, 0.01 / 1.01, 1e-4);
}

// A steep scar on a fifth of the cells, at right angles to the lines and with a hundred times their
// energy, counts by its cells: 0.8 of the lines' coherence less 0.2 of its own, nearly 1. Energies
// together would give (20 - 0.8) / 20.8 for its direction. Half a row of 32 rows of cells: 0.03.
TEST(GradientEnergy, OneSteepScarDoesNotOutweighTheLines) {
  cv::Mat image = Grating(8, 90, 0.05);
  Grating(8, 0, 0.5).rowRange(0, image.rows / 5).copyTo(image.rowRange(0, image.rows / 5));
  const auto energy = MeasureGradientEnergy(image, Everywhere(image), 10);
  const double lines = 32 * 0.05 * 0.05 * std::pow(std::sin(kPi / 4), 2) / 64 * 10 * 10;
  EXPECT_NEAR(energy->coherence, 0.8 * lines / (lines + 0.01) - 0.2, 0.03);
  EXPECT_NEAR(std::abs(energy->orientation_deg), 90, 1);
}

// Half of the cells lie 20 degrees beside the others and are fainter: their coherence is b against
// a, so that they weigh b^2 against a^2, and doubled angles add to |a^2 + b^2 exp(40 i)|.
// Unweighted the spread would be 10.1 degrees. Sobel's bias is
// 0.3 degrees.
TEST(GradientEnergy, FaintCellsWeighLittleInTheSpread) {
  const auto coherence = [](double amplitude) {
    const double energy = 32 * amplitude * amplitude * std::pow(std::sin(kPi / 6), 2) / 64 * 100;
    return energy / (energy + 0.01);
  };
  cv::Mat both;
  cv::vconcat(Grating(12, 0, 0.1).rowRange(0, 193), Grating(12, 20, 0.02).rowRange(0, 193), both);
  cv::Mat mask = Everywhere(both);
  mask.rowRange(188, 198).setTo(0);  // the seam: a row of cells on either side
  const auto energy = MeasureGradientEnergy(both, mask, 10);
  const double a = std::pow(coherence(0.1), 2);
  const double b = std::pow(coherence(0.02), 2);
  const double resultant = std::abs(a + b * std::polar(1.0, 40 * kPi / 180)) / (a + b);
  const double want = 0.5 * std::sqrt(-2 * std::log(resultant)) * 180 / kPi;
  EXPECT_LT(want, 8);
  EXPECT_NEAR(energy->orientation_spread_deg, want, 0.5);
}

TEST(GradientEnergy, OnlyWholeCellsOfTheFieldCount) {
  cv::Mat image = Grating(8, 0, 0.1);
  cv::Mat mask = Everywhere(image);
  mask(cv::Rect(100, 0, 60, image.rows)).setTo(0);
  image(cv::Rect(100, 0, 60, image.rows)).setTo(1e6F);
  const auto energy = MeasureGradientEnergy(image, mask, 20, {.cell_mm = 0.8});
  ASSERT_TRUE(energy.has_value());
  EXPECT_LT(energy->along, 32 * 0.01 * 400 / 64);
  EXPECT_FALSE(MeasureGradientEnergy(image, cv::Mat::zeros(image.size(), CV_8UC1), 20).has_value());
  EXPECT_THROW(GradientEnergyOptions{.cell_mm = -1}.Check(), BadOption);
  EXPECT_THROW(GradientEnergyOptions{.floor_per_mm2 = -1}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
