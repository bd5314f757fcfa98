// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>  // brings __GLIBC__ where there is one

/// HALFTURN_CLONES before a function compiles it for AVX2 and for the base instruction set, the loader choosing; elsewhere
/// than x86 with glibc, and under sanitizers (whose start-up runs after the loader's choice), it is compiled once.
/// HALFTURN_INLINE marks what must become part of such a function to profit, HALFTURN_INLINE_LAMBDA the same for a lambda.
#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
#define HALFTURN_SANITIZED 1
#elif defined(__has_feature)
#if __has_feature(address_sanitizer) || __has_feature(thread_sanitizer) || __has_feature(undefined_behavior_sanitizer) || \
    __has_feature(memory_sanitizer)
#define HALFTURN_SANITIZED 1
#endif
#endif

#if defined(__x86_64__) && defined(__GLIBC__) && defined(__has_attribute) && !defined(HALFTURN_SANITIZED)
#if __has_attribute(target_clones)
#define HALFTURN_CLONES __attribute__((target_clones("avx2", "default")))
#endif
#endif
#ifndef HALFTURN_CLONES
#define HALFTURN_CLONES
#endif
#define HALFTURN_INLINE [[gnu::always_inline]] inline
#define HALFTURN_INLINE_LAMBDA __attribute__((always_inline))
