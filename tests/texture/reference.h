#pragma once

#include <filesystem>
#include <string>
#include <vector>

namespace laygauge {

// Runs tests/texture/<script> with Debian's Python and `arguments`; its standard output. Empty if
// Python or one of the script's libraries is missing (exit code 77): the caller skips its test.
// Throws std::runtime_error when the script fails in any other way.
std::string RunReference(const std::string& script, const std::vector<std::string>& arguments);

// An empty directory of the running test's own.
std::filesystem::path TestDirectory();

}  // namespace laygauge
