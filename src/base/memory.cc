#include "base/memory.h"

#include <cstdint>
#include <cstdlib>

#ifdef __GLIBC__
#include <malloc.h>
#include <sys/mman.h>
#include <unistd.h>
#endif

namespace laygauge {

void KeepFreedMemory() {
#ifdef __GLIBC__
  constexpr int kLargest = 32 << 20;
  mallopt(M_MMAP_THRESHOLD, kLargest);
  mallopt(M_TRIM_THRESHOLD, 4 * kLargest);
  // Room for a photo and its coupons at once, in large pages: thousands of small ones take longer
  // to come than some stages do.
  constexpr int kRoom = 2 * kLargest;
  mallopt(M_TOP_PAD, kRoom);
  // The heap grows by the room when it first must. Volatile, or the compiler leaves both calls out.
  void* volatile first = std::malloc(kRoom / 8);
  const auto begin = reinterpret_cast<std::uintptr_t>(first);
  std::free(first);
  constexpr std::uintptr_t kPage = 2 << 20;
  const std::uintptr_t from = (begin + kPage - 1) / kPage * kPage;
  madvise(reinterpret_cast<void*>(from), reinterpret_cast<std::uintptr_t>(sbrk(0)) - from,
          MADV_HUGEPAGE);
#endif
}

}  // namespace laygauge
