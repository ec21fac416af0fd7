// Times of the stages on a photograph of 12 megapixels with six coupons, on one thread, as
// multiples of decoding it; of every metric of a coupon; of the same measures in scikit-image.
//
//   laygauge_bench [options of Google Benchmark]

#include <benchmark/benchmark.h>
#include <fmt/format.h>

#include <algorithm>
#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <map>
#include <numeric>
#include <string>
#include <vector>

#include "base/memory.h"
#include "batch/measure_photo.h"
#include "coupon/rectify.h"
#include "sheet/find_markers.h"
#include "sheet/match_sheet.h"
#include "texture/metric.h"
#ifdef LAYGAUGE_BENCH_IMREAD
#include <opencv2/imgcodecs.hpp>
#endif

namespace laygauge {
namespace {

constexpr const char* kPhoto = LAYGAUGE_SOURCE_DIR "/sample-images/d2.jpg";
constexpr const char* kDecoding = "decoding by OpenCV";
constexpr const char* kOwnDecoding = "reading the photo";

template <class T>
T Need(Expected<T> result) {
  if (!result) {
    std::fputs(fmt::format("{}\n", result.error().message).c_str(), stderr);
    std::exit(1);
  }
  return std::move(*result);
}

// What the stages need of each other, made once.
struct Plate {
  MeasurePhotoOptions options;
  const CouponDescription& coupon = ShippedCoupons().front();
  Photo photo = Need(ReadPhoto(kPhoto));
  FoundMarkers markers = Need(FindMarkers(photo, {}));
  SheetInPhoto found = Need(MatchSheet(photo.file, markers, ShippedSheets()));
  SheetSighting sighting{photo.file, photo.size(), photo.tags, found};
  CameraEstimate camera = Need(EstimateCameras({&sighting, 1}).front());
  CouponRegions regions = MakeRegions(coupon, options.regions);
  Light light = Need(EstimateLight(photo, camera.view, found.sheet, options.light));
  SheetSharpness sharpness =
      Need(MeasureSharpness(photo, camera.view, found.sheet, options.sharpness));
  PhotoNoise noise =
      Need(MeasureNoise(photo, camera.view, found.sheet, sharpness,
                        options.equalize.working_blur_sd_mm, options.equalize.max_gain));
  const Well& well = found.sheet.wells.front();
  Placement placement = *Locate().placement;
  Patch rectified = Rectified();
  Patch patch = Equalized();
  Surface surface = MakeSurface(patch, coupon);

  [[nodiscard]] WellFinding Locate() const {
    return LocateCoupon(photo, camera.view, light, found.sheet, well, coupon, options.locate);
  }
  [[nodiscard]] Patch Rectified() const {
    return Need(MakePatch(photo, camera.view, light, placement, coupon.thickness_mm, regions,
                          options.patch));
  }
  [[nodiscard]] Patch Equalized() const {
    const LocalSpread spread =
        sharpness.At(placement.center_x_mm, placement.center_y_mm, placement.turn_deg);
    return Need(Equalize(
        rectified, {.where = "A1",
                    .spread = spread,
                    .paper_light = light.At(placement.center_x_mm, placement.center_y_mm),
                    .resampling_sd_mm = ResamplingBlurSdMm(spread.px_per_mm, rectified.px_per_mm),
                    .noise = noise}));
  }
};

// A line of the table.
struct Row {
  std::string name;
  int times = 1;  // that the program does it, for this photo; 0: part of another line
  bool is_metric = false;
};

std::vector<Row>& Rows() {
  static std::vector<Row> rows;
  return rows;
}

template <class Stage>
void Add(const Row& row, Stage stage) {
  Rows().push_back(row);
  benchmark::RegisterBenchmark(row.name.c_str(),
                               [stage](benchmark::State& state) {
                                 for (auto _ : state) benchmark::DoNotOptimize(stage());
                               })
      ->Unit(benchmark::kMillisecond)
      ->MinTime(0.05)
      ->Repetitions(7);
}

void AddStages(const Plate& p) {
#ifdef LAYGAUGE_BENCH_IMREAD
  Add({kDecoding, 0}, [] { return cv::imread(kPhoto, cv::IMREAD_COLOR); });
#endif
  const int wells = static_cast<int>(p.found.sheet.wells.size());
  Add({kOwnDecoding}, [] { return ReadPhoto(kPhoto); });
  Add({"markers"}, [&] { return FindMarkers(p.photo, {}); });
  Add({"camera"}, [&] { return EstimateCameras({&p.sighting, 1}); });
  Add({"regions of the coupon"}, [&] { return MakeRegions(p.coupon, p.options.regions); });
  Add({"light"},
      [&] { return EstimateLight(p.photo, p.camera.view, p.found.sheet, p.options.light); });
  Add({"sharpness"},
      [&] { return MeasureSharpness(p.photo, p.camera.view, p.found.sheet, p.options.sharpness); });
  Add({"noise"}, [&] {
    return MeasureNoise(p.photo, p.camera.view, p.found.sheet, p.sharpness,
                        p.options.equalize.working_blur_sd_mm, p.options.equalize.max_gain);
  });
  Add({"place of a coupon", wells}, [&] { return p.Locate(); });
  Add({"rectified patch", wells}, [&] { return p.Rectified(); });
  Add({"equalised patch", wells}, [&] { return p.Equalized(); });
  Add({"surface: lines, torn areas, scars", wells, true},
      [&] { return MakeSurface(p.patch, p.coupon); });
  Add({"  of which spectra of the tiles", 0}, [&] { return MeasureFieldSpectrum(p.patch); });
  for (const Metric& metric : MetricTable()) {
    Add({"metric " + std::string(metric.name), wells, true},
        [&] { return metric.measure(p.surface); });
  }
}

// Keeps the least CPU time of each benchmark: what else the machine does only adds to it.
class LeastTimes : public benchmark::BenchmarkReporter {
 public:
  bool ReportContext(const Context& /*context*/) override { return true; }
  void ReportRuns(const std::vector<Run>& runs) override {
    for (const Run& run : runs) {
      if (run.run_type != Run::RT_Iteration) continue;
      const auto [at, is_new] =
          ms_.try_emplace(run.run_name.function_name, run.GetAdjustedCPUTime());
      if (!is_new) at->second = std::min(at->second, run.GetAdjustedCPUTime());
    }
  }
  [[nodiscard]] double Ms(const std::string& name) const {
    const auto at = ms_.find(name);
    return at == ms_.end() ? 0 : at->second;
  }

