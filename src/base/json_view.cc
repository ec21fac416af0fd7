#include "base/json_view.h"

#include <fmt/format.h>

#include <cmath>
#include <limits>

namespace laygauge {
namespace {

using nlohmann::json;

// nlohmann/json keeps the last of two equal keys; a description with two is a mistake to report.
class RepeatedKeyFinder {
 public:
  bool operator()(int, json::parse_event_t event, const json& parsed) {
    switch (event) {
      case json::parse_event_t::object_start:
        open_.emplace_back();
        break;
      case json::parse_event_t::key:
        if (!open_.back().insert(parsed.get<std::string>()).second && repeated_.empty()) {
          repeated_ = parsed.get<std::string>();
        }
        break;
      case json::parse_event_t::object_end:
        open_.pop_back();
        break;
      default:
        break;
    }
    return true;
  }
  const std::string& repeated() const { return repeated_; }

 private:
  std::vector<std::set<std::string>> open_;
  std::string repeated_;
};

std::string KindOf(const json& value) {
  if (value.is_number_integer()) return fmt::format("the whole number {}", value.dump());
  if (value.is_number()) return fmt::format("the number {}", value.dump());
  if (value.is_string()) return fmt::format("the text {}", value.dump());
  if (value.is_array()) return "a list";
  if (value.is_object()) return "an object";
  if (value.is_boolean()) return value.dump();
  return "null";
}

std::string SyntaxProblem(std::string_view text, const std::string& file, size_t byte) {
  byte = std::min(byte, text.size());
  size_t line = 1;
  size_t column = 1;
  for (size_t i = 0; i + 1 < byte; ++i) {
    if (text[i] == '\n') {
      ++line;
      column = 1;
    } else {
      ++column;
    }
  }
  return fmt::format(
      "{}, line {}, column {}: not JSON; check for a missing comma, quote or bracket", file, line,
      column);
}

}  // namespace

JsonView::JsonView(const json& value, std::string file, std::string key)
    : value_(&value),
      file_(std::move(file)),
      key_(std::move(key)),
      asked_(std::make_shared<std::set<std::string, std::less<>>>()) {
  if (!value.is_object()) {
    throw JsonFault{fmt::format("{}: {}{}an object {{…}} was expected, not {}", file_, key_,
                                key_.empty() ? "" : ": ", KindOf(value))};
  }
}

std::string JsonView::Path(std::string_view key) const {
  if (key_.empty()) return std::string(key);
  if (key.empty()) return key_;
  return fmt::format("{}.{}", key_, key);
}

void JsonView::Fail(std::string_view key, std::string_view expectation) const {
  const std::string path = Path(key);
  throw JsonFault{fmt::format("{}: {}{}{}", file_, path, path.empty() ? "" : ": ", expectation)};
}

const json* JsonView::Find(std::string_view key) const {
  asked_->emplace(key);
  const auto found = value_->find(key);
  return found == value_->end() ? nullptr : &*found;
}

const json& JsonView::Need(std::string_view key) const {
  const json* found = Find(key);
  if (found == nullptr) Fail(key, "is missing");
  return *found;
}

bool JsonView::Has(std::string_view key) const { return value_->contains(key); }

double JsonView::Number(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_number()) Fail(key, fmt::format("a number was expected, not {}", KindOf(value)));
  const double number = value.get<double>();
  if (!std::isfinite(number)) Fail(key, "a finite number was expected");
  return number;
}

std::optional<double> JsonView::MaybeNumber(std::string_view key) const {
  if (Find(key) == nullptr) return std::nullopt;
  return Number(key);
}

int JsonView::Integer(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_number_integer()) {
    Fail(key, fmt::format("a whole number was expected, not {}", KindOf(value)));
  }
  const double number = value.get<double>();
  if (std::abs(number) > std::numeric_limits<int>::max()) {
    Fail(key, fmt::format("a smaller whole number was expected, not {}", value.dump()));
  }
  return value.get<int>();
}

std::optional<int> JsonView::MaybeInteger(std::string_view key) const {
  if (Find(key) == nullptr) return std::nullopt;
  return Integer(key);
}

