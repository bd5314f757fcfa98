// SPDX-License-Identifier: Apache-2.0
#include "tests/fuzz/decode_target.hpp"

#include <cstdio>
#include <cstdlib>

#include "plugin/wire/decode.hpp"
#include "plugin/wire/encode.hpp"
#include "plugin/wire/transcribe.hpp"
#include "plugin/wire/words.hpp"

namespace {

using namespace halfturn::wire;

void hold(bool condition, const char* what) {
  if (condition) return;
  std::fprintf(stderr, "broken: %s\n", what);
  std::abort();
}

/// A request that was accepted comes back from both encodings with the same content.
void check_request(const Request& request, const DecodeLimits& limits) {
  for (const Encoding encoding : {Encoding::json, Encoding::msgpack}) {
    const Decoded again = decode_request(encode_request(request, encoding), limits);
    hold(again.request.has_value(), "an accepted request is refused when it is sent again");
    hold(again.request->digest == request.digest, "the content of a request changes when it is sent again");
    hold(again.id == request.id, "the id of a request changes when it is sent again");
  }
}

void check_fault(const halfturn::Fault& fault, const std::string& id, Encoding encoding) {
  hold(!fault.code.empty() && !fault.message.empty(), "a fault says nothing");
  hold(is_utf8(fault.message) && is_utf8(fault.where) && is_utf8(id), "a fault is no UTF-8");
  hold(!encode(Error{id, fault, {}}, encoding).empty(), "an error cannot be written");
}

}  // namespace

namespace halfturn::fuzz {

void decode_target(std::string_view bytes) {
  DecodeLimits limits;
  limits.bytes = 1u << 20;
  const Decoded decoded = decode_request(bytes, limits);
  if (decoded.request) check_request(*decoded.request, limits);
  else check_fault(decoded.request.error(), decoded.id, decoded.encoding);
  const auto scan = decode_scan(bytes, limits);
  if (scan) {
    const std::string stored = encode_scan(*scan);
    const auto again = decode_scan(stored, limits);
    hold(again && encode_scan(*again) == stored, "a stored scan does not come back");
  }
  const auto writer = make_writer(Encoding::json);
  transcribe(bytes, *writer);
}

}  // namespace halfturn::fuzz
