#include "grade/scale_file.h"

#include <fmt/format.h>

#include <Eigen/Eigenvalues>
#include <algorithm>
#include <array>
#include <charconv>
#include <nlohmann/json.hpp>
#include <set>
#include <stdexcept>
#include <utility>

#include "base/file.h"
#include "base/json_view.h"
#include "grade/content_hash.h"

namespace laygauge {
namespace {

using nlohmann::ordered_json;

constexpr std::array<std::pair<WhenMissing, std::string_view>, 3> kWhenMissingNames{{
    {WhenMissing::kNoLoss, "no_loss"},
    {WhenMissing::kTypical, "typical"},
    {WhenMissing::kRefuse, "refuse"},
}};

std::string_view NameOf(WhenMissing when) {
  for (const auto& [candidate, name] : kWhenMissingNames) {
    if (candidate == when) return name;
  }
  return "";
}

WhenMissing ReadWhenMissing(const JsonView& view) {
  const std::string text = view.Text("when_missing");
  for (const auto& [when, name] : kWhenMissingNames) {
    if (name == text) return when;
  }
  view.Fail("when_missing", "no_loss, typical or refuse was expected, not \"" + text + "\"");
}

double AtLeastZero(const JsonView& view, std::string_view key) {
  const double value = view.Number(key);
  if (value < 0) view.Fail(key, fmt::format("{} is negative; it must be 0 or more", value));
  return value;
}

double Positive(const JsonView& view, std::string_view key) {
  const double value = view.Number(key);
  if (value <= 0) view.Fail(key, fmt::format("{} was found; it must be above 0", value));
  return value;
}

double Grade(const JsonView& view, std::string_view key) {
  const double value = view.Number(key);
  if (value < 1 || value > 10) view.Fail(key, fmt::format("{} is outside 1 to 10", value));
  return value;
}

std::string NonEmpty(const JsonView& view, std::string_view key) {
  std::string text = view.Text(key);
  if (text.empty()) view.Fail(key, "a name was expected, not an empty text");
  return text;
}

FeatureRange ReadRange(const JsonView& view) {
  FeatureRange range;
  range.feature = NonEmpty(view, "feature");
  range.metric = NonEmpty(view, "metric");
  range.metric_version = view.Integer("metric_version");
  range.low = view.Number("low");
  range.high = view.Number("high");
  if (range.low > range.high) view.Fail("low", "it is above `high`");
  return range;
}

ScaleTerm ReadTerm(const JsonView& view) {
  ScaleTerm term;
  term.range = ReadRange(view);
  term.loss = NonEmpty(view, "loss");
  const std::string transform = view.Text("transform");
  const auto kind = TransformByName(transform);
  if (!kind) {
    view.Fail("transform",
              "linear, saturating, root or logarithm was expected, not \"" + transform + "\"");
  }
  term.transform = {*kind, Positive(view, "half")};
  term.when_missing = ReadWhenMissing(view);
  term.weight = AtLeastZero(view, "weight");
  term.typical_term = AtLeastZero(view, "typical_term");
  term.typical_sd = AtLeastZero(view, "typical_sd");
  view.NoOtherKeys();
  return term;
}

// The lower triangle, row by row; the whole must be a covariance.
Eigen::MatrixXd ReadCovariance(const JsonView& view, size_t terms) {
  const std::vector<double> values = view.Numbers("covariance_lower");
  if (values.size() != terms * (terms + 1) / 2) {
    view.Fail("covariance_lower", fmt::format("{} numbers were expected for {} terms, not {}",
                                              terms * (terms + 1) / 2, terms, values.size()));
  }
  const auto count = static_cast<Eigen::Index>(terms);
  Eigen::MatrixXd covariance(count, count);
  size_t next = 0;
  for (Eigen::Index i = 0; i < count; ++i) {
    for (Eigen::Index j = 0; j <= i; ++j) covariance(i, j) = covariance(j, i) = values[next++];
  }
  const Eigen::VectorXd eigenvalues =
      Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd>(covariance, Eigen::EigenvaluesOnly)
          .eigenvalues();
  // The file's nine digits may turn an eigenvalue of 0 a little negative.
  if (eigenvalues.minCoeff() < -1e-6 * std::max(eigenvalues.maxCoeff(), 1e-12)) {
    view.Fail("covariance_lower",
              "it is not a covariance: some sum of weights would have a "
              "negative variance");
  }
  return covariance;
}

ScaleAccuracy ReadAccuracy(const JsonView& view) {
  ScaleAccuracy accuracy;
  accuracy.left_out = view.Text("left_out");
  accuracy.coupons = view.Integer("coupons");
  accuracy.mean_absolute_error = AtLeastZero(view, "mean_absolute_error");
  accuracy.rms_error = AtLeastZero(view, "rms_error");
  accuracy.rank_correlation = view.MaybeNumber("rank_correlation");
  accuracy.weighted_kappa = view.MaybeNumber("weighted_kappa");
  view.NoOtherKeys();
  return accuracy;
}

GradedCoupon ReadCoupon(const JsonView& view) {
  GradedCoupon coupon;
  coupon.batch = view.Text("batch");
  coupon.well = view.Text("well");
  coupon.grade = view.MaybeNumber("grade");  // strictness taken off: may pass 10 a little
  coupon.score = Grade(view, "score");
  view.NoOtherKeys();
  return coupon;
}

void CheckFormat(const JsonView& view) {
  const int format = view.Integer("format");
  if (format != kScaleFormat) {
    view.Fail("format", fmt::format("{} is not known here: this program reads format {}; use the "
                                    "program that wrote the scale, or calibrate anew",
                                    format, kScaleFormat));
  }
}

void CheckNoFeatureTwice(const JsonView& view, const Scale& scale) {
  std::set<std::string> names;
  for (const ScaleTerm& term : scale.terms) {
    if (!names.insert(term.range.feature).second) {
      view.Fail("terms", "the feature " + term.range.feature + " is there twice");
    }
  }
}

Scale ReadScaleObject(const JsonView& view) {
  CheckFormat(view);
  Scale scale;
  scale.name = NonEmpty(view, "name");
  scale.remark = view.Text("remark");
  scale.conditions = view.Text("conditions");
  scale.working_px_per_mm = Positive(view, "working_px_per_mm");
  for (const JsonView& term : view.Objects("terms")) scale.terms.push_back(ReadTerm(term));
  if (scale.terms.empty()) view.Fail("terms", "at least one term is needed");
  CheckNoFeatureTwice(view, scale);
  scale.covariance = ReadCovariance(view, scale.terms.size());
  for (const JsonView& watched : view.Objects("watched")) {
    scale.watched.push_back(ReadRange(watched));
    watched.NoOtherKeys();
  }
  scale.residual_sd = Positive(view, "residual_sd");
  scale.grader_sd = Positive(view, "grader_sd");
  scale.strictness_sd = AtLeastZero(view, "strictness_sd");
  scale.panel = view.Integer("panel");
  if (scale.panel < 1) view.Fail("panel", "at least one grader was expected");
  for (const JsonView& coupon : view.Objects("coupons")) {
    scale.coupons.push_back(ReadCoupon(coupon));
  }
  for (const JsonView& accuracy : view.Objects("accuracy")) {
    scale.accuracy.push_back(ReadAccuracy(accuracy));
  }
  scale.report = view.Texts("report");
  const std::string stated = view.Text("content");
  view.NoOtherKeys();
  const bool bare = scale.coupons.empty() && stated.empty();  // written by hand, fitted to nothing
  if (!bare && stated != ScaleContentHash(scale)) {
    view.Fail("content",
              "the file was changed after it was written, and its numbers no longer "
              "describe the calibration; restore it, or calibrate anew");
  }
  return scale;
}

// Enough digits for a score, few enough that a rewritten file is the same text.
double Rounded(double value) {
  const std::string text = fmt::format("{:.9g}", value);
  double rounded = 0;
  std::from_chars(text.data(), text.data() + text.size(), rounded);
  return rounded + 0.0;  // no "-0"
}

ordered_json RangeJson(const FeatureRange& range) {
  return {{"feature", range.feature},
          {"metric", range.metric},
          {"metric_version", range.metric_version},
          {"low", Rounded(range.low)},
          {"high", Rounded(range.high)}};
}

ordered_json TermJson(const ScaleTerm& term) {
  ordered_json json = RangeJson(term.range);
  json["loss"] = term.loss;
  json["transform"] = TransformName(term.transform.kind);
  json["half"] = Rounded(term.transform.half);
  json["when_missing"] = NameOf(term.when_missing);
  json["weight"] = Rounded(term.weight);
  json["typical_term"] = Rounded(term.typical_term);
  json["typical_sd"] = Rounded(term.typical_sd);
  return json;
}

ordered_json AccuracyJson(const ScaleAccuracy& accuracy) {
  ordered_json json{{"left_out", accuracy.left_out},
                    {"coupons", accuracy.coupons},
                    {"mean_absolute_error", Rounded(accuracy.mean_absolute_error)},
                    {"rms_error", Rounded(accuracy.rms_error)}};
  if (accuracy.rank_correlation) json["rank_correlation"] = Rounded(*accuracy.rank_correlation);
  if (accuracy.weighted_kappa) json["weighted_kappa"] = Rounded(*accuracy.weighted_kappa);
  return json;
}

// All but the hash.
ordered_json ContentJson(const Scale& scale) {
  ordered_json json{{"format", kScaleFormat},
                    {"name", scale.name},
                    {"remark", scale.remark},
                    {"conditions", scale.conditions},
                    {"working_px_per_mm", Rounded(scale.working_px_per_mm)}};
  json["terms"] = ordered_json::array();
  for (const ScaleTerm& term : scale.terms) json["terms"].push_back(TermJson(term));
  json["covariance_lower"] = ordered_json::array();
  for (Eigen::Index i = 0; i < scale.covariance.rows(); ++i) {
    for (Eigen::Index j = 0; j <= i; ++j) {
      json["covariance_lower"].push_back(Rounded(scale.covariance(i, j)));
    }
  }
  json["watched"] = ordered_json::array();
  for (const FeatureRange& range : scale.watched) json["watched"].push_back(RangeJson(range));
  json["residual_sd"] = Rounded(scale.residual_sd);
  json["grader_sd"] = Rounded(scale.grader_sd);
  json["strictness_sd"] = Rounded(scale.strictness_sd);
  json["panel"] = scale.panel;
  json["coupons"] = ordered_json::array();
  for (const GradedCoupon& coupon : scale.coupons) {
    ordered_json entry{{"batch", coupon.batch}, {"well", coupon.well}};
    if (coupon.grade) entry["grade"] = Rounded(*coupon.grade);
    entry["score"] = Rounded(coupon.score);
    json["coupons"].push_back(entry);
  }
  json["accuracy"] = ordered_json::array();
  for (const ScaleAccuracy& accuracy : scale.accuracy) {
    json["accuracy"].push_back(AccuracyJson(accuracy));
  }
  json["report"] = scale.report;
  return json;
}

}  // namespace

std::string ScaleContentHash(const Scale& scale) { return ContentHash(ContentJson(scale).dump()); }

Expected<Scale> ParseScale(std::string_view text, const std::string& file) {
  return ParseJson(text, file, ReadScaleObject);
}

Expected<Scale> ReadScale(const std::filesystem::path& path) {
  const auto text = ReadFile(path);
  if (!text) return tl::unexpected(text.error());
  return ParseScale(*text, path.string());
}

std::string FormatScale(const Scale& scale) {
  ordered_json json = ContentJson(scale);
  json["content"] = ContentHash(ContentJson(scale).dump());
  return json.dump(1) + "\n";
}

const Scale& ShippedScale() {
  static const Scale scale = [] {
    const EmbeddedFile& file = EmbeddedScales().front();
    auto parsed = ParseScale(file.text, std::string(file.name));
    if (!parsed) throw std::logic_error(parsed.error().message);  // the build's own file
    return *std::move(parsed);
  }();
  return scale;
}

}  // namespace laygauge
