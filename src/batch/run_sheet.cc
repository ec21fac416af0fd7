#include "batch/run_sheet.h"

#include <fmt/format.h>

#include <algorithm>

#include "base/csv.h"

namespace laygauge {

std::vector<std::string> RunSheet::SettingsOf(const std::string& batch,
                                              const std::string& well) const {
  const auto found = runs.find({batch, well});
  if (found != runs.end()) return found->second;
  return std::vector<std::string>(setting_columns.size());
}

Expected<RunSheet> ReadRunSheet(const std::filesystem::path& path,
                                std::span<const std::string_view> reserved) {
  const auto table = ReadCsv(path);
  if (!table) return tl::unexpected(table.error());
  const auto batch_column = table->NeedColumn("batch");
  if (!batch_column) return tl::unexpected(batch_column.error());
  const auto well_column = table->NeedColumn("well");
  if (!well_column) return tl::unexpected(well_column.error());

  RunSheet sheet;
  sheet.file = table->file;
  std::vector<size_t> setting_indices;
  for (size_t i = 0; i < table->columns.size(); ++i) {
    if (i == *batch_column || i == *well_column) continue;
    if (std::find(reserved.begin(), reserved.end(), table->columns[i]) != reserved.end()) {
      return BadInput(
          fmt::format("{}: the column \"{}\" has the name of a column of the result; rename it",
                      table->file, table->columns[i]));
    }
    setting_indices.push_back(i);
    sheet.setting_columns.push_back(table->columns[i]);
  }
  for (size_t row = 0; row < table->rows.size(); ++row) {
    const auto& fields = table->rows[row];
    const auto key = std::make_pair(fields[*batch_column], fields[*well_column]);
    if (key.first.empty() || key.second.empty()) {
      return BadInput(fmt::format("{}: batch and well may not be empty", table->Where(row)));
    }
    std::vector<std::string> settings;
    settings.reserve(setting_indices.size());
    for (const size_t i : setting_indices) settings.push_back(fields[i]);
    if (!sheet.runs.emplace(key, std::move(settings)).second) {
      return BadInput(fmt::format("{}: well {} of batch {} is listed twice", table->Where(row),
                                  key.second, key.first));
    }
    sheet.lines[key] = table->lines[row];
  }
  return sheet;
}

PhotoListEntry PhotoList::EntryOf(const std::filesystem::path& photo) const {
  const auto found = photos.find(photo.filename().string());
  if (found != photos.end()) return found->second;
  PhotoListEntry entry;
  entry.batch = photo.stem().string();
  return entry;
}

Expected<PhotoList> ReadPhotoList(const std::filesystem::path& path) {
  const auto table = ReadCsv(path);
  if (!table) return tl::unexpected(table.error());
  const auto photo_column = table->NeedColumn("photo");
  if (!photo_column) return tl::unexpected(photo_column.error());
  const auto batch_column = table->NeedColumn("batch");
  if (!batch_column) return tl::unexpected(batch_column.error());

  PhotoList list;
  list.file = table->file;
  for (size_t row = 0; row < table->rows.size(); ++row) {
    const auto& fields = table->rows[row];
    const auto field = [&](std::string_view column) {
      const auto index = table->FindColumn(column);
      return index ? fields[*index] : std::string();
    };
    const std::string photo = std::filesystem::path(fields[*photo_column]).filename().string();
    PhotoListEntry entry{fields[*batch_column], field("take"), field("operator"),
                         field("filament")};
    if (photo.empty() || entry.batch.empty()) {
      return BadInput(fmt::format("{}: photo and batch may not be empty", table->Where(row)));
    }
    if (!list.photos.emplace(photo, std::move(entry)).second) {
      return BadInput(fmt::format("{}: the photo {} is listed twice", table->Where(row), photo));
    }
  }
  return list;
}

}  // namespace laygauge
