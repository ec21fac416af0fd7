#include <algorithm>

#include "cli/program.h"

#ifdef __GLIBC__
#include <malloc.h>
#endif

namespace {

// Pictures of a few megabytes are made and dropped all the time: memory that is given back to the
// system in between has to be cleared and mapped anew each time, a tenth of the program's time.
void KeepFreedMemory() {
#ifdef __GLIBC__
  constexpr int kLargest = 32 << 20;
  mallopt(M_MMAP_THRESHOLD, kLargest);
  mallopt(M_TRIM_THRESHOLD, 4 * kLargest);
#endif
}

}  // namespace

int main(int argc, char** argv) {
  KeepFreedMemory();
  return laygauge::RunProgram({argv + std::min(argc, 1), argv + argc},
                              laygauge::StandardTerminal());
}
