#include "cli/score_command.h"

#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <map>
#include <memory>
#include <opencv2/core.hpp>
#include <optional>

#include "base/file.h"
#include "batch/score_run.h"
#include "cli/inputs.h"
#include "report/draw_coupon.h"
#include "report/encode_png.h"
#include "report/score_table.h"
#include "report/scores_csv.h"

namespace laygauge {
namespace {

namespace fs = std::filesystem;

struct ScoreOptions {
  std::vector<fs::path> photos;
  std::string sheet;
  std::optional<double> bar_mm;
  std::string coupon;
  std::string runs;
  std::string photo_list;
  std::string scale;
  fs::path out = "results";
  std::string pictures = "all";
  double px_per_mm = 20;
  int threads = 0;
  bool each_take = false;
  bool with_loss = false;
  bool json = false;
};

constexpr const char* kAfter =
    "\n"
    "Examples:\n"
    "  laygauge score photo.jpg\n"
    "  laygauge score *.jpg --runs runs.csv --photos photos.csv --out results\n"
    "  laygauge score photo.jpg --sheet my-sheet.json --bar-mm 19.87 --scale my-scale.json\n"
    "  laygauge score photo.jpg --json | python3 -m json.tool\n"
    "\n"
    "Photos of one batch (--photos) are its takes: they become one row a coupon.\n"
    "DIR/scores.csv is written last, when everything else is there.\n";

Expected<ScoreRunRequest> RequestOf(const ScoreOptions& options) {
  ScoreRunRequest request;
  request.photos = options.photos;
  auto sheets = SheetsNamed(options.sheet, options.bar_mm);
  if (!sheets) return tl::unexpected(sheets.error());
  request.sheets = std::move(*sheets);
  auto coupon = CouponNamed(options.coupon);
  if (!coupon) return tl::unexpected(coupon.error());
  request.coupon = std::move(*coupon);
  auto scale = ScaleNamed(options.scale);
  if (!scale) return tl::unexpected(scale.error());
  request.scale = std::move(scale->scale);
  request.scale_file = scale->source;
  if (!options.runs.empty()) {
    auto runs = ReadRunSheet(options.runs, FixedResultColumns());
    if (!runs) return tl::unexpected(runs.error());
    request.runs = std::move(*runs);
  }
  if (!options.photo_list.empty()) {
    auto list = ReadPhotoList(options.photo_list);
    if (!list) return tl::unexpected(list.error());
    request.photo_list = std::move(*list);
  }
  request.each_take = options.each_take;
  request.with_loss = options.with_loss;
  request.measure.keep_patches = options.pictures != "none";
  request.measure.regions.px_per_mm = options.px_per_mm;
  request.camera.threads = std::max(1, cv::getNumThreads());
  request.camera.top_height_mm = request.coupon.thickness_mm;
  request.measure.Check();
  request.camera.Check();
  return request;
}

// Where a run's files go, and which picture names are taken.
class Folder {
 public:
  Folder(fs::path path, bool pictures) : path_(std::move(path)), pictures_(pictures) {}

  Done Make() {
    for (const fs::path& part : {path_, path_ / "records", path_ / "pictures"}) {
      if (part.filename() == "pictures" && !pictures_) continue;
      const bool was_there = fs::exists(part);
      if (auto done = MakeFolder(part); !done) return done;
      if (!was_there) made_.push_back(part);
    }
    return {};
  }

  // Takes away again what Make() made, where nothing was put into it.
  void RemoveIfEmpty() const {
    std::error_code ignored;
    for (auto part = made_.rbegin(); part != made_.rend(); ++part) fs::remove(*part, ignored);
  }

  Done Keep(const PhotoMeasurement& measured, const CouponDescription& coupon) {
    const PhotoRecord& record = measured.record;
    for (size_t i = 0; i < record.coupons.size(); ++i) {
      if (!pictures_ || !measured.patches[i]) continue;
      if (auto done = KeepPictures(record, record.coupons[i], *measured.patches[i], coupon);
          !done) {
        return done;
      }
    }
    return WriteFileWhole(path_ / "records" / (record.stem + ".json"), FormatRecord(record));
  }

 private:
  Done KeepPictures(const PhotoRecord& record, const CouponRecord& found, const Patch& patch,
                    const CouponDescription& coupon) {
    const int take = ++takes_[{record.batch, found.well}];
    std::vector<std::string> caption{
        fmt::format("batch {}  well {}  photo {}", record.batch, found.well, record.file)};
    if (found.score) {
      const std::string why = WhyText(*found.score);
      caption.push_back(fmt::format("score {:.2f} ± {:.2f}   {}", found.score->value,
                                    found.score->sd, why.empty() ? "nothing found" : why));
    }
    const cv::Mat plain = PictureToJudge(patch);
    const cv::Mat drawn = PictureOfFindings(patch, coupon, found.marks, caption);
    const fs::path folder = path_ / "pictures";
    return WriteFilesWhole(
        {{folder / PictureName(record.batch, found.well, take), EncodePng(plain, patch.px_per_mm)},
         {folder / PictureName(record.batch, found.well, take, "-found"),
          EncodePng(drawn, patch.px_per_mm)}});
  }

