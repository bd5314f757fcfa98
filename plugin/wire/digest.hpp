// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <string>
#include <string_view>

#include "plugin/wire/request.hpp"

/// Fingerprints of content.
namespace halfturn::wire {

/// SipHash-2-4 with 128 bits of output and the key 00 01 ... 0f (Aumasson and Bernstein, INDOCRYPT 2012; the longer output
/// is that of their reference code). Among n different contents two agree by chance with odds of n^2/2^129: 1e-27 for a
/// million. The key is public, so it protects from accidents and not from somebody who looks for two contents that agree.
class SipHash {
 public:
  SipHash();
  void add(std::string_view bytes);
  void add(std::uint64_t word);  // as 8 bytes, least significant first
  std::string hex() const;       // 32 lower-case hexadecimal digits

 private:
  void absorb(std::uint64_t word);

  std::array<std::uint64_t, 4> v_;
  std::uint64_t pending_ = 0;  // bytes that do not fill a word yet
  std::uint64_t length_ = 0;
};

/// The fingerprint of bytes, 32 hexadecimal digits.
std::string fingerprint(std::string_view bytes);

/// The fingerprint of a request's content apart from `id`, `digest` and `encoding`: the same for JSON and MessagePack, for
/// any order of fields, and for numbers written as integer or float. A field that is given and one left to its default
/// differ only where the decoded request does.
std::string digest_of(const Request& request);

}  // namespace halfturn::wire
