#pragma once

#include <filesystem>
#include <memory>
#include <nlohmann/json.hpp>
#include <optional>
#include <set>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "base/error.h"

namespace laygauge {

// A JSON object being read strictly. Every getter names file and key when it fails, and remembers
// which keys were asked for, so that the others can be reported. Getters throw JsonFault, which
// only ReadJson and ParseJson catch: outside they show as an Expected.
class JsonView {
 public:
  struct JsonFault {
    std::string message;
  };

  JsonView(const nlohmann::json& value, std::string file, std::string key);

  [[nodiscard]] double Number(std::string_view key) const;
  [[nodiscard]] std::optional<double> MaybeNumber(std::string_view key) const;
  [[nodiscard]] int Integer(std::string_view key) const;
  [[nodiscard]] std::optional<int> MaybeInteger(std::string_view key) const;
  [[nodiscard]] std::string Text(std::string_view key) const;
  [[nodiscard]] std::optional<std::string> MaybeText(std::string_view key) const;
  [[nodiscard]] bool Has(std::string_view key) const;
  // An object, and a list of objects.
  [[nodiscard]] JsonView Object(std::string_view key) const;
  [[nodiscard]] std::vector<JsonView> Objects(std::string_view key) const;
  [[nodiscard]] std::vector<JsonView> MaybeObjects(std::string_view key) const;
  [[nodiscard]] std::vector<double> Numbers(std::string_view key) const;
  [[nodiscard]] std::vector<std::string> Texts(std::string_view key) const;
  // A list of [x, y] pairs.
  [[nodiscard]] std::vector<std::pair<double, double>> Pairs(std::string_view key) const;
  // Names of all keys of this object, in file order.
  [[nodiscard]] std::vector<std::string> Keys() const;

  // Keys of this object that no getter asked for, as "file: wells[2].colour".
  [[nodiscard]] std::vector<std::string> UnknownKeys() const;
  // Throws for the first unknown key.
  void NoOtherKeys() const;

  // Throws a message "FILE: KEY: expectation" (key may be empty: the object itself).
  [[noreturn]] void Fail(std::string_view key, std::string_view expectation) const;

 private:
  const nlohmann::json& Need(std::string_view key) const;
  const nlohmann::json* Find(std::string_view key) const;
  std::string Path(std::string_view key) const;

  const nlohmann::json* value_;
  std::string file_;
  std::string key_;
  std::shared_ptr<std::set<std::string, std::less<>>> asked_;
};

// The parsed document; a Problem names file, line and column of a syntax error or a repeated key.
[[nodiscard]] Expected<nlohmann::json> ParseJsonText(std::string_view text,
                                                     const std::string& file_name);

// Parses `text` and hands its top object to `read`, a function of const JsonView&.
template <class Read>
[[nodiscard]] auto ParseJson(std::string_view text, const std::string& file_name, Read&& read)
    -> Expected<decltype(read(std::declval<const JsonView&>()))> {
  auto document = ParseJsonText(text, file_name);
  if (!document) return tl::unexpected(document.error());
  try {
    return read(JsonView(*document, file_name, ""));
  } catch (const JsonView::JsonFault& fault) {
    return BadInput(fault.message);
  }
}

}  // namespace laygauge
