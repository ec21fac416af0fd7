#include "base/file.h"

#include <fmt/format.h>
#include <unistd.h>

#include <cerrno>
#include <cstring>
#include <fstream>
#include <sstream>

namespace laygauge {
namespace fs = std::filesystem;

namespace {

Problem UnreadableFile(const fs::path& path) {
  return {ProblemKind::kBadInput,
          fmt::format("{}: cannot be read ({})", path.string(), std::strerror(errno))};
}

// In one piece: a photograph's bytes are not held twice.
Expected<std::string> ReadRegularFile(std::ifstream& in, const fs::path& path) {
  std::error_code error;
  std::string bytes(in.is_open() ? fs::file_size(path, error) : 0, '\0');
  in.read(bytes.data(), static_cast<std::streamsize>(bytes.size()));
  if (!in.is_open() || error || in.bad()) return tl::unexpected(UnreadableFile(path));
  bytes.resize(static_cast<size_t>(in.gcount()));  // it may have shrunk meanwhile
  return bytes;
}

}  // namespace

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
  if (fs::is_regular_file(status)) return ReadRegularFile(in, path);
  std::ostringstream bytes;  // a pipe
  bytes << in.rdbuf();
  if (!in.is_open() || in.bad()) {
    return tl::unexpected(UnreadableFile(path));
  }
  return std::move(bytes).str();
}

namespace {

Problem UnwritableFile(const fs::path& path, std::string_view why) {
  return {ProblemKind::kCannotWrite, fmt::format("{}: cannot be written ({})", path.string(), why)};
}

fs::path Beside(const fs::path& path) {
  fs::path beside = path;
  beside += fmt::format(".{}.tmp", ::getpid());
  return beside;
}

Done WriteBeside(const fs::path& path, std::string_view bytes) {
  if (fs::is_directory(path)) return tl::unexpected(UnwritableFile(path, "a folder has this name"));
  std::ofstream out(Beside(path), std::ios::binary | std::ios::trunc);
  out.write(bytes.data(), static_cast<std::streamsize>(bytes.size()));
  out.close();
  if (!out) return tl::unexpected(UnwritableFile(path, std::strerror(errno)));
  return {};
}

}  // namespace

Done WriteFileWhole(const fs::path& path, std::string_view bytes) {
  return WriteFilesWhole({{path, std::string(bytes)}});
}

Done WriteFilesWhole(const std::vector<FileToWrite>& files) {
  Done done;
  for (const FileToWrite& file : files) {
    if (done) done = WriteBeside(file.path, file.bytes);
  }
  std::error_code error;
  for (const FileToWrite& file : files) {
    if (!done) break;
    fs::rename(Beside(file.path), file.path, error);
    if (error) done = tl::unexpected(UnwritableFile(file.path, error.message()));
  }
  if (!done) {
    for (const FileToWrite& file : files) fs::remove(Beside(file.path), error);
  }
  return done;
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
