#include "base/memory.h"

#include <cstdlib>

#ifdef __GLIBC__
#include <malloc.h>
#endif

namespace laygauge {

void KeepFreedMemory() {
#ifdef __GLIBC__
  constexpr int kLargest = 32 << 20;
  mallopt(M_MMAP_THRESHOLD, kLargest);
  mallopt(M_TRIM_THRESHOLD, 4 * kLargest);
#endif
}

}  // namespace laygauge
