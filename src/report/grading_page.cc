#include "report/grading_page.h"

#include <fmt/format.h>

#include <algorithm>
#include <nlohmann/json.hpp>
#include <numeric>
#include <random>
#include <set>
#include <stdexcept>
#include <string_view>
#include <utility>

#include "base/embedded.h"
#include "base/error.h"

namespace laygauge {

const std::vector<EmbeddedFile>& EmbeddedPages();  // the page, its script

namespace {

// std::shuffle may differ between libraries; this one (Fisher & Yates 1938) may not.
void Shuffle(std::vector<int>& values, std::mt19937_64& random) {
  for (size_t i = values.size(); i > 1; --i) std::swap(values[i - 1], values[random() % i]);
}

std::vector<int> ShuffledRange(int count, std::mt19937_64& random) {
  std::vector<int> order(static_cast<size_t>(count));
  std::iota(order.begin(), order.end(), 0);
  Shuffle(order, random);
  return order;
}

std::vector<std::vector<int>> GradeOrder(int coupons, int repeats, std::mt19937_64& random) {
  std::vector<int> order = ShuffledRange(coupons, random);
  // Those shown in the first third come again in the last third.
  const int third = std::max(1, coupons / 3);
  const std::vector<int> early(order.begin(), order.begin() + std::min(coupons, third));
  const int again = std::min(repeats, static_cast<int>(early.size()));
  for (const int index : ShuffledRange(static_cast<int>(early.size()), random)) {
    if (static_cast<int>(order.size()) == coupons + again) break;
    const size_t first_place = static_cast<size_t>(coupons - third);
    const size_t place = first_place + random() % (order.size() - first_place + 1);
    order.insert(order.begin() + static_cast<std::ptrdiff_t>(place),
                 early[static_cast<size_t>(index)]);
  }
  std::vector<std::vector<int>> items;
  items.reserve(order.size());
  for (const int coupon : order) items.push_back({coupon});
  return items;
}

std::vector<std::vector<int>> PairOrder(int coupons, int pairs, std::mt19937_64& random) {
  const int possible = coupons * (coupons - 1) / 2;
  std::vector<std::vector<int>> items;
  std::set<std::pair<int, int>> shown;
  // Rounds: a new ring of all coupons each time, its neighbours are the pairs. The first ring
  // connects all coupons; each round shows every coupon twice.
  while (static_cast<int>(items.size()) < std::min(pairs, possible)) {
    const std::vector<int> ring = ShuffledRange(coupons, random);
    for (size_t i = 0; i < ring.size() && static_cast<int>(items.size()) < pairs; ++i) {
      const int a = ring[i];
      const int b = ring[(i + 1) % ring.size()];
      if (!shown.insert(std::minmax(a, b)).second) continue;
      items.push_back(random() % 2 == 0 ? std::vector<int>{a, b} : std::vector<int>{b, a});
    }
  }
  std::vector<std::vector<int>> mixed;
  for (const int index : ShuffledRange(static_cast<int>(items.size()), random)) {
    mixed.push_back(items[static_cast<size_t>(index)]);
  }
  return mixed;
}

// RFC 4648, section 4.
std::string Base64(std::string_view bytes) {
  constexpr std::string_view kDigits =
      "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
  std::string text;
  text.reserve((bytes.size() + 2) / 3 * 4);
  for (size_t i = 0; i < bytes.size(); i += 3) {
    const size_t count = std::min<size_t>(3, bytes.size() - i);
    std::uint32_t group = 0;
    for (size_t k = 0; k < 3; ++k) {
      group = group << 8 | (k < count ? static_cast<unsigned char>(bytes[i + k]) : 0U);
    }
    for (size_t k = 0; k < 4; ++k) {
      text += k <= count ? kDigits[group >> (18 - 6 * k) & 63U] : '=';
    }
  }
  return text;
}

void Fill(std::string& text, std::string_view place, std::string_view with) {
  text.replace(text.find(place), place.size(), with);
}

// Tells one page's kept judgements from another's (FNV-1a, 64 bit; Fowler, Noll & Vo 1991).
std::string PageId(const nlohmann::json& page) {
  std::uint64_t hash = 14695981039346656037ULL;
  for (const char c : page.dump()) {
    hash = (hash ^ static_cast<unsigned char>(c)) * 1099511628211ULL;
  }
  return fmt::format("{:016x}", hash);
}

}  // namespace

void GradingPageOptions::Check() const {
  if (repeats < 0) throw BadOption(fmt::format("repeats is {}, but must be 0 or more", repeats));
  if (pairs < 1) throw BadOption(fmt::format("pairs is {}, but must be 1 or more", pairs));
  if (!(css_px_per_mm > 0)) {
    throw BadOption(fmt::format("css_px_per_mm is {}, but must be positive", css_px_per_mm));
  }
}

std::vector<std::vector<int>> GradingOrder(int coupons, const GradingPageOptions& options) {
  options.Check();
  if (coupons < 2) throw std::invalid_argument("an order needs at least two coupons");
  std::mt19937_64 random(options.seed);
  return options.mode == GradingMode::kPairs ? PairOrder(coupons, options.pairs, random)
                                             : GradeOrder(coupons, options.repeats, random);
}

std::string FormatGradingPage(const std::vector<GradingCoupon>& coupons,
                              const GradingPageOptions& options) {
  nlohmann::json page;
  page["mode"] = options.mode == GradingMode::kPairs ? "pairs" : "grades";
  page["seed"] = options.seed;
  page["css_px_per_mm"] = options.css_px_per_mm;
  page["items"] = GradingOrder(static_cast<int>(coupons.size()), options);
  page["coupons"] = nlohmann::json::array();
  for (const GradingCoupon& coupon : coupons) {
    page["coupons"].push_back({{"batch", coupon.batch},
                               {"well", coupon.well},
                               {"width_mm", coupon.width_mm},
                               {"png", Base64(coupon.png)}});
  }
  page["id"] = PageId(page);
  std::string json = page.dump();
  // "</script>" inside a text would end the script.
  for (size_t at = json.find("</"); at != std::string::npos; at = json.find("</", at + 3)) {
    json.replace(at, 2, "<\\/");
  }
  std::string html(EmbeddedPages()[0].text);
  Fill(html, "/*SCRIPT*/", EmbeddedPages()[1].text);
  Fill(html, "/*PAGE*/null", json);
  return html;
}

}  // namespace laygauge
