#include "texture/cooccurrence.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <fstream>
#include <map>
#include <numbers>
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

// scikit-image on its own photographs, the same levels: nothing but the order of sums differs.
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
    const int levels = 256 >> shift;
    cv::Mat quantised(image.size(), CV_8UC1);
    std::transform(
        image.begin<std::uint8_t>(), image.end<std::uint8_t>(), quantised.begin<std::uint8_t>(),
        [shift = shift](std::uint8_t v) { return static_cast<std::uint8_t>(v >> shift); });
    // Its angle pi/4 is one row down, one column right; offsets are rounded, so that distance 2
    // becomes 1 row and 1 column, distance 5 becomes 4 and 4.
    const double turn = angle * kPi / 4;
    const int down = static_cast<int>(std::lround(distance * std::sin(turn)));
    const int right = static_cast<int>(std::lround(distance * std::cos(turn)));
    const CooccurrenceFeatures f = DescribeCooccurrence(CountCooccurrence(
        quantised, cv::Mat(image.size(), CV_8UC1, cv::Scalar(1)), levels, down, right));
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
  EXPECT_EQ(cases, 2 * 2 * 3 * 4);
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

// The coupon's own level lies in the middle of a level; ends saturate.
TEST(QuantiseRelative, FixedScale) {
  const cv::Mat relative =
      (cv::Mat_<float>(1, 8) << 0.976F, 1.0F, 1.024F, 1.026F, 0.974F, -1.0F, 0.18F, 9.0F);
  const cv::Mat levels = QuantiseRelative(relative, {});
  const std::vector<int> want{16, 16, 16, 17, 15, 0, 0, 28};
  for (int i = 0; i < 8; ++i) {
    EXPECT_EQ(levels.at<std::uint8_t>(0, i), want[i]) << i;
  }
  EXPECT_THROW((CooccurrenceOptions{.low = 2, .high = 1}.Check()), BadOption);
  EXPECT_THROW((CooccurrenceOptions{.levels = 1}.Check()), BadOption);
  EXPECT_THROW((CooccurrenceOptions{.offset_mm = 0}.Check()), BadOption);
  EXPECT_NO_THROW(CooccurrenceOptions().Check());
}

// A grating A cos(2 pi v / p) at the offset d across: differences have the mean square
// 2 A^2 sin^2(pi d / p); along they are 0. The mean over 2 x 2 pixels of 0.05 mm dims the amplitude
// by cos(pi 0.05 / p). Rounding to levels adds 1/6 at most (two independent uniform errors) to
// either, bicubic interpolation 2.7 % of the amplitude, 5.4 % of its square.
TEST(CooccurrenceMetric, GratingAlongAndAcross) {
  const double pitch = 0.47;
  const Patch patch = RenderLines({.pitch_mm = pitch, .lay_deg = 30, .first = 0.3});
  const CouponDescription coupon = SquareCoupon();
  const Metric metric = CooccurrenceMetric();
  const Finding finding = metric.measure(MakeSurface(patch, coupon));
  ASSERT_EQ(finding.features.size(), metric.features.size());
  const double amplitude = 0.3 / 0.05 * std::cos(kPi * 0.05 / pitch);
  const double want = 2 * std::pow(amplitude * std::sin(kPi * 0.2 / pitch), 2);
  EXPECT_LT(*finding.features[0].value, 1.0 / 6 + 0.01 * want);
  EXPECT_NEAR(*finding.features[1].value, want, 0.054 * want + 1.0 / 6);
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

}  // namespace
}  // namespace laygauge
