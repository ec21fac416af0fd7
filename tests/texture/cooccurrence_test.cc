#include "texture/cooccurrence.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <fstream>
#include <map>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <random>
#include <sstream>

#include "base/error.h"
#include "support/render_lines.h"
#include "texture/reference.h"

namespace laygauge {
namespace {

constexpr double kPi = std::numbers::pi;
constexpr int kX = 255;  // not in the mask

struct Masked {
  cv::Mat levels;
  cv::Mat mask;
};

Masked Image(int rows, int cols, const std::vector<int>& values) {
  Masked image{cv::Mat(rows, cols, CV_8UC1), cv::Mat(rows, cols, CV_8UC1)};
  for (int i = 0; i < rows * cols; ++i) {
    image.levels.at<std::uint8_t>(i / cols, i % cols) = static_cast<std::uint8_t>(values[i]);
    image.mask.at<std::uint8_t>(i / cols, i % cols) = values[i] == kX ? 0 : 255;
  }
  return image;
}

CooccurrenceMatrix Count(const Masked& image, int levels, int down, int right) {
  return CountCooccurrence(image.levels, image.mask, levels, down, right);
}

// Haralick, Shanmugam & Dinstein 1973, fig. 3: the 4 x 4 image, distance 1, four directions.
class HaralickExample : public testing::Test {
 protected:
  const Masked image_ = Image(4, 4, {0, 0, 1, 1, 0, 0, 1, 1, 0, 2, 2, 2, 2, 2, 3, 3});
};

TEST_F(HaralickExample, CountsOfFourDirections) {
  EXPECT_EQ(Count(image_, 4, 0, 1).counts,
            (std::vector<double>{4, 2, 1, 0, 2, 4, 0, 0, 1, 0, 6, 1, 0, 0, 1, 2}));
  EXPECT_EQ(Count(image_, 4, -1, 1).counts,
            (std::vector<double>{4, 1, 0, 0, 1, 2, 2, 0, 0, 2, 4, 1, 0, 0, 1, 0}));
  EXPECT_EQ(Count(image_, 4, 1, 0).counts,
            (std::vector<double>{6, 0, 2, 0, 0, 4, 2, 0, 2, 2, 2, 2, 0, 0, 2, 0}));
  EXPECT_EQ(Count(image_, 4, 1, 1).counts,
            (std::vector<double>{2, 1, 3, 0, 1, 2, 1, 0, 3, 1, 0, 2, 0, 0, 2, 0}));
  EXPECT_EQ(Count(image_, 4, 0, 1).pairs, 24);
  EXPECT_EQ(Count(image_, 4, 1, 1).pairs, 18);
}

// Exact fractions, worked from the paper's counts with its formulas f1, f2, f3, f5 (natural
// entropies 2.0947..., 2.2161... over ln 2).
TEST_F(HaralickExample, Features) {
  const CooccurrenceFeatures along = DescribeCooccurrence(Count(image_, 4, 0, 1));
  EXPECT_NEAR(along.contrast, 7.0 / 12, 1e-14);
  EXPECT_NEAR(along.dissimilarity, 5.0 / 12, 1e-14);
  EXPECT_NEAR(along.homogeneity, 97.0 / 120, 1e-14);
  EXPECT_NEAR(along.asm_, 7.0 / 48, 1e-14);
  EXPECT_NEAR(along.entropy, 3.022055208874, 1e-12);
  EXPECT_NEAR(along.correlation, 431.0 / 599, 1e-14);
  EXPECT_NEAR(along.variance, 599.0 / 576, 1e-14);
  const CooccurrenceFeatures diagonal = DescribeCooccurrence(Count(image_, 4, 1, 1));
  EXPECT_NEAR(diagonal.contrast, 16.0 / 9, 1e-14);
  EXPECT_NEAR(diagonal.dissimilarity, 10.0 / 9, 1e-14);
  EXPECT_NEAR(diagonal.homogeneity, 23.0 / 45, 1e-14);
  EXPECT_NEAR(diagonal.asm_, 19.0 / 162, 1e-14);
  EXPECT_NEAR(diagonal.entropy, 3.197159723424, 1e-12);
  EXPECT_NEAR(diagonal.correlation, 7.0 / 43, 1e-14);
}

// Zwanenburg et al., arXiv:1612.07003, digital phantom: consensus values "2D averaged" (feature
// by direction and slice, then the mean), printed to three digits. Levels 1..6, X = masked.
TEST(Cooccurrence, MaskedPhantomConsensus) {
  const std::vector<Masked> slices{
      Image(4, 5, {1, 4, 4, 1, 1, 1, 4, 6, 1, 1, 4, 1, 6, 4, 1, 4, 4, 6, 4, 1}),
      Image(4, 5, {1, 4, 4, 1, 1, 1, 1, 6, 1, 1, kX, 1, 3, 1, 1, 4, 4, 6, 1, 1}),
      Image(4, 5, {1, 4, 4, kX, kX, 1, 1, 1, 1, 1, 1, 1, kX, 1, 1, 1, 1, 6, 1, 1}),
      Image(4, 5, {1, 4, 4, kX, kX, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 6, 1, 1})};
  CooccurrenceFeatures mean;
  for (const Masked& slice : slices) {
    for (const auto& [down, right] :
         std::vector<std::pair<int, int>>{{0, 1}, {1, 0}, {1, 1}, {-1, 1}}) {
      const CooccurrenceFeatures f = DescribeCooccurrence(Count(slice, 7, down, right));
      mean.contrast += f.contrast / 16;
      mean.dissimilarity += f.dissimilarity / 16;
      mean.homogeneity += f.homogeneity / 16;
      mean.asm_ += f.asm_ / 16;
      mean.entropy += f.entropy / 16;
      mean.correlation += f.correlation / 16;
    }
  }
  EXPECT_NEAR(mean.contrast, 5.28, 0.005);
  EXPECT_NEAR(mean.dissimilarity, 1.42, 0.005);
  EXPECT_NEAR(mean.homogeneity, 0.619, 0.0005);
  EXPECT_NEAR(mean.asm_, 0.368, 0.0005);
  EXPECT_NEAR(mean.entropy, 2.05, 0.005);
  EXPECT_NEAR(mean.correlation, -0.0121, 0.00005);
}

// scikit-image on its own photographs, the same levels: nothing but the order of sums differs. A
// shift of 0: shared among levels, by SciPy's B-spline.
TEST(Cooccurrence, AgreesWithScikitImageOnPhotographs) {
  const std::string raw = (TestDirectory() / "photo").string();
  std::istringstream lines(RunReference("cooccurrence_reference.py", {raw}));
  std::string photo;
  int cases = 0;
  std::map<std::string, cv::Mat> photos;
  for (int rows, cols, shift, distance, angle;
       lines >> photo >> rows >> cols >> shift >> distance >> angle;) {
    double want[5];
    for (double& value : want) {
      lines >> value;
    }
    cv::Mat& image = photos[photo];
    if (image.empty()) {
      image.create(rows, cols, CV_8UC1);
      std::ifstream(raw + "-" + photo, std::ios::binary)
          .read(image.ptr<char>(), static_cast<std::streamsize>(image.total()));
    }
    const int levels = shift == 0 ? 85 : 256 >> shift;
    cv::Mat quantised(image.size(), CV_8UC1);
    std::transform(image.begin<std::uint8_t>(), image.end<std::uint8_t>(),
                   quantised.begin<std::uint8_t>(),
                   [&](std::uint8_t v) { return static_cast<std::uint8_t>(v * levels / 256); });
    // Its angle pi/4 is one row down, one column right; offsets are rounded, so that distance 2
    // becomes 1 row and 1 column, distance 5 becomes 4 and 4.
    const double turn = angle * kPi / 4;
    const int down = static_cast<int>(std::lround(distance * std::sin(turn)));
    const int right = static_cast<int>(std::lround(distance * std::cos(turn)));
    const CooccurrenceMatrix counted = CountCooccurrence(
        quantised, cv::Mat(image.size(), CV_8UC1, cv::Scalar(1)), levels, down, right);
    const CooccurrenceFeatures f =
        DescribeCooccurrence(shift == 0 ? ShareAmongLevels(counted, 5) : counted);
    EXPECT_NEAR(f.contrast, want[0], 1e-9) << photo << shift << distance << angle;
    EXPECT_NEAR(f.dissimilarity, want[1], 1e-9);
    EXPECT_NEAR(f.homogeneity, want[2], 1e-9);
    EXPECT_NEAR(f.asm_, want[3], 1e-9);
    EXPECT_NEAR(f.correlation, want[4], 1e-9);
    ++cases;
  }
  if (cases == 0) {
    GTEST_SKIP() << "Python's scikit-image is not installed";
  }
  EXPECT_EQ(cases, 2 * 3 * 3 * 4);
}

// Closed forms: independent uniform levels have the contrast (L^2 - 1) / 6, the dissimilarity
// (L^2 - 1) / (3 L), ASM 1 / L^2 and the entropy 2 log2 L. 600 x 600 pixels: three standard errors
// of the mean squared difference of 360000 pairs are 3 * 9.3 / 600.
TEST(Cooccurrence, IndependentUniformLevels) {
  std::mt19937 random(7);
  std::uniform_int_distribution<int> level(0, 7);
  Masked image{cv::Mat(600, 600, CV_8UC1), cv::Mat(600, 600, CV_8UC1, cv::Scalar(1))};
  std::generate(image.levels.begin<std::uint8_t>(), image.levels.end<std::uint8_t>(),
                [&] { return static_cast<std::uint8_t>(level(random)); });
  const CooccurrenceFeatures f = DescribeCooccurrence(Count(image, 8, 0, 3));
  EXPECT_NEAR(f.contrast, 10.5, 0.047);
  EXPECT_NEAR(f.dissimilarity, 2.625, 0.01);
  EXPECT_NEAR(f.asm_, 1.0 / 64, 1e-4);
  EXPECT_NEAR(f.entropy, 6, 1e-3);
  EXPECT_NEAR(f.correlation, 0, 3.0 / 600);
}

TEST(Cooccurrence, ConstantImageAndNoPairs) {
  const Masked constant = Image(2, 3, {5, 5, 5, 5, 5, 5});
  const CooccurrenceFeatures f = DescribeCooccurrence(Count(constant, 8, 0, 1));
  EXPECT_EQ(f.contrast, 0);
  EXPECT_EQ(f.homogeneity, 1);
  EXPECT_EQ(f.asm_, 1);
  EXPECT_EQ(f.correlation, 1);  // 0 / 0, by scikit-image's rule
  EXPECT_THROW((void)DescribeCooccurrence(Count(constant, 8, 0, 3)), std::invalid_argument);
  EXPECT_THROW((void)Count(constant, 256, 0, 1), std::invalid_argument);
}

// The B-spline's closed forms (Unser 1999, table of moments: mean exact, second moment 1/4): shared
// counts have the steps' mean, variance + 1/4, contrast + 1/2 and covariance, in levels, wherever
// the steps lie.
TEST(ShareAmongLevels, KeepsMomentsButForTheWindow) {
  std::mt19937 random(11);
  std::uniform_int_distribution<int> step(0, 34);
  Masked image{cv::Mat(60, 60, CV_8UC1), cv::Mat(60, 60, CV_8UC1, cv::Scalar(1))};
  std::generate(image.levels.begin<std::uint8_t>(), image.levels.end<std::uint8_t>(),
                [&] { return static_cast<std::uint8_t>(step(random)); });
  cv::blur(image.levels, image.levels, {3, 3});  // neighbours alike: the correlation is not 0
  const CooccurrenceMatrix steps = Count(image, 35, 0, 1);
  const CooccurrenceFeatures fine = DescribeCooccurrence(steps);
  const CooccurrenceMatrix shared = ShareAmongLevels(steps, 5);
  const CooccurrenceFeatures f = DescribeCooccurrence(shared);
  EXPECT_EQ(shared.levels, 9);
  EXPECT_EQ(shared.pairs, steps.pairs);
  EXPECT_NEAR(f.contrast, fine.contrast / 25 + 0.5, 1e-12);
  EXPECT_NEAR(f.variance, fine.variance / 25 + 0.25, 1e-12);
  EXPECT_NEAR(f.correlation * f.variance, fine.correlation * fine.variance / 25, 1e-12);
  EXPECT_THROW((void)ShareAmongLevels(steps, 4), std::invalid_argument);
}

// One gray value in the middle of a level: shares 1/8, 3/4, 1/8 on either side of a pair.
TEST(ShareAmongLevels, OneGrayValueInClosedForm) {
  const Masked constant = Image(2, 3, {7, 7, 7, 7, 7, 7});
  const CooccurrenceFeatures f =
      DescribeCooccurrence(ShareAmongLevels(Count(constant, 15, 0, 1), 5));
  const double outer = 0.125;
  const double inner = 0.75;
  EXPECT_NEAR(f.contrast, 0.5, 1e-12);
  EXPECT_NEAR(f.dissimilarity, 4 * outer * inner + 4 * outer * outer, 1e-12);
  EXPECT_NEAR(f.homogeneity,
              2 * outer * outer + inner * inner + 2 * outer * inner + 2 * outer * outer / 5, 1e-12);
  EXPECT_NEAR(f.asm_, std::pow(2 * outer * outer + inner * inner, 2), 1e-12);
  EXPECT_NEAR(f.entropy, -2 * (2 * outer * std::log2(outer) + inner * std::log2(inner)), 1e-12);
  EXPECT_NEAR(f.correlation, 0, 1e-12);
}

// The coupon's own level lies in the middle of a step of 0.15 / 7; ends saturate.
TEST(QuantiseRelative, FixedScale) {
  const cv::Mat relative =
      (cv::Mat_<float>(1, 8) << 0.990F, 1.0F, 1.010F, 1.012F, 0.988F, -1.0F, 0.18F, 9.0F);
  const cv::Mat levels = QuantiseRelative(relative, {});
  const std::vector<int> want{38, 38, 38, 39, 37, 0, 0, 76};
  for (int i = 0; i < 8; ++i) {
    EXPECT_EQ(levels.at<std::uint8_t>(0, i), want[i]) << i;
  }
  EXPECT_THROW((CooccurrenceOptions{.level_width = 0}.Check()), BadOption);
  EXPECT_THROW((CooccurrenceOptions{.levels_each_side = 0}.Check()), BadOption);
  EXPECT_THROW((CooccurrenceOptions{.levels_each_side = 30}.Check()), BadOption);
  EXPECT_THROW((CooccurrenceOptions{.steps_per_level = 4}.Check()), BadOption);
  EXPECT_THROW((CooccurrenceOptions{.offset_mm = 0}.Check()), BadOption);
  EXPECT_NO_THROW(CooccurrenceOptions().Check());
}

// A grating A cos(2 pi v / p) at the offset d across: differences have the mean square
// 2 A^2 sin^2(pi d / p); along they are 0; the window adds 1/2 to either. The mean over 2 x 2
// pixels of 0.05 mm dims the amplitude by cos(pi 0.05 / p). Rounding to steps of a seventh of a
// level adds 1/6 of 1/49 at most (two independent uniform errors), bicubic interpolation takes 2.7
// % of the amplitude, 5.4 % of its square.
TEST(CooccurrenceMetric, GratingAlongAndAcross) {
  const double pitch = 0.47;
  const Patch patch = RenderLines({.pitch_mm = pitch, .lay_deg = 30, .first = 0.3});
  const CouponDescription coupon = SquareCoupon();
  const Metric metric = CooccurrenceMetric();
  const Finding finding = metric.measure(MakeSurface(patch, coupon));
  ASSERT_EQ(finding.features.size(), metric.features.size());
  const double amplitude = 0.3 / 0.15 * std::cos(kPi * 0.05 / pitch);
  const double want = 2 * std::pow(amplitude * std::sin(kPi * 0.2 / pitch), 2);
  EXPECT_NEAR(*finding.features[0].value, 0.5, 1.0 / 294 + 0.01 * want);
  EXPECT_NEAR(*finding.features[1].value, want + 0.5, 0.054 * want + 1.0 / 294);
  EXPECT_NEAR(*finding.features[2].value, *finding.features[1].value / *finding.features[0].value,
              1e-12);
  // Of correlations: over 1 + each. Along, the grating repeats: v / (v + 1/4).
  const double along = *finding.features[15].value;
  const double across = *finding.features[16].value;
  const double variance = amplitude * amplitude / 2;
  EXPECT_NEAR(along, variance / (variance + 0.25), 0.01);
  EXPECT_NEAR(*finding.features[17].value, (1 + across) / (1 + along), 1e-12);
}

// A smooth top: no value is empty, and the window's own values (above) are all that is left. Noise
// of 0.8 and 1.6 % of a pixel is half that on pixels of 0.1 mm, 0.053 of a level's width: it adds
// 2 * 0.053^2 = 0.006 to the contrast and 0.016 to an entropy (log2 of (1/4 + 0.053^2) / (1/4) for
// two normal variables). A slope of the light, 6 % over the coupon, is form.
TEST(CooccurrenceMetric, SmoothTopTendsToTheWindow) {
  const CouponDescription coupon = SquareCoupon();
  for (const double noise : {0.008, 0.016}) {
    Patch patch = RenderLines({.first = 0, .noise_sd = noise});
    for (int y = 0; y < patch.relative.rows; ++y) {
      for (int x = 0; x < patch.relative.cols; ++x) {
        patch.relative.at<float>(y, x) += static_cast<float>(0.06 * (x - patch.origin_px.x) / 800);
      }
    }
    const Finding finding = CooccurrenceMetric().measure(MakeSurface(patch, coupon));
    const std::vector<double> want{0.5, 0.4375, 0.78125 + 0.00625, 0.3525, 2.1226, 0};
    for (std::size_t f = 0; f < want.size(); ++f) {
      for (const std::size_t direction : {0, 1}) {
        ASSERT_TRUE(finding.features[3 * f + direction].value.has_value()) << f;
        EXPECT_NEAR(*finding.features[3 * f + direction].value, want[f], 0.03) << f;
      }
      EXPECT_NEAR(*finding.features[3 * f + 2].value, 1, 0.01) << f;
    }
  }
}

// Pixels off the field may hold anything.
TEST(CooccurrenceMetric, IgnoresWhatIsOffTheField) {
  Patch patch = RenderLines({.pitch_mm = 0.5, .lay_deg = 0, .first = 0.3});
  const CouponDescription coupon = SquareCoupon();
  const Finding clean = CooccurrenceMetric().measure(MakeSurface(patch, coupon));
  // Bicubic interpolation reaches two pixels.
  const cv::Mat field = patch.regions == static_cast<int>(Region::kField);
  for (int y = 0; y < patch.relative.rows; ++y) {
    for (int x = 0; x < patch.relative.cols; ++x) {
      const cv::Rect near = cv::Rect(x - 2, y - 2, 5, 5) & cv::Rect({}, field.size());
      if (cv::countNonZero(field(near)) == 0) {
        patch.relative.at<float>(y, x) = 50;
      }
    }
  }
  const Finding poisoned = CooccurrenceMetric().measure(MakeSurface(patch, coupon));
  for (std::size_t i = 0; i < clean.features.size(); ++i) {
    EXPECT_EQ(clean.features[i].value, poisoned.features[i].value) << i;
  }
}

// A strip of field 0.1 mm wide holds no pair 0.2 mm apart across it.
TEST(Cooccurrence, AFieldWithoutPairsHasNoValues) {
  Patch patch = RenderLines({.pitch_mm = 0.5, .lay_deg = 0, .first = 0.3});
  cv::Mat field = patch.regions == static_cast<int>(Region::kField);
  patch.regions.setTo(static_cast<int>(Region::kMargin), field);
  patch.regions(cv::Rect(100, 440, 600, 2)).setTo(static_cast<int>(Region::kField));
  const CouponDescription coupon = SquareCoupon();
  const Finding finding = CooccurrenceMetric().measure(MakeSurface(patch, coupon));
  for (const Feature& feature : finding.features) {
    EXPECT_FALSE(feature.value.has_value());
    EXPECT_FALSE(feature.reason.empty());
  }
}

}  // namespace
}  // namespace laygauge
