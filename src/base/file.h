#pragma once

#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace laygauge {

// The whole file as bytes. Problem when it is missing, a folder, or unreadable.
[[nodiscard]] Expected<std::string> ReadFile(const std::filesystem::path& path);

// Writes the file whole or not at all: into a neighbour, then renamed over `path`.
[[nodiscard]] Done WriteFileWhole(const std::filesystem::path& path, std::string_view bytes);

struct FileToWrite {
  std::filesystem::path path;
  std::string bytes;
};
// All of the files or none: nothing is put in place before every file is written.
[[nodiscard]] Done WriteFilesWhole(const std::vector<FileToWrite>& files);

// Makes the folder, with its parents, if it is not there; a Problem if it cannot be written into.
[[nodiscard]] Done MakeFolder(const std::filesystem::path& path);

}  // namespace laygauge