  fs::path path_;
  bool pictures_;
  std::vector<fs::path> made_;
  std::map<std::pair<std::string, std::string>, int> takes_;  // pictures so far, by coupon
};

// "photo 3 of 8" on one line that is written over, where standard error is a terminal.
Progress ProgressOn(const Terminal& terminal, size_t photos) {
  if (!terminal.color_err) return {};
  return [&terminal, photos](int done) {
    const bool reading = static_cast<size_t>(done) <= photos;
    const size_t at = reading ? static_cast<size_t>(done) : static_cast<size_t>(done) - photos;
    terminal.err << fmt::format("\r{} {} of {} \x1b[K", reading ? "read" : "measured", at, photos);
    if (!reading && at == photos) terminal.err << "\r\x1b[K";
    terminal.err << std::flush;
  };
}

ExitCode Finish(const ScoreOptions& options, const ScoreRun& run, const Terminal& terminal) {
  for (const std::string& note : run.notes) terminal.err << "note: " << note << '\n';
  ExitCode code = kExitDone;
  for (const RefusedPhoto& refused : run.refused) {
    code = Report(terminal, refused.problem);
  }
  if (run.photos.empty()) return code;
  if (auto done = WriteFileWhole(options.out / "scores.csv", FormatScoresCsv(run.table)); !done) {
    return Report(terminal, done.error());
  }
  if (options.json) {
    terminal.out << FormatScoresJson(run.table);
  } else {
    terminal.out << FormatScoreTable(run.table, {.colour = terminal.color_out});
    terminal.out << '\n';
    for (const PhotoSummary& photo : run.photos) {
      terminal.out << fmt::format(
          "{}: sheet {}, {} of {} markers, reprojection {:.2f} px ({:.3f} mm), {:.1f} px/mm\n",
          photo.file, photo.sheet, photo.markers_used, photo.markers_on_sheet, photo.rms_px,
          photo.rms_mm, photo.least_px_per_mm);
    }
    terminal.out << fmt::format("\nTable:    {}\n", (options.out / "scores.csv").string());
    if (options.pictures != "none") {
      terminal.out << fmt::format("Pictures: {}\n", (options.out / "pictures").string());
    }
    terminal.out << fmt::format("Records:  {}\n", (options.out / "records").string());
  }
  return run.refused.empty() ? kExitDone : kExitDoneInPart;
}

// Keys of a description that the program does not know: reported, and nothing else.
void NoteUnknown(const std::vector<std::string>& keys, const Terminal& terminal) {
  for (const std::string& key : keys) {
    terminal.err << fmt::format("note: {}: this key is not known and is not used\n", key);
  }
}

int Run(const ScoreOptions& options, const Terminal& terminal) {
  if (options.threads < 0) throw BadOption("--threads: 0 (every core) or more is expected");
  // More than there are cores would only draw warnings of the libraries'.
  if (options.threads > 0) cv::setNumThreads(std::min(options.threads, cv::getNumberOfCPUs()));
  const auto request = RequestOf(options);
  if (!request) return Report(terminal, request.error());
  Folder folder(options.out, options.pictures != "none");
  if (auto done = folder.Make(); !done) {
    folder.RemoveIfEmpty();
    return Report(terminal, done.error());
  }
  for (const SheetDescription& sheet : request->sheets) NoteUnknown(sheet.unknown_keys, terminal);
  NoteUnknown(request->coupon.unknown_keys, terminal);
  const auto run = RunScoring(
      *request,
      [&](const PhotoMeasurement& measured) { return folder.Keep(measured, request->coupon); },
      ProgressOn(terminal, options.photos.size()));
  if (!run || run->photos.empty()) folder.RemoveIfEmpty();
  if (!run) return Report(terminal, run.error());
  return Finish(options, *run, terminal);
}

}  // namespace

Command AddScoreCommand(CLI::App& program) {
  const auto options = std::make_shared<ScoreOptions>();
  CLI::App* app = program.add_subcommand(
      "score", "Score the coupons in photographs: a table, records and pictures");
  app->add_option("PHOTO", options->photos, "photographs: JPEG, PNG or TIFF")
      ->required()
      ->type_name("PHOTO");
  app->add_option("--sheet", options->sheet,
                  "the sheet: a description file or the name of a shipped one; left out, the "
                  "shipped one to which the markers belong");
  app->add_option("--bar-mm", options->bar_mm,
                  "the scale bar's length as measured on the print, mm");
  app->add_option("--coupon", options->coupon,
                  "the coupon: a description file or the name of a shipped one; left out, "
                  "square-40");
  app->add_option("--runs", options->runs, "the run sheet: CSV with batch, well and settings");
  app->add_option("--photos", options->photo_list,
                  "the photo list: CSV with photo, batch, and take, operator, filament");
  app->add_option("--scale", options->scale,
                  "a scale made by calibrate; left out, the shipped one");
  app->add_option("--out", options->out, "the folder to write into")->capture_default_str();
  app->add_option("--pictures", options->pictures, "all or none")
      ->check(CLI::IsMember({"all", "none"}))
      ->capture_default_str();
  app->add_option("--px-per-mm", options->px_per_mm, "scale of the rectified coupons")
      ->capture_default_str();
  app->add_option("--threads", options->threads, "0: every core")->capture_default_str();
  app->add_flag("--each-take", options->each_take, "one row a coupon and photo");
  app->add_flag("--loss", options->with_loss, "add the column loss = 10 - score");
  app->add_flag("--json", options->json, "print the result as JSON instead of a table");
  app->footer(kAfter);
  return {app, [options](const Terminal& terminal) { return Run(*options, terminal); }};
}

}  // namespace laygauge
