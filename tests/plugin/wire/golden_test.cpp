// SPDX-License-Identifier: Apache-2.0
// Messages byte by byte, as the files of tests/golden/ hold them. With HALFTURN_WRITE_GOLDEN in the environment the files are
// written anew instead; tests/golden/check_schema.py reads them with Python's json, msgpack and jsonschema.
#include <cstdlib>
#include <fstream>
#include <iterator>
#include <limits>

#include "plugin/wire/encode.hpp"
#include "plugin/wire/time.hpp"
#include "tests/plugin/wire/support.hpp"

using namespace halfturn;
using namespace halfturn::wire;
using namespace halfturn::wire::tests;

namespace {

const double kNone = std::numeric_limits<double>::quiet_NaN();

std::string path_of(const std::string& name) { return std::string(HALFTURN_SOURCE_DIR) + "/tests/golden/" + name; }

void hold(const std::string& name, const std::string& bytes) {
  INFO(name);
  if (std::getenv("HALFTURN_WRITE_GOLDEN") != nullptr) {
    std::ofstream(path_of(name), std::ios::binary) << bytes;
    return;
  }
  std::ifstream in(path_of(name), std::ios::binary);
  const std::string golden((std::istreambuf_iterator<char>(in)), std::istreambuf_iterator<char>());
  CHECK(golden == bytes);
}

template <class Encode>
void hold_both(const std::string& name, Encode encode) {
  const std::string json = encode(Encoding::json), msgpack = encode(Encoding::msgpack);
  hold(name + ".json", json);
  hold(name + ".msgpack", msgpack);
  CHECK(Json::parse(json) == json_of(msgpack));  // nlohmann's own decoders
}

/// Invented numbers; every field that a reply can have.
Fitted a_fit() {
  Fitted f;
  f.id = "5b1c9d1e-7a55-4c7b-9d3e-0c2f4f1a8d11";
  f.scan_name = "flop 12";
  f.drive = "red";
  f.taken_at = parse_time("2026-02-03T04:05:06.250Z");
  f.verdict = "apply";
  f.reasons = {{"first", "the first accepted scan of this drive; there is no history to compare with"}};
  f.assumed = {"dead time 0 \u00b1 100 ns"};
  f.estimates = {{"rabi_hz", {125340.5, 120.25, 125100, 125580, ""}},
                 {"decay_s", {kNone, kNone, kNone, kNone, "the chosen dynamics have no decay"}},
                 {"contrast", {1.0, kNone, 0.97, 1.0, "at its bound"}}};
  Pulse flip{"apply", 3.141592653589793, 3.992e-6, 3.99e-6, 4e-9, 3.982e-6, 3.998e-6, 499, 4e-6, -0.002, 0.0079, 0.0016, 0.93, false};
  Pulse level = flip;
  level.in_amplitude = true;
  level.verdict = "keep";
  f.pulses = {{"flip", flip}, {"split", level}};
  f.carrier_shift_hz = 0;
  f.dynamics = "undamped";
  f.candidates = {{"undamped", 210.5, 0.75}, {"dephasing", 212.75, 0.25}};
  f.quality = {38.5, 36, 0.36, 3.5, 40, 10000, 1e6, 1.0625, Rival{374659.5, 41.5}, {3, 17},
               28.5, Correlation{{"rabi_hz", "dead_time_s"}, 0.9375}, {"dephasing_s"}};
  f.overlay = Overlay{AxisKind::duration, {0, 1e-6}, {0.02, 0.5}, {0.01, 0.48}, {0.03, 0.52}};
  f.stored = true;
  return f;
}

Fitted many_sites() {
  Fitted f = a_fit();
  f.overlay.reset();
  f.quality.rival.reset();
  f.quality.range_high_hz = std::numeric_limits<double>::infinity();
  SiteFit site{"atom 1", "apply", f.reasons, f.estimates, f.pulses, "undamped", f.quality};
  f.sites = {site, site};
  f.sites[1].name = "atom 2";
  f.sites[1].verdict = "refuse";
  f.sites[1].reasons = {{"flat", "no oscillation"}};
  f.sites[1].estimates.pop_back();
  return f;
}

/// A scan of amplitudes.
Fitted of_amplitudes() {
  Fitted f = a_fit();
  f.estimates = {{"rabi_hz", {kNone, kNone, kNone, kNone, "the amplitude was stepped; see rabi_per_amplitude_hz"}},
                 {"rabi_per_amplitude_hz", {250681, 240.5, 250200, 251160, ""}},
                 {"compression", {0.125, 0.03125, 0.0625, 0.1875, ""}}};
  f.overlay = Overlay{AxisKind::amplitude, {0, 0.5}, {0.02, 0.5}, {0.01, 0.48}, {0.03, 0.52}};
  return f;
}

Fitted of_two_scans() {
  Fitted f = a_fit();
  f.scan_name = "flop-17 + line-3";
  f.carrier_shift_hz = 3521.5;
  f.scans = {{"flop-17", AxisKind::duration, parse_time("2026-02-03T04:05:00Z"), 41, 38.25, 37.5, 0.44, 1, 0.75, {7}},
             {"line-3", AxisKind::detuning, {}, 61, 57.5, 57.75, 0.49, 1, 0.125, {}}};
  return f;
}

State a_state() {
  State s;
  s.id = "s1";
  s.version = "0.1.0";
  s.uptime_s = 3600.5;
  s.log = "ok";
  s.drives["red"] = {{{"flip", 4e-6}}, 125340.5, "apply", parse_time("2026-02-03T06:00:00Z"), true};
  s.drives["blue"] = {};
  s.drives["blue"].amplitudes = {{"flip", 0.5}};
  s.drives["blue"].rabi_per_amplitude_hz = 250681;
  s.troubles = {"drive blue: no scan for 12 h; run one"};
  return s;
}

const Published kPublished{"0f3a", 17, 1'770'091'506'000'000'001};

}  // namespace

