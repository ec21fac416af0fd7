#include "texture/reference.h"

#include <gtest/gtest.h>
#include <sys/wait.h>

#include <array>
#include <cstdio>
#include <stdexcept>

namespace laygauge {

std::string RunReference(const std::string& script, const std::vector<std::string>& arguments) {
  std::string command =
      std::string(LAYGAUGE_PYTHON) + " '" LAYGAUGE_SOURCE_DIR "/tests/texture/" + script + "'";
  for (const std::string& argument : arguments) {
    command += " '" + argument + "'";
  }
  std::FILE* pipe = popen(command.c_str(), "r");
  if (pipe == nullptr) {
    throw std::runtime_error("cannot run " + command);
  }
  std::string output;
  std::array<char, 4096> buffer{};
  while (const std::size_t count = std::fread(buffer.data(), 1, buffer.size(), pipe)) {
    output.append(buffer.data(), count);
  }
  const int status = pclose(pipe);
  constexpr int kMissing = 77;
  constexpr int kNoProgram = 127;
  const int code = WIFEXITED(status) ? WEXITSTATUS(status) : -1;
  if (code == kMissing || code == kNoProgram) {
    return "";
  }
  if (code != 0) {
    throw std::runtime_error(command + " failed");
  }
  return output;
}

std::filesystem::path TestDirectory() {
  const auto* info = testing::UnitTest::GetInstance()->current_test_info();
  const std::filesystem::path directory =
      std::filesystem::path(testing::TempDir()) /
      (std::string("laygauge-") + info->test_suite_name() + "-" + info->name());
  std::filesystem::remove_all(directory);
  std::filesystem::create_directories(directory);
  return directory;
}

}  // namespace laygauge