std::string JsonView::Text(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_string()) Fail(key, fmt::format("a text was expected, not {}", KindOf(value)));
  return value.get<std::string>();
}

std::optional<std::string> JsonView::MaybeText(std::string_view key) const {
  if (Find(key) == nullptr) return std::nullopt;
  return Text(key);
}

JsonView JsonView::Object(std::string_view key) const {
  return JsonView(Need(key), file_, Path(key));
}

std::vector<JsonView> JsonView::Objects(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_array()) Fail(key, fmt::format("a list was expected, not {}", KindOf(value)));
  std::vector<JsonView> objects;
  for (size_t i = 0; i < value.size(); ++i) {
    objects.emplace_back(value[i], file_, fmt::format("{}[{}]", Path(key), i));
  }
  return objects;
}

std::vector<JsonView> JsonView::MaybeObjects(std::string_view key) const {
  if (Find(key) == nullptr) return {};
  return Objects(key);
}

std::vector<double> JsonView::Numbers(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_array()) Fail(key, fmt::format("a list was expected, not {}", KindOf(value)));
  std::vector<double> numbers;
  for (size_t i = 0; i < value.size(); ++i) {
    if (!value[i].is_number()) {
      Fail(fmt::format("{}[{}]", key, i),
           fmt::format("a number was expected, not {}", KindOf(value[i])));
    }
    numbers.push_back(value[i].get<double>());
  }
  return numbers;
}

std::vector<std::string> JsonView::Texts(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_array()) Fail(key, fmt::format("a list was expected, not {}", KindOf(value)));
  std::vector<std::string> texts;
  for (size_t i = 0; i < value.size(); ++i) {
    if (!value[i].is_string()) {
      Fail(fmt::format("{}[{}]", key, i),
           fmt::format("a text was expected, not {}", KindOf(value[i])));
    }
    texts.push_back(value[i].get<std::string>());
  }
  return texts;
}

std::vector<std::pair<double, double>> JsonView::Pairs(std::string_view key) const {
  const json& value = Need(key);
  if (!value.is_array()) Fail(key, fmt::format("a list was expected, not {}", KindOf(value)));
  std::vector<std::pair<double, double>> pairs;
  for (size_t i = 0; i < value.size(); ++i) {
    const json& pair = value[i];
    if (!pair.is_array() || pair.size() != 2 || !pair[0].is_number() || !pair[1].is_number()) {
      Fail(fmt::format("{}[{}]", key, i),
           fmt::format("two numbers [x, y] were expected, not {}", KindOf(pair)));
    }
    pairs.emplace_back(pair[0].get<double>(), pair[1].get<double>());
  }
  return pairs;
}

std::vector<std::string> JsonView::Keys() const {
  std::vector<std::string> keys;
  for (const auto& item : value_->items()) keys.push_back(item.key());
  return keys;
}

std::vector<std::string> JsonView::UnknownKeys() const {
  std::vector<std::string> unknown;
  for (const auto& item : value_->items()) {
    if (!asked_->contains(item.key())) {
      unknown.push_back(fmt::format("{}: {}", file_, Path(item.key())));
    }
  }
  return unknown;
}

void JsonView::NoOtherKeys() const {
  for (const auto& item : value_->items()) {
    if (!asked_->contains(item.key())) Fail(item.key(), "this key is not known here");
  }
}

Expected<json> ParseJsonText(std::string_view text, const std::string& file_name) {
  RepeatedKeyFinder finder;
  try {
    json document = json::parse(text.begin(), text.end(), std::ref(finder));
    if (!finder.repeated().empty()) {
      return BadInput(fmt::format("{}: the key \"{}\" is there twice in one object", file_name,
                                  finder.repeated()));
    }
    return document;
  } catch (const json::parse_error& error) {
    return BadInput(SyntaxProblem(text, file_name, error.byte));
  } catch (const json::exception& error) {
    return BadInput(fmt::format("{}: not JSON that can be read", file_name));
  }
}

}  // namespace laygauge