TEST_CASE("golden replies") {
  hold_both("replies/fitted", [](Encoding e) { return encode(a_fit(), e); });
  hold_both("replies/fitted_sites", [](Encoding e) { return encode(many_sites(), e); });
  hold_both("replies/fitted_amplitude", [](Encoding e) { return encode(of_amplitudes(), e); });
  hold_both("replies/fitted_joint", [](Encoding e) { return encode(of_two_scans(), e); });
  hold_both("replies/noted", [](Encoding e) { return encode(Noted{"n1"}, e); });
  hold_both("replies/rows", [](Encoding e) { return encode(Rows{"r1", {encode_stored(a_fit())}, "2026-02-03T04:05:06.250000001Z"}, e); });
  hold_both("replies/state", [](Encoding e) { return encode(a_state(), e); });
  hold_both("replies/error", [](Encoding e) { return encode(Error{"e1", {"busy", "", "found 256 requests in flight, expected fewer"}, 0.5}, e); });
  hold_both("replies/replayed", [](Encoding e) { return encode(Stored{"x", encode_stored(a_fit())}, e); });
  hold_both("replies/advised", [](Encoding e) {
    return encode(Advised{"a1", "red", AxisKind::duration, {1e-6, 7e-6}, {500, 1500}, {{"rabi_hz", 80.5}}}, e);
  });
}

TEST_CASE("golden published messages") {
  hold_both("published/fitted", [](Encoding e) { return encode_published(kPublished, a_fit(), e); });
  hold_both("published/fitted_stored", [](Encoding e) { return encode_published(kPublished, Stored{"x", encode_stored(a_fit())}, e); });
  hold_both("published/live", [](Encoding e) { return encode_published(kPublished, Live{"red", "flop 12", 20, *a_fit().overlay}, e); });
  hold_both("published/drift", [](Encoding e) {
    return encode_published(kPublished, Drift{"red", a_fit().estimates[0].second, -0.0005, parse_time("2026-02-03T06:00:00Z")}, e);
  });
  hold_both("published/drift_amplitude", [](Encoding e) {
    return encode_published(kPublished, Drift{"red", a_fit().estimates[0].second, -0.0005, {}, of_amplitudes().estimates[1].second}, e);
  });
  hold_both("published/health", [](Encoding e) { return encode_published(kPublished, Health{a_state()}, e); });
  hold_both("published/error", [](Encoding e) { return encode_published(kPublished, Error{"", {"bad_value", "scan.counts[3]", "found -1"}, {}}, e); });
}

