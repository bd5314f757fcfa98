// SPDX-License-Identifier: Apache-2.0
// Messages are made by nlohmann's JSON and MessagePack encoders, which share nothing with plugin/wire; what fields mean is
// the contract's (schemas/messages.schema.json).
#include <cmath>

#include "plugin/wire/digest.hpp"
#include "plugin/wire/encode.hpp"
#include "plugin/wire/time.hpp"
#include "tests/plugin/wire/support.hpp"

using namespace halfturn;
using namespace halfturn::wire;
using namespace halfturn::wire::tests;

TEST_CASE("a fit of a flop with everything") {
  const Request r = request_of(R"({"id":"a-1","scan":{"scan_name":"night 7","counts":[0,60.0,95],"drive":"red","shots":[100,100,1e2],
    "taken_at":"2026-02-03T04:05:06.5Z","duration_s":[0,1e-6,2e-6],"drive_amplitude":0.5,"carrier_hz":8e7,"prepared":"e",
    "references":{"bright_counts":95,"bright_shots":100,"dark_counts":1,"dark_shots":100},"at_s":[0,0.1,0.2],
    "ambient":{"room \u00b0C":21.5,"x":-3}},"options":{"store":false,"overlay_points":200,"dynamics":["decay"],"level":0.9},
    "kind":"fit","proto":1.0})");
  CHECK(r.kind == Kind::fit);
  CHECK(r.id == "a-1");
  CHECK_FALSE(r.joint);
  REQUIRE(r.scans.size() == 1);
  const Scan& s = r.scans[0];
  CHECK(s.scan_name == "night 7");
  CHECK(s.drive == "red");
  CHECK(s.taken_at == parse_time("2026-02-03T04:05:06.500Z"));
  CHECK(s.axis_kind == AxisKind::duration);
  CHECK(s.axis == std::vector<double>{0, 1e-6, 2e-6});
  CHECK(s.readout_kind == ReadoutKind::binomial);
  CHECK(s.observed == std::vector<std::vector<double>>{{0, 60, 95}});
  CHECK(s.weight == std::vector<std::vector<double>>{{100, 100, 100}});
  CHECK(s.drive_amplitude == 0.5);
  CHECK(s.carrier_hz == 8e7);
  REQUIRE(s.references);
  CHECK(s.references->bright == 95);
  CHECK(s.references->dark_of == 100);
  CHECK(s.prepared_excited);
  CHECK(s.at_s == std::vector<double>{0, 0.1, 0.2});
  CHECK(s.ambient == std::map<std::string, double>{{"room \u00b0C", 21.5}, {"x", -3}});
  CHECK_FALSE(r.options.store);
  CHECK(r.options.overlay_points == 200);
  CHECK(r.options.dynamics == std::vector<std::string>{"decay"});
  CHECK(r.options.level == 0.9);
}

TEST_CASE("points that were not measured have no weight") {
  const Request counts = request_of(fit_with(R"("duration_s":[0,1,2,3],"counts":[5,null,7,9],"shots":[10,10,0,null])"));
  CHECK(counts.scans[0].observed[0] == std::vector<double>{5, 0, 0, 0});
  CHECK(counts.scans[0].weight[0] == std::vector<double>{10, 0, 0, 0});
  const Request signal = request_of(fit_with(R"("detuning_hz":[-1,0,1],"signal":[0.5,null,0.7],"sigma":[0.1,0.1,null],"pulse_s":4e-6)"));
  CHECK(signal.scans[0].weight[0][0] == 0.1);
  CHECK(std::isinf(signal.scans[0].weight[0][1]));
  CHECK(std::isinf(signal.scans[0].weight[0][2]));
}

