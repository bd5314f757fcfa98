// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <nlohmann/json.hpp>
#include <string>

#include "plugin/wire/decode.hpp"
#include "tests/support/catch.hpp"

namespace halfturn::wire::tests {

using Json = nlohmann::json;

/// The MessagePack of a JSON text, by nlohmann's own encoder, which shares nothing with plugin/wire.
inline std::string msgpack_of(const Json& json) {
  const auto bytes = Json::to_msgpack(json);
  return {bytes.begin(), bytes.end()};
}

inline Json json_of(const std::string& msgpack) { return Json::from_msgpack(msgpack.begin(), msgpack.end()); }

inline Decoded decode(const std::string& bytes) { return decode_request(bytes, DecodeLimits{}); }

/// The request of a JSON text, decoded from both encodings, which must agree.
inline Request request_of(const std::string& text) {
  const Decoded json = decode(text), msgpack = decode(msgpack_of(Json::parse(text)));
  INFO(text);
  INFO((json.request ? "" : json.request.error().where + ": " + json.request.error().message));
  REQUIRE(json.request.has_value());
  REQUIRE(msgpack.request.has_value());
  CHECK(json.encoding == Encoding::json);
  CHECK(msgpack.encoding == Encoding::msgpack);
  CHECK(json.request->digest == msgpack.request->digest);
  CHECK(json.id == json.request->id);
  return *json.request;
}

/// The fault of a JSON text, decoded from both encodings, which must agree.
inline Fault fault_of(const std::string& text) {
  const Decoded json = decode(text), msgpack = decode(msgpack_of(Json::parse(text)));
  INFO(text);
  REQUIRE(!json.request.has_value());
  REQUIRE(!msgpack.request.has_value());
  CHECK(json.request.error().code == msgpack.request.error().code);
  CHECK(json.request.error().where == msgpack.request.error().where);
  CHECK(json.request.error().message == msgpack.request.error().message);
  CHECK(json.id == msgpack.id);
  return json.request.error();
}

/// A `fit` whose scan has these fields beside its drive.
inline std::string fit_with(const std::string& fields, const std::string& more = "") {
  return R"({"proto":1,"kind":"fit","id":"a-1","scan":{"drive":"red",)" + fields + "}" + more + "}";
}

inline const std::string kFlop = R"("duration_s":[0,1e-6,2e-6],"counts":[0,60,95],"shots":100)";

}  // namespace halfturn::wire::tests
