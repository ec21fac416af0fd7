#include "base/file.h"

#include <fmt/format.h>
#include <unistd.h>

#include <cerrno>
#include <cstring>
#include <fstream>
#include <sstream>

namespace laygauge {
namespace fs = std::filesystem;

Expected<std::string> ReadFile(const fs::path& path) {
  std::error_code error;
  const fs::file_status status = fs::status(path, error);
  if (!fs::exists(status)) {
    return BadInput(fmt::format("{}: no such file; check the path", path.string()));
  }
  if (fs::is_directory(status)) {
    return BadInput(fmt::format("{}: is a folder, but a file was expected", path.string()));
  }
  std::ifstream in(path, std::ios::binary);
  std::ostringstream bytes;
  bytes << in.rdbuf();
  if (!in.is_open() || in.bad()) {
    return BadInput(fmt::format("{}: cannot be read ({})", path.string(), std::strerror(errno)));
  }
  return std::move(bytes).str();
}

Done WriteFileWhole(const fs::path& path, std::string_view bytes) {
  fs::path beside = path;
  beside += fmt::format(".{}.tmp", ::getpid());
  std::ofstream out(beside, std::ios::binary | std::ios::trunc);
  out.write(bytes.data(), static_cast<std::streamsize>(bytes.size()));
  out.close();
  std::error_code error;
  if (!out) {
    const std::string why = std::strerror(errno);
    fs::remove(beside, error);
    return CannotWrite(fmt::format("{}: cannot be written ({})", path.string(), why));
  }
  fs::rename(beside, path, error);
  if (error) {
    const std::string why = error.message();
    fs::remove(beside, error);
    return CannotWrite(fmt::format("{}: cannot be written ({})", path.string(), why));
  }
  return {};
}

Done MakeFolder(const fs::path& path) {
  std::error_code error;
  fs::create_directories(path, error);
  if (error || !fs::is_directory(path)) {
    return CannotWrite(fmt::format("{}: the folder cannot be made ({})", path.string(),
                                   error ? error.message() : "a file has this name"));
  }
  if (::access(path.c_str(), W_OK) != 0) {
    return CannotWrite(fmt::format("{}: the folder cannot be written into ({})", path.string(),
                                   std::strerror(errno)));
  }
  return {};
}

}  // namespace laygauge
