#pragma once

#include <map>
#include <string>
#include <vector>

#include "grade/scale.h"

namespace laygauge {

// Settings of a run as the run sheet gives them: column -> text.
using RunSettings = std::map<std::string, std::string, std::less<>>;

// What went wrong on a coupon before all else, in the words of people who set print profiles
// (common practice): "failed", "too little material", "too much material", "lines apart from
// walls", "nozzle drag", "uneven extrusion"; empty: nothing plain.
struct Fault {
  std::string name;
  std::string evidence;  // the features that show it, and the setting that belongs to it
  double severity = 0;   // 1: plainly seen (IndexPart::plain_level)
};

// The fault of the largest severity, if that is at least `kLeastSeverity`. A surface of which 1 %
// failed (`kFailedFrom` plain levels) is failed whatever else is on it: a whole one has exactly 0.
inline constexpr double kLeastSeverity = 0.4;
inline constexpr double kFailedFrom = 0.2;
[[nodiscard]] Fault ChiefFault(const FeatureTable& features, const RunSettings& settings);

// A run of a batch for the check below.
struct JudgedRun {
  std::string well;
  FeatureTable features;
  RunSettings settings;
};

// Common practice: where even the gentlest run (the slowest, where a speed is told; else the best)
// starves or overfills, the extrusion should be calibrated before any tuning. Where other runs show
// the opposite, it is the settings that differ. One sentence, or an empty text. Failed coupons and
// those without lines (ironed) do not count.
[[nodiscard]] std::string ExtrusionWarning(const std::string& batch,
                                           const std::vector<JudgedRun>& runs);

}  // namespace laygauge
