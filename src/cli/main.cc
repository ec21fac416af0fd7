#include <algorithm>

#include "cli/program.h"

int main(int argc, char** argv) {
  return laygauge::RunProgram({argv + std::min(argc, 1), argv + argc},
                              laygauge::StandardTerminal());
}
