#include "base/memory.h"

#include <gtest/gtest.h>
#include <sys/resource.h>

#include <cstdlib>
#include <memory>

namespace laygauge {
namespace {

constexpr size_t kBytes = 24 << 20;  // a photo of 24 megapixels
constexpr size_t kPage = 4096;

// How often the system had to hand out a page while a photo's memory was taken, written and freed.
long PagesHandedOut() {
  rusage before{};
  rusage after{};
  getrusage(RUSAGE_SELF, &before);
  {
    const std::unique_ptr<unsigned char, decltype(&std::free)> bytes(
        static_cast<unsigned char*>(std::malloc(kBytes)), &std::free);
    for (size_t i = 0; i < kBytes; i += kPage)
      static_cast<volatile unsigned char*>(bytes.get())[i] = 1;
  }
  getrusage(RUSAGE_SELF, &after);
  return after.ru_minflt - before.ru_minflt;
}

TEST(KeepFreedMemory, WhatWasFreedComesBackWithoutTheSystem) {
#if defined(__SANITIZE_ADDRESS__) || !defined(__GLIBC__)
  GTEST_SKIP() << "another allocator is at work";
#endif
  KeepFreedMemory();
  PagesHandedOut();
  // Without it all 6144 pages come anew. A few may be others' (counters, the test's own).
  EXPECT_LE(PagesHandedOut(), 60);
}

}  // namespace
}  // namespace laygauge
