#pragma once

#include <optional>
#include <string>
#include <vector>

#include "base/error.h"
#include "coupon/coupon_description.h"
#include "grade/scale.h"
#include "sheet/sheet_description.h"

namespace laygauge {

// What an option names: a shipped one by its name, or a file. Empty: the default.

// All shipped sheets when `named` is empty. `bar_mm`: the scale bar as measured on the print.
[[nodiscard]] Expected<std::vector<SheetDescription>> SheetsNamed(const std::string& named,
                                                                  std::optional<double> bar_mm);
[[nodiscard]] Expected<CouponDescription> CouponNamed(const std::string& named);

struct NamedScale {
  Scale scale;
  std::string source;  // for messages: the file, or the shipped scale's name
};
[[nodiscard]] Expected<NamedScale> ScaleNamed(const std::string& named);

}  // namespace laygauge