TEST_CASE("golden requests") {
  const std::string s = R"("scan_name":"s","drive":"red")";
  const std::vector<std::pair<std::string, std::string>> requests = {
      {"fit", R"({"proto":1,"kind":"fit","id":"1","scan":{)" + s + R"(,"taken_at":"2026-02-03T04:05:06Z",)" + kFlop +
                  R"(,"drive_amplitude":0.5,"carrier_hz":8e7,"references":{"bright_counts":95,"bright_shots":100,"dark_counts":1,"dark_shots":100},"prepared":"e","at_s":[0,0.5,1],"ambient":{"room":21.5}},"options":{"store":false,"overlay_points":200,"dynamics":["decay"],"level":0.9}})"},
      {"fit_sites", R"({"proto":1,"kind":"fit","id":"2","scan":{"drive":"red","sites":["a","b"],"detuning_hz":[-1000,1000.5],"signal":[[0.1,null],[0.2,0.3]],"sigma":[[0.1,0.1],[0.1,null]],"pulse_s":4e-6}})"},
      {"fit_joint", R"({"proto":1,"kind":"fit","id":"3","scans":[{"drive":"red",)" + kFlop + R"(},{"drive":"red","amplitude":[0,1],"photons":[3,40],"exposures":[10,20],"pulse_s":4e-6}]})"},
      {"begin", R"({"proto":1,"kind":"begin","id":"4","scan":{)" + s + "}}"},
      {"points", R"({"proto":1,"kind":"points","id":"5","scan_name":"s",)" + kFlop + "}"},
      {"end", R"({"proto":1,"kind":"end","id":"6","scan_name":"s"})"},
      {"applied", R"({"proto":1,"kind":"applied","id":"7","drive":"red","applied_at":"2026-02-03T04:05:06Z","pulses":{"flip":4e-6},"carrier_hz":8e7})"},
      {"history", R"({"proto":1,"kind":"history","id":"8","drive":"red","since":"2026-02-03T04:05:06Z","until":"2026-02-04T04:05:06Z","limit":10})"},
      {"next", R"({"proto":1,"kind":"next","id":"9","drive":"red","shots":2000})"},
      {"hold", R"({"proto":1,"kind":"hold","id":"10","drive":"red","by":"Ada","why":"mirror moved"})"},
      {"release", R"({"proto":1,"kind":"release","id":"11","drive":"red","by":"Ada"})"},
      {"status", R"({"proto":1,"kind":"status","id":"12"})"},
  };
  for (const auto& [name, text] : requests) {
    const Request request = request_of(text);
    hold_both("requests/" + name, [&, r = request](Encoding e) { return encode_request(r, e); });
    CHECK(request_of(encode_request(request, Encoding::json)).digest == request.digest);
  }
}

TEST_CASE("replayed replies are the stored ones with one field more") {
  const Json stored = json_of(encode_stored(a_fit()));
  Json replayed = json_of(encode(Stored{"x", encode_stored(a_fit())}, Encoding::msgpack));
  CHECK(replayed["replayed"] == true);
  replayed.erase("replayed");
  CHECK(replayed == stored);
  CHECK_FALSE(stored.contains("overlay"));
  const Json broken = json_of(encode(Stored{"x", "\xdd\xff"}, Encoding::msgpack));
  CHECK(broken["kind"] == "error");
  CHECK(broken["code"] == "internal");
  CHECK(broken["id"] == "x");
}

TEST_CASE("containers of every header size") {
  // MessagePack's array headers change at 16 and 65,536 members, its map headers likewise; nlohmann's decoder reads them.
  for (const std::size_t size : {0u, 15u, 16u, 65'535u, 65'536u}) {
    Fitted f = a_fit();
    f.overlay->signal.assign(size, 0.25);
    f.candidates.assign(std::min<std::size_t>(size, 20), Candidate{"decay", 1, 1});
    const Json back = json_of(encode(f, Encoding::msgpack));
    CHECK(back["overlay"]["signal"].size() == size);
    CHECK(back["stored"] == true);
    CHECK(Json::parse(encode(f, Encoding::json)) == back);
  }
}
