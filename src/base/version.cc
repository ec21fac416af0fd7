#include "base/version.h"

namespace laygauge {

std::string_view ProgramVersion() { return LAYGAUGE_VERSION; }

}  // namespace laygauge
