// SPDX-License-Identifier: Apache-2.0
// Random requests (seeded) are written and read back; random bytes and mutations never do more than fail with a fault.
#include <limits>
#include <random>

#include "plugin/wire/encode.hpp"
#include "tests/plugin/wire/support.hpp"

using namespace halfturn;
using namespace halfturn::wire;
using namespace halfturn::wire::tests;

namespace {

struct Random {
  std::mt19937_64 engine{20260203};
  std::size_t below(std::size_t n) { return static_cast<std::size_t>(engine() % n); }
  bool coin() { return engine() & 1; }
  double real(double low, double high) { return std::uniform_real_distribution<double>(low, high)(engine); }
  std::optional<double> maybe(double low, double high) { return coin() ? std::optional(real(low, high)) : std::nullopt; }
  std::string word() {
    std::string text;
    for (std::size_t i = 1 + below(20); i > 0; --i) text += "abcXYZ019_-"[below(11)];
    return text;
  }
  std::string text() { return word() + (coin() ? " \u00b5 \u4e2d \U0001F52C \"\\" : ""); }
  Time time() { return static_cast<Time>(below(4'000'000'000'000'000'000u)); }
};

/// A point as the decoder gives it: measured, or not in the one way of Scan.
void add_point(Random& random, ReadoutKind kind, std::vector<double>& observed, std::vector<double>& weight) {
  const bool measured = random.below(5) != 0;
  if (kind == ReadoutKind::gaussian) {
    observed.push_back(measured ? random.real(-1, 1) : 0);
    weight.push_back(measured ? random.real(1e-3, 1) : std::numeric_limits<double>::infinity());
    return;
  }
  const std::size_t shots = measured ? 1 + random.below(random.coin() ? 100 : 1u << 30) : 0;
  observed.push_back(static_cast<double>(random.below(shots + 1)));
  weight.push_back(static_cast<double>(shots));
}

Scan random_scan(Random& random) {
  Scan scan;
  scan.drive = random.word();
  if (random.coin()) scan.scan_name = random.text();
  if (random.coin()) scan.taken_at = random.time();
  scan.axis_kind = static_cast<AxisKind>(random.below(3));
  scan.readout_kind = static_cast<ReadoutKind>(random.below(3));
  const std::size_t points = 1 + random.below(30), sites = random.below(4);
  for (std::size_t i = 0; i < points; ++i)
    scan.axis.push_back(scan.axis_kind == AxisKind::detuning ? random.real(-1e5, 1e5)
                        : random.coin()                      ? random.real(0, 1e-4)
                                                             : double(i));
  for (std::size_t s = 0; s < sites; ++s) scan.sites.push_back(random.word() + std::to_string(s));
  for (std::size_t s = 0; s < std::max<std::size_t>(sites, 1); ++s) {
    scan.observed.emplace_back(), scan.weight.emplace_back();
    for (std::size_t p = 0; p < points; ++p) add_point(random, scan.readout_kind, scan.observed.back(), scan.weight.back());
  }
  if (scan.axis_kind != AxisKind::duration) scan.pulse_s = random.real(1e-9, 1e-3);
  scan.drive_amplitude = random.maybe(0.01, 2);
  scan.carrier_hz = random.maybe(-1e9, 1e9);
  if (scan.readout_kind != ReadoutKind::gaussian && random.coin()) scan.references = References{7, 9, 1, 9};
  scan.prepared_excited = random.coin();
  if (random.coin()) scan.at_s.assign(points, random.real(-1, 100));
  while (random.coin()) scan.ambient[random.text()] = random.real(-1e10, 1e10);
  return scan;
}

Request random_fit(Random& random) {
  Request request;
  request.kind = Kind::fit;
  request.id = random.text();
  request.joint = random.coin();
  request.scans.push_back(random_scan(random));
  while (request.joint && random.coin()) {
    request.scans.push_back(random_scan(random));
    request.scans.back().drive = request.scans.front().drive;
  }
  request.options.store = random.coin();
  if (random.coin()) request.options.overlay_points = static_cast<std::int64_t>(random.below(10'001));
  while (random.coin()) request.options.dynamics.push_back(random.word());
  request.options.level = random.maybe(0.51, 0.99);
  return request;
}

void check_equal(const Scan& a, const Scan& b) {
  CHECK(a.scan_name == b.scan_name);
  CHECK(a.drive == b.drive);
  CHECK(a.taken_at == b.taken_at);
  CHECK(a.axis_kind == b.axis_kind);
  CHECK(a.axis == b.axis);
  CHECK(a.readout_kind == b.readout_kind);
  CHECK(a.sites == b.sites);
  CHECK(a.observed == b.observed);
  CHECK(a.weight == b.weight);
  CHECK(a.pulse_s == b.pulse_s);
  CHECK(a.drive_amplitude == b.drive_amplitude);
  CHECK(a.carrier_hz == b.carrier_hz);
  CHECK(a.references.has_value() == b.references.has_value());
  CHECK(a.prepared_excited == b.prepared_excited);
  CHECK(a.at_s == b.at_s);
  CHECK(a.ambient == b.ambient);
}

}  // namespace

TEST_CASE("random fits come back from both encodings") {
  Random random;
  for (int i = 0; i < 300; ++i) {
    const Request sent = random_fit(random);
    for (const Encoding encoding : {Encoding::json, Encoding::msgpack}) {
      const Decoded back = decode(encode_request(sent, encoding));
      INFO(encode_request(sent, Encoding::json));
      INFO((back.request ? "" : back.request.error().where + ": " + back.request.error().message));
      REQUIRE(back.request);
      CHECK(back.id == sent.id);
      CHECK(back.request->joint == sent.joint);
      REQUIRE(back.request->scans.size() == sent.scans.size());
      for (std::size_t s = 0; s < sent.scans.size(); ++s) check_equal(back.request->scans[s], sent.scans[s]);
      CHECK(back.request->options.store == sent.options.store);
      CHECK(back.request->options.overlay_points == sent.options.overlay_points);
      CHECK(back.request->options.dynamics == sent.options.dynamics);
      CHECK(back.request->options.level == sent.options.level);
    }
    const auto stored = decode_scan(encode_scan(sent.scans[0]));
    REQUIRE(stored);
    check_equal(*stored, sent.scans[0]);
    const auto all = decode_scans(encode_scans(sent.scans));
    REQUIRE(all);
    REQUIRE(all->size() == sent.scans.size());
    for (std::size_t s = 0; s < all->size(); ++s) check_equal((*all)[s], sent.scans[s]);
  }
}

TEST_CASE("random bytes and mutations are requests or faults") {
  Random random;
  int accepted = 0, refused = 0;
  for (int i = 0; i < 200; ++i) {
    const std::string whole = encode_request(random_fit(random), random.coin() ? Encoding::json : Encoding::msgpack);
    for (int j = 0; j < 20; ++j) {
      std::string bytes = whole;
      for (std::size_t k = 1 + random.below(3); k > 0; --k)
        bytes[random.below(bytes.size())] = static_cast<char>(random.engine());
      const Decoded decoded = decode(bytes);
      ++(decoded.request ? accepted : refused);
      if (!decoded.request) CHECK_FALSE(decoded.request.error().code.empty());
    }
  }
  CHECK(accepted > 100);  // both ends are reached
  CHECK(refused > 1000);
}

TEST_CASE("the digest tells apart whatever differs") {
  Random random;
  for (int i = 0; i < 200; ++i) {
    Request sent = random_fit(random);
    const std::string before = decode(encode_request(sent, Encoding::msgpack)).request->digest;
    sent.id = "another";
    CHECK(decode(encode_request(sent, Encoding::json)).request->digest == before);
    sent.scans.back().axis.back() += 1;
    CHECK(decode(encode_request(sent, Encoding::json)).request->digest != before);
  }
}
