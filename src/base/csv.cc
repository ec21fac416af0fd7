#include "base/csv.h"

#include <csv.h>
#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <charconv>
#include <cmath>
#include <memory>
#include <set>

#include "base/file.h"

namespace laygauge {
namespace {

struct CsvRecords {
  std::vector<std::vector<std::string>> records{{}};
  void AddField(const void* data, size_t size) {
    records.back().emplace_back(data ? static_cast<const char*>(data) : "", size);
  }
  void EndRecord() { records.emplace_back(); }
};

struct CsvParserHandle {
  csv_parser parser{};
  CsvParserHandle() {
    csv_init(&parser, CSV_STRICT | CSV_STRICT_FINI | CSV_APPEND_NULL);
    // RFC 4180, section 2, rule 4: spaces are part of a field.
    csv_set_space_func(&parser, [](unsigned char) { return 0; });
  }
  ~CsvParserHandle() { csv_free(&parser); }
  CsvParserHandle(const CsvParserHandle&) = delete;
  CsvParserHandle& operator=(const CsvParserHandle&) = delete;
};

// RFC 3629, section 4: without overlong forms, surrogates, or anything beyond U+10FFFF.
bool IsUtf8(std::string_view text) {
  for (size_t i = 0; i < text.size();) {
    const auto byte = [&](size_t at) {
      return at < text.size() ? static_cast<unsigned char>(text[at]) : 0U;
    };
    const unsigned lead = byte(i);
    const size_t length = lead < 0x80 ? 1 : lead < 0xE0 ? 2 : lead < 0xF0 ? 3 : 4;
    if ((lead >= 0x80 && lead < 0xC2) || lead > 0xF4) return false;
    for (size_t k = 1; k < length; ++k) {
      if (byte(i + k) >> 6 != 0b10) return false;
    }
    const unsigned second = byte(i + 1);
    if ((lead == 0xE0 && second < 0xA0) || (lead == 0xED && second > 0x9F) ||
        (lead == 0xF0 && second < 0x90) || (lead == 0xF4 && second > 0x8F)) {
      return false;
    }
    i += length;
  }
  return true;
}

// Feeds byte by byte up to each line break, so that a record's first line is known.
Expected<std::monostate> Parse(std::string_view text, const std::string& file, CsvRecords& out,
                               std::vector<size_t>& first_lines) {
  CsvParserHandle handle;
  const auto on_field = [](void* data, size_t size, void* self) {
    static_cast<CsvRecords*>(self)->AddField(data, size);
  };
  const auto on_record = [](int, void* self) { static_cast<CsvRecords*>(self)->EndRecord(); };
  size_t line = 1;
  size_t first_line = 1;
  size_t begin = 0;
  while (begin < text.size()) {
    const size_t newline = text.find('\n', begin);
    const size_t end = newline == std::string_view::npos ? text.size() : newline + 1;
    const size_t records_before = out.records.size();
    const size_t size = end - begin;
    if (!IsUtf8(text.substr(begin, size))) {
      return BadInput(
          fmt::format("{}, line {}: is not UTF-8; save the file as CSV in UTF-8", file, line));
    }
    if (csv_parse(&handle.parser, text.data() + begin, size, on_field, on_record, &out) != size) {
      return BadInput(fmt::format("{}, line {}: not CSV: a quote stands where none may (RFC 4180)",
                                  file, line));
    }
    ++line;
    begin = end;
    if (out.records.size() > records_before) {
      first_lines.push_back(first_line);
      first_line = line;
    } else if (out.records.back().empty()) {
      first_line = line;  // a blank line
    }
  }
  const size_t records_before = out.records.size();
  if (csv_fini(&handle.parser, on_field, on_record, &out) != 0) {
    return BadInput(fmt::format("{}, line {}: a quoted field is not closed", file, first_line));
  }
  if (out.records.size() > records_before) first_lines.push_back(first_line);
  out.records.pop_back();
  return {};
}

}  // namespace

std::optional<size_t> CsvTable::FindColumn(std::string_view name) const {
  const auto found = std::find(columns.begin(), columns.end(), name);
  if (found == columns.end()) return std::nullopt;
  return static_cast<size_t>(found - columns.begin());
}

Expected<size_t> CsvTable::NeedColumn(std::string_view name) const {
  if (const auto found = FindColumn(name)) return *found;
  return BadInput(fmt::format("{}: the column \"{}\" is missing; the file has: {}", file, name,
                              fmt::join(columns, ", ")));
}

std::string CsvTable::Where(size_t row) const {
  return fmt::format("{}, line {}", file, lines.at(row));
}

Expected<CsvTable> ReadCsv(const std::filesystem::path& path) {
  auto text = ReadFile(path);
  if (!text) return tl::unexpected(text.error());
  return ParseCsv(*text, path.string());
}

Expected<CsvTable> ParseCsv(std::string_view text, std::string file_name) {
  if (text.starts_with("\xEF\xBB\xBF")) text.remove_prefix(3);
  CsvTable table;
  table.file = std::move(file_name);
  CsvRecords parsed;
  if (auto done = Parse(text, table.file, parsed, table.lines); !done) {
    return tl::unexpected(done.error());
  }
  if (parsed.records.empty()) {
    return BadInput(
        fmt::format("{}: is empty; a header line with the column names was expected", table.file));
  }
  table.columns = std::move(parsed.records.front());
  std::set<std::string> seen;
  for (const std::string& column : table.columns) {
    if (column.empty()) {
      return BadInput(fmt::format("{}, line {}: a column has no name", table.file, table.lines[0]));
    }
    if (!seen.insert(column).second) {
      return BadInput(fmt::format("{}, line {}: the column \"{}\" is there twice", table.file,
                                  table.lines[0], column));
    }
  }
  table.rows.assign(std::make_move_iterator(parsed.records.begin() + 1),
                    std::make_move_iterator(parsed.records.end()));
  table.lines.erase(table.lines.begin());
  for (size_t row = 0; row < table.rows.size(); ++row) {
    if (table.rows[row].size() != table.columns.size()) {
      return BadInput(fmt::format("{}: {} fields, but the header names {}", table.Where(row),
                                  table.rows[row].size(), table.columns.size()));
    }
  }
  return table;
}

std::string CsvField(std::string_view value) {
  if (value.find_first_of(",\"\r\n") == std::string_view::npos) return std::string(value);
  std::string quoted = "\"";
  for (const char c : value) {
    if (c == '"') quoted += '"';
    quoted += c;
  }
  return quoted + '"';
}

std::string FormatCsv(const std::vector<std::string>& columns,
                      const std::vector<std::vector<std::string>>& rows) {
  std::string text;
  const auto add_row = [&text](const std::vector<std::string>& row) {
    for (size_t i = 0; i < row.size(); ++i) {
      if (i > 0) text += ',';
      text += CsvField(row[i]);
    }
    text += '\n';
  };
  add_row(columns);
  for (const auto& row : rows) add_row(row);
  return text;
}

std::optional<double> ParseNumber(std::string_view text) {
  while (!text.empty() && (text.front() == ' ' || text.front() == '\t')) text.remove_prefix(1);
  while (!text.empty() && (text.back() == ' ' || text.back() == '\t')) text.remove_suffix(1);
  if (text.starts_with('+')) text.remove_prefix(1);
  double value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc() || end != text.data() + text.size() || !std::isfinite(value)) {
    return std::nullopt;
  }
  return value;
}

}  // namespace laygauge
