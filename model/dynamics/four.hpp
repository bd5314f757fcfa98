// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>

namespace halfturn::dynamics::detail {

/// Four numbers that one instruction handles where there is AVX2, two where not; a vector type of GCC and Clang. Sums over
/// arrays are written with it, as compilers make no vector code of them without leave to change the order of additions.
typedef double Four __attribute__((vector_size(32), aligned(8), may_alias));

// Four numbers of an array in place; vectors are never passed by value, as how depends on the instruction set.
[[gnu::always_inline]] inline const Four& four(const double* at) { return *reinterpret_cast<const Four*>(at); }
[[gnu::always_inline]] inline Four& four(double* at) { return *reinterpret_cast<Four*>(at); }
[[gnu::always_inline]] inline double total(const Four& of) { return (of[0] + of[1]) + (of[2] + of[3]); }

}  // namespace halfturn::dynamics::detail
