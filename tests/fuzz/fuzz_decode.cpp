// SPDX-License-Identifier: Apache-2.0
// The entry of libFuzzer: fuzz_decode tests/fuzz/corpus -max_total_time=60
#include <cstddef>
#include <cstdint>

#include "tests/fuzz/decode_target.hpp"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size);

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  halfturn::fuzz::decode_target({reinterpret_cast<const char*>(data), size});
  return 0;
}