TEST_CASE("axes, readouts and sites") {
  const Request line = request_of(fit_with(R"("detuning_hz":[-1e3,0,1e3],"photons":[3,9,2],"exposures":50,"pulse_s":4e-6,
    "references":{"bright_photons":9,"bright_exposures":50,"dark_photons":1,"dark_exposures":50})"));
  CHECK(line.scans[0].axis_kind == AxisKind::detuning);
  CHECK(line.scans[0].readout_kind == ReadoutKind::poisson);
  CHECK(line.scans[0].weight[0] == std::vector<double>{50, 50, 50});
  CHECK(line.scans[0].pulse_s == 4e-6);
  CHECK(line.scans[0].references->bright == 9);
  const Request amplitude = request_of(fit_with(R"("amplitude":[0,0.5],"signal":[0.1,-0.2],"sigma":0.05,"pulse_s":4e-6)"));
  CHECK(amplitude.scans[0].axis_kind == AxisKind::amplitude);
  CHECK(amplitude.scans[0].readout_kind == ReadoutKind::gaussian);
  const Request sites = request_of(fit_with(R"("sites":["a","b"],"duration_s":[0,1],"counts":[[1,2],[3,4]],"shots":[10,20])"));
  CHECK(sites.scans[0].observed == std::vector<std::vector<double>>{{1, 2}, {3, 4}});
  CHECK(sites.scans[0].weight == std::vector<std::vector<double>>{{10, 20}, {10, 20}});
}

TEST_CASE("a joint fit") {
  const std::string scan = R"({"drive":"red",)" + kFlop + "}";
  const Request r = request_of(R"({"proto":1,"kind":"fit","id":"j","scans":[)" + scan + "," + scan + "]}");
  CHECK(r.joint);
  CHECK(r.scans.size() == 2);
}

TEST_CASE("the other kinds") {
  const Request begin = request_of(R"({"proto":1,"kind":"begin","id":"1","scan":{"scan_name":"s","drive":"red","sites":["a","b"],"pulse_s":1e-6}})");
  CHECK(begin.kind == Kind::begin);
  CHECK(begin.scans[0].sites.size() == 2);
  const Request points = request_of(R"({"proto":1,"kind":"points","id":"2","scan_name":"s","duration_s":[1e-6],"counts":[[3],[4]],"shots":10,"at_s":[0.5]})");
  CHECK(points.scan_name == "s");
  CHECK(points.scans[0].observed == std::vector<std::vector<double>>{{3}, {4}});
  CHECK(points.scans[0].at_s == std::vector<double>{0.5});
  CHECK(request_of(R"({"proto":1,"kind":"end","id":"3","scan_name":"s"})").scan_name == "s");
  const Request applied = request_of(R"({"proto":1,"kind":"applied","id":"4","drive":"red","applied_at":"2026-02-03T04:05:06+01:00","pulses":{"flip":4e-6},"carrier_hz":8e7})");
  CHECK(applied.pulses == std::map<std::string, double>{{"flip", 4e-6}});
  CHECK(applied.applied_at == parse_time("2026-02-03T03:05:06Z"));
  CHECK(applied.carrier_hz == 8e7);
  const Request history = request_of(R"({"proto":1,"kind":"history","id":"5","drive":"red","since":"2026-02-03T04:05:06Z","until":"2026-02-04T04:05:06Z","limit":10})");
  CHECK(history.limit == 10);
  CHECK(*history.until - *history.since == 86'400'000'000'000);
  CHECK(request_of(R"({"proto":1,"kind":"next","id":"6","drive":"red","shots":2000})").shots == 2000);
  const Request hold = request_of(R"({"proto":1,"kind":"hold","id":"7","drive":"red","by":"Ada","why":"alignment"})");
  CHECK(hold.by == "Ada");
  CHECK(hold.why == "alignment");
  CHECK(request_of(R"({"proto":1,"kind":"release","id":"8","drive":"red","by":"Ada"})").kind == Kind::release);
  CHECK(request_of(R"({"proto":1,"kind":"status","id":"9"})").kind == Kind::status);
}

TEST_CASE("the MessagePack timestamp type is a time") {
  // MessagePack specification, "Timestamp extension type": 32 bits; 64 bits (30 of nanoseconds, 34 of seconds); 96 bits.
  const Json head = Json::parse(R"({"proto":1,"kind":"history","id":"t","drive":"red"})");
  std::string bytes = msgpack_of(head);
  bytes[0] = static_cast<char>(0x80 | 5);
  const std::string key = std::string("\xa5") + "since";
  using namespace std::string_literals;
  const Time second = 1'700'000'000'000'000'000;  // 2023-11-14T22:13:20Z, 0x6553f100 s
  CHECK(decode(bytes + key + "\xd6\xff\x65\x53\xf1\x00"s).request->since == second);
  CHECK(decode(bytes + key + "\xd7\xff\x00\x00\x00\x04\x65\x53\xf1\x00"s).request->since == second + 1);
  CHECK(decode(bytes + key + "\xc7\x0c\xff\x00\x00\x00\x07\x00\x00\x00\x00\x65\x53\xf1\x00"s).request->since == second + 7);
  CHECK(decode(bytes + key + "\xc7\x0c\xff\x00\x00\x00\x07\xff\xff\xff\xff\xff\xff\xff\xff"s).request->since ==
        -1'000'000'000 + 7);
  const auto other = decode(bytes + key + "\xd6\x05\x65\x53\xf1\x00"s);
  CHECK(other.request.error().code == "bad_type");
  CHECK(other.request.error().where == "since");
  const auto late = decode(bytes + key + "\xc7\x0c\xff\x00\x00\x00\x07\x7f\xff\xff\xff\xff\xff\xff\xff"s);
  CHECK(late.request.error().code == "bad_type");
}

TEST_CASE("the digest is of the content, not of its form") {
  const Request a = request_of(fit_with(kFlop));
  const Request b = request_of(R"({"kind":"fit","proto":1,"scan":{"shots":[100,100,100.0],"counts":[0.0,60,95],"duration_s":[0,1e-6,0.000002],"drive":"red"},"id":"b"})");
  CHECK(a.digest == b.digest);
  CHECK(a.digest.size() == 32);
  CHECK(a.digest != request_of(fit_with(R"("duration_s":[0,1e-6,2e-6],"counts":[0,60,94],"shots":100)")).digest);
  CHECK(a.digest != request_of(fit_with(kFlop, R"(,"options":{"store":false})")).digest);
  CHECK(a.digest != request_of(R"({"proto":1,"kind":"status","id":"a-1"})").digest);
}

TEST_CASE("SipHash-2-4 with 128 bits") {
  // Computed with OpenSSL 3.0.19: openssl mac -macopt hexkey:000102...0e0f -macopt size:16 -in FILE SIPHASH
  CHECK(fingerprint("") == "a3817f04ba25a8e66df67214c7550293");
  CHECK(fingerprint("halfturn") == "b4757715f4adf65b0b362fe5d47b1dcb");
  CHECK(fingerprint("a pulse is a length, not a frequency") == "3583a3c4008ff07121600ec2ce3e43b6");
}

TEST_CASE("scans come back from their stored form") {
  const std::vector<std::string> bodies = {
      kFlop,
      R"("duration_s":[0,1,2,3],"counts":[5,null,7,9],"shots":[10,10,0,null],"ambient":{"t":0.1},"taken_at":"2026-02-03T04:05:06.123456789Z")",
      R"("detuning_hz":[-1,0.5,1],"signal":[0.5,null,0.7],"sigma":[0.1,0.1,null],"pulse_s":4e-6,"at_s":[1,2,3],"prepared":"e")",
      R"("sites":["a","b"],"duration_s":[0,1],"photons":[[1,2],[3,4]],"exposures":[[1,2],[3,4]],"references":{"bright_photons":9,"bright_exposures":50,"dark_photons":1,"dark_exposures":50})",
      R"("sites":["a"],"duration_s":[0],"counts":[[1]],"shots":4,"drive_amplitude":0.3,"carrier_hz":-2)"};
  for (const std::string& body : bodies) {
    INFO(body);
    const Request first = request_of(fit_with(body));
    const std::string stored = encode_scan(first.scans[0]);
    const auto scan = decode_scan(stored);
    REQUIRE(scan);
    CHECK(encode_scan(*scan) == stored);
    Request again = first;
    again.scans = {*scan};
    CHECK(digest_of(again) == first.digest);
    CHECK(scan->observed == first.scans[0].observed);
    CHECK(scan->weight == first.scans[0].weight);
    for (const Encoding encoding : {Encoding::json, Encoding::msgpack}) {
      const Decoded sent = decode(encode_request(first, encoding));
      REQUIRE(sent.request);
      CHECK(sent.encoding == encoding);
      CHECK(sent.request->digest == first.digest);
    }
  }
}
