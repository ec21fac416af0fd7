#include "support/doc_example.h"

#include <stdexcept>

#include "base/file.h"

namespace laygauge {

std::string DocExample(const std::string& file, const std::string& heading) {
  const auto text = ReadFile(std::string(LAYGAUGE_SOURCE_DIR) + "/docs/" + file);
  if (!text) throw std::runtime_error(text.error().message);
  const size_t section = text->find("\n## " + heading + "\n");
  const size_t fence = section == std::string::npos ? section : text->find("\n```", section);
  const size_t end_of_section =
      section == std::string::npos ? section : text->find("\n## ", section + 1);
  if (fence == std::string::npos || fence > end_of_section) {
    throw std::runtime_error("docs/" + file + ": no example under \"" + heading + "\"");
  }
  const size_t begin = text->find('\n', fence + 1) + 1;
  return text->substr(begin, text->find("\n```", begin) + 1 - begin);
}

}  // namespace laygauge
