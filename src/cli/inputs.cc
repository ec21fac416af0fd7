#include "cli/inputs.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <filesystem>

#include "grade/scale_file.h"

namespace laygauge {
namespace {

constexpr const char* kDefaultCoupon = "square-40";

// A name that is neither shipped nor a file: says what there is.
template <class Description>
Problem NeitherNameNorFile(std::string_view kind, const std::string& named,
                           const std::vector<Description>& shipped) {
  std::vector<std::string> names;
  names.reserve(shipped.size());
  for (const Description& description : shipped) names.push_back(description.name);
  return {ProblemKind::kBadInput, fmt::format("{}: neither a file nor a shipped {}; shipped are {}",
                                              named, kind, fmt::join(names, ", "))};
}

template <class Description>
const Description* FindNamed(const std::vector<Description>& shipped, const std::string& named) {
  for (const Description& description : shipped) {
    if (description.name == named) return &description;
  }
  return nullptr;
}

}  // namespace

Expected<std::vector<SheetDescription>> SheetsNamed(const std::string& named,
                                                    std::optional<double> bar_mm) {
  std::vector<SheetDescription> sheets;
  if (named.empty()) {
    sheets = ShippedSheets();
  } else if (const auto* shipped = FindNamed(ShippedSheets(), named)) {
    sheets.push_back(*shipped);
  } else if (!std::filesystem::exists(named)) {
    return tl::unexpected(NeitherNameNorFile("sheet", named, ShippedSheets()));
  } else {
    auto read = ReadSheet(named);
    if (!read) return tl::unexpected(read.error());
    sheets.push_back(std::move(*read));
  }
  if (!bar_mm) return sheets;
  for (SheetDescription& sheet : sheets) {
    constexpr double kMostScaling = 0.2;  // printers fit to page by some per cent, not by more
    const double nominal_mm = sheet.scale_bar.length_mm();
    if (!(std::abs(*bar_mm / nominal_mm - 1) <= kMostScaling)) {
      return BadInput(
          fmt::format("--bar-mm {}: the bar of sheet {} is {:.4g} mm long in the drawing; a "
                      "length within 20 % of that was expected",
                      *bar_mm, sheet.name, nominal_mm));
    }
    sheet = ScaledByBar(sheet, *bar_mm);
  }
  return sheets;
}

Expected<CouponDescription> CouponNamed(const std::string& named) {
  const std::string& name = named.empty() ? kDefaultCoupon : named;
  if (const auto* shipped = FindNamed(ShippedCoupons(), name)) return *shipped;
  if (!std::filesystem::exists(name)) {
    return tl::unexpected(NeitherNameNorFile("coupon", name, ShippedCoupons()));
  }
  return ReadCoupon(name);
}

Expected<NamedScale> ScaleNamed(const std::string& named) {
  if (named.empty()) return NamedScale{ShippedScale(), ShippedScale().name};
  auto read = ReadScale(named);
  if (!read) return tl::unexpected(read.error());
  return NamedScale{std::move(*read), named};
}

}  // namespace laygauge
