// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/digest.hpp"

#include <bit>
#include <cstdio>

#include "plugin/wire/write_request.hpp"
#include "plugin/wire/writer.hpp"

namespace halfturn::wire {
namespace {

/// SipRound (the paper's figure 2.1).
void rounds(std::array<std::uint64_t, 4>& v, int count) {
  for (int i = 0; i < count; ++i) {
    v[0] += v[1];
    v[1] = std::rotl(v[1], 13) ^ v[0];
    v[0] = std::rotl(v[0], 32);
    v[2] += v[3];
    v[3] = std::rotl(v[3], 16) ^ v[2];
    v[0] += v[3];
    v[3] = std::rotl(v[3], 21) ^ v[0];
    v[2] += v[1];
    v[1] = std::rotl(v[1], 17) ^ v[2];
    v[2] = std::rotl(v[2], 32);
  }
}

/// Hashes what is written: a tag for each thing, then its bytes.
class HashWriter : public Writer {
 public:
  void open_map() override { hash.add(std::uint64_t{'{'}); }
  void close_map() override { hash.add(std::uint64_t{'}'}); }
  void open_list() override { hash.add(std::uint64_t{'['}); }
  void close_list() override { hash.add(std::uint64_t{']'}); }
  void key(std::string_view name) override { text(name); }
  void null() override { hash.add(std::uint64_t{'0'}); }
  void flag(bool value) override { hash.add(value ? std::uint64_t{'t'} : std::uint64_t{'f'}); }
  void integer(std::int64_t value) override { finite(static_cast<double>(value)); }
  void text(std::string_view value) override {
    hash.add(std::uint64_t{'s'});
    hash.add(std::uint64_t{value.size()});
    hash.add(value);
  }

  SipHash hash;

 protected:
  void finite(double value) override {
    hash.add(std::uint64_t{'n'});
    hash.add(std::bit_cast<std::uint64_t>(value == 0 ? 0.0 : value));
  }
};

}  // namespace

SipHash::SipHash() : v_{0x736f6d6570736575u, 0x646f72616e646f6du, 0x6c7967656e657261u, 0x7465646279746573u} {
  constexpr std::uint64_t k0 = 0x0706050403020100u, k1 = 0x0f0e0d0c0b0a0908u;
  v_[0] ^= k0;
  v_[1] ^= k1 ^ 0xee;
  v_[2] ^= k0;
  v_[3] ^= k1;
}

void SipHash::absorb(std::uint64_t word) {
  v_[3] ^= word;
  rounds(v_, 2);
  v_[0] ^= word;
}

void SipHash::add(std::string_view bytes) {
  for (const char byte : bytes) {
    pending_ |= static_cast<std::uint64_t>(static_cast<unsigned char>(byte)) << (8 * (length_ % 8));
    if (++length_ % 8 != 0) continue;
    absorb(pending_);
    pending_ = 0;
  }
}

void SipHash::add(std::uint64_t word) {
  if (length_ % 8 == 0) {
    length_ += 8;
    return absorb(word);
  }
  char bytes[8];
  for (int i = 0; i < 8; ++i) bytes[i] = static_cast<char>(word >> (8 * i) & 0xff);
  add(std::string_view(bytes, 8));
}

std::string SipHash::hex() const {
  SipHash end = *this;
  end.absorb(pending_ | length_ << 56);
  end.v_[2] ^= 0xee;
  rounds(end.v_, 4);
  const std::uint64_t first = end.v_[0] ^ end.v_[1] ^ end.v_[2] ^ end.v_[3];
  end.v_[1] ^= 0xdd;
  rounds(end.v_, 4);
  const std::uint64_t second = end.v_[0] ^ end.v_[1] ^ end.v_[2] ^ end.v_[3];
  std::string text;
  for (const std::uint64_t word : {first, second})
    for (int i = 0; i < 8; ++i) {
      char two[3];
      std::snprintf(two, sizeof two, "%02x", static_cast<unsigned>(word >> (8 * i) & 0xff));
      text += two;
    }
  return text;
}

std::string fingerprint(std::string_view bytes) {
  SipHash hash;
  hash.add(bytes);
  return hash.hex();
}

std::string digest_of(const Request& request) {
  HashWriter writer;
  write_content(writer, request);
  return writer.hash.hex();
}

}  // namespace halfturn::wire
