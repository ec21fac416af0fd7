#include "grade/fault.h"

#include <fmt/format.h>

#include <algorithm>
#include <optional>
#include <string_view>
#include <utility>

#include "base/csv.h"
#include "grade/indices.h"

namespace laygauge {
namespace {

constexpr std::string_view kTooLittle = "too little material";
constexpr std::string_view kTooMuch = "too much material";
constexpr std::string_view kFailed = "failed";

// A fault, the features that show it with their plain levels, and the words by which a run sheet's
// column is known to matter to it.
struct FaultRule {
  std::string_view name;
  std::vector<IndexPart> parts;
  std::vector<std::string_view> setting_words;
};

const std::vector<FaultRule>& FaultRules() {
  const auto part = [](std::string_view feature) {
    for (const auto parts : {RoughnessParts(), DefectParts()}) {
      for (const IndexPart& candidate : parts) {
        if (candidate.feature == feature) return candidate;
      }
    }
    return IndexPart{feature, 1};
  };
  static const std::vector<FaultRule> rules{
      {kFailed, {part("failure_area_pct")}, {}},
      {kTooLittle, {part("gap_area_pct")}, {"flow", "extrusion", "width"}},
      // Blobs come from oozing as well: a plain level of their own, twice the index's.
      {kTooMuch, {part("ridge_um"), {"blob_count_per_cm2", 1}}, {"flow", "extrusion", "width"}},
      {"lines apart from walls", {part("wall_gap_mean_mm")}, {"overlap", "flow"}},
      {"nozzle drag", {part("scar_length_mm_per_cm2")}, {"hop", "travel", "wipe"}},
      {"uneven extrusion", {part("waviness")}, {"speed", "temp"}},
  };
  return rules;
}

std::optional<double> ValueOf(const FeatureTable& features, std::string_view name) {
  const auto found = features.find(name);
  return found == features.end() ? std::nullopt : found->second.value;
}

double SeverityOf(const FaultRule& rule, const FeatureTable& features) {
  return IndexOf(rule.parts, features).value.value_or(0);
}

std::string EvidenceOf(const FaultRule& rule, const FeatureTable& features,
                       const RunSettings& settings) {
  std::string text;
  const auto add = [&text](std::string_view name, std::string_view value) {
    text += fmt::format("{}{} {}", text.empty() ? "" : ", ", name, value);
  };
  for (const IndexPart& part : rule.parts) {
    if (const auto value = ValueOf(features, part.feature)) {
      add(part.feature, fmt::format("{:.3g}", *value));
    }
  }
  for (const auto& [column, value] : settings) {
    const bool matters = std::any_of(rule.setting_words.begin(), rule.setting_words.end(),
                                     [&setting = column](std::string_view word) {
                                       return setting.find(word) != std::string::npos;
                                     });
    if (matters && !value.empty()) add(column, value);
  }
  return text;
}

double SeverityNamed(std::string_view name, const FeatureTable& features) {
  for (const FaultRule& rule : FaultRules()) {
    if (rule.name == name) return SeverityOf(rule, features);
  }
  return 0;
}

std::optional<double> SpeedOf(const JudgedRun& run) {
  for (const auto& [column, value] : run.settings) {
    if (column.find("speed") != std::string::npos) return ParseNumber(value);
  }
  return std::nullopt;
}

}  // namespace

Fault ChiefFault(const FeatureTable& features, const RunSettings& settings) {
  const FaultRule* chief = nullptr;
  double severity = kLeastSeverity;
  for (const FaultRule& rule : FaultRules()) {
    const double here = SeverityOf(rule, features);
    if (rule.name == kFailed && here >= kFailedFrom) {
      return {std::string(kFailed), EvidenceOf(rule, features, settings), here};
    }
    if (here < severity) continue;
    chief = &rule;
    severity = here;
  }
  if (chief == nullptr) return {};
  return {std::string(chief->name), EvidenceOf(*chief, features, settings), severity};
}

std::string ExtrusionWarning(const std::string& batch, const std::vector<JudgedRun>& runs) {
  constexpr double kPlain = 0.75;  // nearly plainly seen, on a run that should be clean
  constexpr size_t kFewest = 3;    // fewer runs say little about a batch
  std::vector<const JudgedRun*> judged;
  for (const JudgedRun& run : runs) {
    const bool has_lines = ValueOf(run.features, "pitch_mm").has_value();
    if (has_lines && SeverityNamed(kFailed, run.features) < kFailedFrom) judged.push_back(&run);
  }
  if (judged.size() < kFewest) return "";

  // The slowest third, where speeds are told; else all of them.
  std::vector<const JudgedRun*> gentle = judged;
  if (std::all_of(judged.begin(), judged.end(),
                  [](const JudgedRun* run) { return SpeedOf(*run).has_value(); })) {
    std::sort(gentle.begin(), gentle.end(),
              [](const JudgedRun* a, const JudgedRun* b) { return *SpeedOf(*a) < *SpeedOf(*b); });
    gentle.resize((gentle.size() + 2) / 3);
  }
  const auto shows = [](std::string_view fault) {
    return [fault](const JudgedRun* run) { return SeverityNamed(fault, run->features) >= kPlain; };
  };
  for (const auto& [fault, opposite] :
       {std::pair{kTooLittle, kTooMuch}, std::pair{kTooMuch, kTooLittle}}) {
    if (!std::all_of(gentle.begin(), gentle.end(), shows(fault))) continue;
    if (std::any_of(judged.begin(), judged.end(), shows(opposite))) continue;
    return fmt::format(
        "batch {}: even the gentlest runs show {}: check the extrusion calibration before tuning "
        "anything else",
        batch, fault);
  }
  return "";
}

}  // namespace laygauge