 private:
  std::map<std::string, double> ms_;
};

void PrintTable(const LeastTimes& times) {
  const bool has_opencv = times.Ms(kDecoding) > 0;
  const double decoding_ms = times.Ms(has_opencv ? kDecoding : kOwnDecoding);
  if (!has_opencv) std::puts("OpenCV's decoder is not at hand: multiples of the program's own.");
  std::puts(fmt::format("{:<36}{:>10}{:>7}{:>12}", "", "ms", "times", "x decoding").c_str());
  double whole_ms = 0;
  double coupon_ms = 0;
  for (const Row& row : Rows()) {
    const double ms = times.Ms(row.name);
    whole_ms += row.times * ms;
    coupon_ms += row.is_metric ? ms : 0;
    const double each = std::max(1, row.times) * ms / decoding_ms;
    std::puts(fmt::format("{:<36}{:>10.2f}{:>7}{:>12.2f}", row.name, ms, row.times, each).c_str());
  }
  std::puts(fmt::format("{:<36}{:>10.1f}{:>19.2f}", "all stages", whole_ms, whole_ms / decoding_ms)
                .c_str());
  std::puts(fmt::format("{:<36}{:>10.1f}", "all metrics of a coupon", coupon_ms).c_str());
}

// The same measures of the same patch by scikit-image and NumPy, by the script beside this file.
void PrintReferenceTimes(const Patch& patch) {
  const auto file = std::filesystem::temp_directory_path() / "laygauge_bench_patch.f32";
  std::ofstream(file, std::ios::binary)
      .write(reinterpret_cast<const char*>(patch.relative.data),
             static_cast<std::streamsize>(patch.relative.total() * sizeof(float)));
  const std::string command =
      fmt::format("'{}' '{}/tests/bench/reference_times.py' '{}' {}", LAYGAUGE_PYTHON,
                  LAYGAUGE_SOURCE_DIR, file.string(), patch.relative.cols);
  std::fflush(stdout);
  if (std::system(command.c_str()) != 0) std::puts("(the reference libraries are not at hand)");
  std::filesystem::remove(file);
}

}  // namespace
}  // namespace laygauge

int main(int argc, char** argv) {
  laygauge::KeepFreedMemory();
  benchmark::Initialize(&argc, argv);
  cv::setNumThreads(1);
  const laygauge::Plate plate;
  laygauge::AddStages(plate);
  laygauge::LeastTimes times;
  benchmark::RunSpecifiedBenchmarks(&times);
  laygauge::PrintTable(times);
  laygauge::PrintReferenceTimes(plate.patch);
}
