// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstring>

#include "model/quantity/clones.hpp"

namespace halfturn::dynamics::detail {

/// Four numbers that one instruction handles where there is AVX2, two where not; a vector type of GCC and Clang. Sums over
/// arrays are written with it, as compilers make no vector code of them without leave to change the order of additions.
/// It is never passed by value, as how depends on the instruction set.
typedef double Four __attribute__((vector_size(32)));

/// From and to an array, which may stand anywhere: the copies become moves that need no alignment.
HALFTURN_INLINE void load(const double* from, Four& to) { std::memcpy(&to, from, sizeof(Four)); }
HALFTURN_INLINE void store(const Four& from, double* to) { std::memcpy(to, &from, sizeof(Four)); }
HALFTURN_INLINE double total(const Four& of) { return (of[0] + of[1]) + (of[2] + of[3]); }

}  // namespace halfturn::dynamics::detail
