#include "texture/field_spectrum.h"

#include <gtest/gtest.h>

#include <cmath>
#include <fstream>
#include <numbers>

#include "base/error.h"
#include "support/render_lines.h"
#include "texture/reference.h"

namespace laygauge {
namespace {

// Sum over the whole plane of a half plane's bins.
double PlaneSum(const cv::Mat& power) {
  double sum = 0;
  for (int y = 0; y < power.rows; ++y) {
    for (int x = 0; x < power.cols; ++x) {
      sum += power.at<float>(y, x) * (x == 0 || x == power.cols - 1 ? 1 : 2);
    }
  }
  return sum;
}

// Parseval: white noise of variance s^2 has the sum s^2. About 250000 independent pixels under the
// windows: a relative standard error of sqrt(2 / 250000) = 0.3 %; four are allowed.
TEST(FieldSpectrum, SumsToTheVariance) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(RenderLines({.first = 0, .noise_sd = 0.1}));
  ASSERT_FALSE(spectrum.tiles.empty());
  EXPECT_NEAR(PlaneSum(spectrum.power), 0.01, 0.012 * 0.01);
}

// Tiles against numpy's transform and scipy's window, a whole one and one that the mask cuts.
// Single precision: a millionth of the largest bin.
TEST(FieldSpectrum, AgreesWithNumpy) {
  const Patch patch =
      RenderLines({.pitch_mm = 0.42, .lay_deg = 30, .first = 0.2, .noise_sd = 0.05});
  const FieldSpectrum spectrum = MeasureFieldSpectrum(patch);
  const auto directory = TestDirectory();
  const int side = spectrum.side_px;
  int cut = 0;
  for (const SpectrumTile& tile : spectrum.tiles) {
    const cv::Rect rect(tile.corner_px, cv::Size(side, side));
    cv::Mat values;
    patch.relative(rect).convertTo(values, CV_64FC1);
    const cv::Mat mask = patch.regions(rect) == static_cast<int>(Region::kField);
    const bool is_cut = cv::countNonZero(mask) < side * side;
    if (is_cut ? cut >= 2 : &tile != spectrum.tiles.data()) {
      continue;
    }
    cut += is_cut ? 1 : 0;
    std::ofstream(directory / "values", std::ios::binary)
        .write(values.ptr<char>(), static_cast<std::streamsize>(values.total() * 8));
    std::ofstream(directory / "mask", std::ios::binary)
        .write(mask.ptr<char>(), static_cast<std::streamsize>(mask.total()));
    const std::string out = RunReference(
        "spectrum_reference.py",
        {directory / "values", directory / "mask", std::to_string(side), directory / "power"});
    if (out.empty()) {
      GTEST_SKIP() << "Python's numpy or scipy is not installed";
    }
    cv::Mat want(side, side / 2 + 1, CV_64FC1);
    std::ifstream(directory / "power", std::ios::binary)
        .read(want.ptr<char>(), static_cast<std::streamsize>(want.total() * 8));
    double largest = 0;
    cv::minMaxIdx(want, nullptr, &largest);
    cv::Mat power;
    tile.power.convertTo(power, CV_64FC1);
    EXPECT_LT(cv::norm(power, want, cv::NORM_INF), 1e-6 * largest);
  }
  EXPECT_EQ(cut, 2);
}

// Harris 1978: through a Hann window a wave of amplitude A in the middle of a bin shows A^2 / 2
// over its noise bandwidth, 1.5 bins an axis; half of it at +f, half at -f.
TEST(FieldSpectrum, PeakOfAWaveInABin) {
  const double f = 16 / 6.4;  // cycles per mm: bin 16
  const Patch patch = RenderLines({.pitch_mm = 1 / f, .lay_deg = 0, .first = 0.2});
  const FieldSpectrum spectrum = MeasureFieldSpectrum(patch);
  double largest = 0;
  for (const SpectrumTile& tile : spectrum.tiles) {
    const cv::Rect rect(tile.corner_px, cv::Size(spectrum.side_px, spectrum.side_px));
    if (cv::countNonZero(patch.regions(rect) == static_cast<int>(Region::kField)) == rect.area()) {
      largest = tile.power.at<float>(16, 0);
      break;
    }
  }
  EXPECT_NEAR(largest, 0.2 * 0.2 / 4 / (1.5 * 1.5), 1e-5);
}

TEST(DemodulateTiles, AmplitudeAndPhase) {
  const FieldSpectrum spectrum = MeasureFieldSpectrum(
      RenderLines({.pitch_mm = 0.5, .lay_deg = 90, .first = 0.1, .second = 0.02}));
  // Lay 90: the wave runs along x, its phase 0 at the coupon's origin.
  for (const auto& tile : DemodulateTiles(spectrum, {2, 0}, 2)) {
    // 1 % of the fundamental for what the masks cut off.
    EXPECT_NEAR(std::abs(tile[0] - 0.1), 0, 0.001);
    EXPECT_NEAR(std::abs(tile[1] - 0.02), 0, 0.001);
  }
}

TEST(FieldSpectrum, NoTilesWithoutField) {
  Patch patch = RenderLines({});
  patch.regions.setTo(0);
  EXPECT_TRUE(MeasureFieldSpectrum(patch).tiles.empty());
  EXPECT_THROW(FieldSpectrumOptions{.tile_mm = 0}.Check(), BadOption);
  EXPECT_THROW((FieldSpectrumOptions{.max_overlap = 1}.Check()), BadOption);
  EXPECT_THROW((FieldSpectrumOptions{.min_field_share = 0}.Check()), BadOption);
}

}  // namespace
}  // namespace laygauge
