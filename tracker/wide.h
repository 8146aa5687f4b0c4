/* RF_WIDE before a function compiles it twice, once for processors with AVX2, and the loader picks: twice the lanes in its
 * loops, and integers that widen in one instruction. Without fused products (-ffp-contract=off) and with sums in a fixed
 * order both give the same bytes. What such a function calls in a loop is RF_WITHIN it, or it would stay narrow. One
 * version only where the loader can't pick, with clang (whose older versions name the two such that other files don't find
 * them), and under sanitizers, whose run-time isn't ready yet when the loader does. */
#pragma once

#define RF_WITHIN inline __attribute__((always_inline))

#if defined(__x86_64__) && defined(__gnu_linux__) && !defined(__clang__) &&                                  \
    !defined(__SANITIZE_ADDRESS__) && !defined(__SANITIZE_THREAD__)
#define RF_WIDE __attribute__((target_clones("avx2", "default")))
#else
#define RF_WIDE
#endif
