#pragma once

#include <cstddef>
#include <filesystem>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace laygauge {

// A table read from a CSV file (RFC 4180, UTF-8; a byte order mark and blank lines are skipped).
struct CsvTable {
  std::string file;                            // as named by the caller, for messages
  std::vector<std::string> columns;            // header, in order, no two alike
  std::vector<std::vector<std::string>> rows;  // each as long as `columns`
  std::vector<size_t> lines;                   // the file's line on which each row begins, from 1

  [[nodiscard]] std::optional<size_t> FindColumn(std::string_view name) const;
  // The column's index, or a Problem that names the file and the columns it has.
  [[nodiscard]] Expected<size_t> NeedColumn(std::string_view name) const;
  // "FILE, line 7": the start of a message about a row.
  [[nodiscard]] std::string Where(size_t row) const;
};

// Problem: unreadable, no header, a repeated or nameless column, a row of another length, not CSV.
[[nodiscard]] Expected<CsvTable> ReadCsv(const std::filesystem::path& path);
[[nodiscard]] Expected<CsvTable> ParseCsv(std::string_view text, std::string file_name);

// The field as RFC 4180 writes it: quoted where it holds a comma, a quote or a line break.
[[nodiscard]] std::string CsvField(std::string_view value);

// Header and rows, lines ended by "\n"; every row as long as the header.
[[nodiscard]] std::string FormatCsv(const std::vector<std::string>& columns,
                                    const std::vector<std::vector<std::string>>& rows);

// The whole text as a finite number with a decimal point, independent of the locale.
[[nodiscard]] std::optional<double> ParseNumber(std::string_view text);

}  // namespace laygauge
