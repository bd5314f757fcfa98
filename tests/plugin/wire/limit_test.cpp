// SPDX-License-Identifier: Apache-2.0
// Hostile sizes. The codes of the first byte of a MessagePack value are from its specification.
#include "tests/plugin/wire/support.hpp"

using namespace halfturn;
using namespace halfturn::wire;
using namespace halfturn::wire::tests;
using namespace std::string_literals;

namespace {

std::string code_of(const std::string& bytes, const DecodeLimits& limits = {}) {
  const Decoded decoded = decode_request(bytes, limits);
  REQUIRE_FALSE(decoded.request);
  CHECK_FALSE(decoded.request.error().message.empty());
  return decoded.request.error().code;
}

Fault fault_with(const std::string& text, const DecodeLimits& limits) {
  const Decoded decoded = decode_request(text, limits);
  REQUIRE_FALSE(decoded.request);
  return decoded.request.error();
}

}  // namespace

TEST_CASE("five bytes that ask for gigabytes") {
  for (const std::string& bomb :
       {"\xdd\xff\xff\xff\xff"s, "\xdf\xff\xff\xff\xff"s, "\xdb\xff\xff\xff\xff"s, "\xc6\xff\xff\xff\xff"s,
        "\xc9\xff\xff\xff\xff"s, "\xc9\xff\xff\xff\xff\x01"s, "\xdc\xff\xff"s, "\xde\xff\xff"s})
    CHECK(code_of(bomb) == "bad_encoding");
  const std::string head = "\x84\xa5proto\x01\xa4kind\xa3" "fit\xa2id\xa1i\xa4scan\x81\xa6" "counts"s;
  for (const std::string& bomb :
       {"\xdd\xff\xff\xff\xff"s, "\xdb\xff\xff\xff\xff"s, "\xdd\xff\xff\xff\xff\xdd\xff\xff\xff\xff"s}) {
    CHECK(code_of(head + bomb) == "bad_encoding");
    CHECK(decode(head + bomb).id == "i");
  }
}

TEST_CASE("nesting without end") {
  CHECK(code_of(R"({"a":)" + std::string(1'000'000, '[')) == "too_large");
  CHECK(code_of("\x81\xa1" "a" + std::string(1'000'000, '\x91')) == "too_large");
  std::string maps;
  for (int i = 0; i < 100'000; ++i) maps += "\x81\xa1" "a";
  CHECK(code_of(maps) == "too_large");
  std::string objects;
  for (int i = 0; i < 100'000; ++i) objects += R"({"a":)";
  CHECK(code_of(objects) == "too_large");
}

TEST_CASE("what is no message") {
  CHECK(code_of("") == "bad_encoding");
  CHECK(code_of("{") == "bad_encoding");
  CHECK(code_of("{}x") == "bad_encoding");
  CHECK(code_of("hello") == "bad_encoding");
  CHECK(code_of("\x80\x80"s) == "bad_encoding");
  CHECK(code_of("\xc1"s) == "bad_encoding");
  CHECK(code_of("\xc0"s) == "bad_encoding");
  CHECK(code_of("\x90"s) == "bad_encoding");
  CHECK(code_of("\x81\x01\x02"s) == "bad_encoding");
  CHECK(code_of("\x81\x80\x02"s) == "bad_encoding");
  CHECK(code_of("\x81\xa2\xc3\x28\x01"s) == "bad_encoding");  // a key that is no UTF-8
  CHECK(code_of("\x81\xa2id\xa2\xc3\x28"s) == "bad_encoding");
  CHECK(code_of("\x81\xa2id\xc4\x01x"s) == "bad_type");
  CHECK(code_of("{\"id\":\"\xc3\x28\"}") == "bad_encoding");
  CHECK(code_of(R"({"proto":NaN})") == "bad_encoding");
  CHECK(code_of(R"({"proto":1e999})") == "bad_value");
  CHECK(code_of("\x81\xa5proto\xcb\x7f\xf0\x00\x00\x00\x00\x00\x00"s) == "bad_value");
  CHECK(code_of("\x81\xa5proto\xcb\x7f\xf8\x00\x00\x00\x00\x00\x00"s) == "bad_value");
  CHECK(code_of("\x81\xa5proto\xca\x7f\xc0\x00\x00"s) == "bad_value");
}

TEST_CASE("not a number, at its place") {
  const std::string head = "\x84\xa5proto\x01\xa4kind\xa3" "fit\xa2id\xa1i\xa4scan\x81\xaa" "duration_s\x92\x01"s;
  const Decoded decoded = decode(head + "\xcb\x7f\xf8\x00\x00\x00\x00\x00\x00"s);
  CHECK(decoded.request.error().code == "bad_value");
  CHECK(decoded.request.error().where == "scan.duration_s[1]");
  CHECK(decoded.request.error().message == "found nan, expected a finite number");
}

TEST_CASE("limits name what was found and where") {
  DecodeLimits limits;
  limits.points = 2, limits.sites = 1, limits.scans = 1, limits.names = 1, limits.text = 64;
  const Fault points = fault_with(fit_with(kFlop), limits);
  CHECK(points.code == "too_large");
  CHECK(points.where == "scan.duration_s");
  CHECK(points.message == "found more than 2 points, expected at most so many");
  CHECK(fault_with(fit_with(R"("sites":["a","b"])"), limits).where == "scan.sites");
  CHECK(fault_with(fit_with(R"("counts":[[1],[2]])"), limits).where == "scan.counts");
  CHECK(fault_with(fit_with(R"("ambient":{"a":1,"b":2})"), limits).where == "scan.ambient");
  CHECK(fault_with(R"({"scans":[{},{}]})", limits).where == "scans");
  CHECK(fault_with(R"({"why":")" + std::string(65, 'x') + "\"}", limits).where == "why");
  limits.bytes = 20;
  const Fault bytes = fault_with(fit_with(kFlop), limits);
  CHECK(bytes.code == "too_large");
  CHECK_THAT(bytes.message, Catch::Contains("expected at most 20"));
}

TEST_CASE("a message of the largest size is read") {
  Json scan = {{"drive", "red"},
               {"duration_s", std::vector<double>(100'000, 1.5e-6)},
               {"shots", 100},
               {"counts", std::vector<int>(100'000, 7)}};
  const Decoded decoded = decode(msgpack_of({{"proto", 1}, {"kind", "fit"}, {"id", "big"}, {"scan", scan}}));
  REQUIRE(decoded.request);
  CHECK(decoded.request->scans[0].axis.size() == 100'000);
}

TEST_CASE("a message that is cut anywhere is a fault") {
  const std::string text = fit_with(kFlop + R"(,"taken_at":"2026-02-03T04:05:06Z","ambient":{"t":1.5},"sites":["a"],"prepared":"e")", R"(,"options":{"level":0.9})");
  for (const std::string& whole : {text, msgpack_of(Json::parse(text))})
    for (std::size_t length = 0; length < whole.size(); ++length) CHECK(code_of(whole.substr(0, length)) == "bad_encoding");
}
