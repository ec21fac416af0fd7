#include <algorithm>

#include "base/memory.h"
#include "cli/program.h"

int main(int argc, char** argv) {
  laygauge::KeepFreedMemory();
  return laygauge::RunProgram({argv + std::min(argc, 1), argv + argc},
                              laygauge::StandardTerminal());
}
