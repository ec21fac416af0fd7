#pragma once

#include <filesystem>
#include <map>
#include <span>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "base/error.h"

namespace laygauge {

// What was printed where: docs/formats.md, "Run sheet". Settings are texts that pass through.
struct RunSheet {
  std::string file;
  std::vector<std::string> setting_columns;
  std::map<std::pair<std::string, std::string>, std::vector<std::string>> runs;  // (batch, well)
  std::map<std::pair<std::string, std::string>, size_t> lines;  // where each run stands

  // The settings of the coupon; blank fields if the sheet does not list it.
  [[nodiscard]] std::vector<std::string> SettingsOf(const std::string& batch,
                                                    const std::string& well) const;
};

// Problem: unreadable, no batch or well column, a well listed twice for a batch, a column named
// like one of `reserved` (the result's own).
[[nodiscard]] Expected<RunSheet> ReadRunSheet(const std::filesystem::path& path,
                                              std::span<const std::string_view> reserved);

// Which photo shows which batch: docs/formats.md, "Photo list".
struct PhotoListEntry {
  std::string batch;
  std::string take;
  std::string operator_name;
  std::string filament;
};
struct PhotoList {
  std::string file;
  std::map<std::string, PhotoListEntry> photos;  // by the photo's file name without its folder

  // The photo's entry; a photo that is not listed is a batch of its own, named by its stem.
  [[nodiscard]] PhotoListEntry EntryOf(const std::filesystem::path& photo) const;
};

// Problem: unreadable, no photo or batch column, a photo listed twice, an empty batch.
[[nodiscard]] Expected<PhotoList> ReadPhotoList(const std::filesystem::path& path);

}  // namespace laygauge
