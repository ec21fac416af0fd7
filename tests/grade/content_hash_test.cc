#include "grade/content_hash.h"

#include <gtest/gtest.h>

namespace laygauge {
namespace {

// XXH3_128bits of no bytes, seed 0: the self-test value of the reference (xxHash 0.8; from memory).
TEST(ContentHash, OfNothing) { EXPECT_EQ(ContentHash(""), "99aa06d3014798d86001c324468d497f"); }

TEST(ContentHash, ChangesWithTheContent) { EXPECT_NE(ContentHash("a"), ContentHash("b")); }

}  // namespace
}  // namespace laygauge
