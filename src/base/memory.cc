#include "base/memory.h"

#include <cstddef>
#include <cstdlib>
#include <memory>

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
  constexpr std::size_t kPage = 2 << 20;
  void* from = first;
  std::size_t bytes = kRoom;
  std::align(kPage, kPage, from, bytes);
  const auto* end = static_cast<char*>(sbrk(0));
  // The memory may have come from elsewhere than the heap.
  if (from < end)
    madvise(from, static_cast<std::size_t>(end - static_cast<char*>(from)), MADV_HUGEPAGE);
  std::free(first);
#endif
}

}  // namespace laygauge
