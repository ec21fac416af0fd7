#pragma once

// Before a function: it is compiled twice, for any x86-64 processor and for those with AVX2, and
// the processor at hand chooses when the program starts. For the few loops that most time goes
// into. Both give the same results to the last bit: multiplication and addition are not fused.
// (Sanitizers cannot watch the choosing.)
#if defined(__x86_64__) && defined(__GNUC__) && !defined(__clang__) && \
    !defined(__SANITIZE_ADDRESS__) && !defined(__SANITIZE_THREAD__)
#define LAYGAUGE_WIDE_VECTORS __attribute__((target_clones("avx2", "default")))
#else
#define LAYGAUGE_WIDE_VECTORS
#endif

namespace laygauge {

// Eight floats that are added and multiplied at once; at any address of floats. For loops whose
// sums a compiler may not rearrange by itself.
using EightFloats = float __attribute__((vector_size(32), aligned(4), may_alias));

using EightInts = int __attribute__((vector_size(32)));

// Eight bytes as whole numbers.
inline void ReadEight(const unsigned char* first, EightInts& out) {
  for (int i = 0; i < 8; ++i) out[i] = first[i];
}

inline const EightFloats* EightAt(const float* first) {
  return reinterpret_cast<const EightFloats*>(first);
}

inline EightFloats* EightAt(float* first) { return reinterpret_cast<EightFloats*>(first); }

}  // namespace laygauge
