// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/night.hpp"

#include <ctime>
#include <set>
#include <sstream>

#include "plugin/wire/decode.hpp"
#include "plugin/wire/time.hpp"
#include "tests/plugin/rehearse/fake_daemon.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::rehearse;
using halfturn::constants::kPi;
using halfturn::constants::kTwoPi;
using halfturn::tests::FakeDaemon;

namespace {

const std::string kEvening = "2026-02-03T18:00:00Z";

RehearseOptions red(std::uint64_t seed = 1, double hours = 8) {
  RehearseOptions options;
  options.drive = "red";
  options.seed = seed;
  options.hours = hours;
  options.starts_at = kEvening;
  options.apparatus.mishap_probability = 0;
  return options;
}

/// A daemon that knows what RehearsedDrive will take for the truth: 4.00 us is a pi pulse at the start.
FakeDaemon knowing(const RehearseOptions& options, wire::Time starts_at = *wire::parse_time(kEvening)) {
  auto settings = options.apparatus;
  settings.rabi_hz = 0.5 / (4.00e-6 - settings.dead_time_s);
  return FakeDaemon(settings, options.seed, options.hours * 3600, starts_at);
}

bool always(const Moment&) { return true; }

Night rehearsed(const RehearseOptions& options, FakeDaemon& daemon) {
  auto night = rehearse_night(options, daemon.ask(), always);
  REQUIRE(night);
  return std::move(*night);
}

}  // namespace

TEST_CASE("Scores are what their definitions say of errors known beforehand") {
  // A steady drive: 4.01 us less 10 ns is pi at 125 kHz. Pulses off by -1 %, 0, +2 % turn by -0.01 pi, 0, +0.02 pi.
  ApparatusSettings settings;
  settings.rabi_walk = settings.warm_up = settings.line_walk_hz = 0;
  const Apparatus apparatus(settings, 1, 0);
  Strategy strategy("some", 0, settings.line_hz);
  for (int minute = 0; minute < 200; ++minute) {
    strategy.pulse_s = 10e-9 + 4e-6 * (minute < 120 ? 0.99 : minute < 199 ? 1.0 : 1.02);
    strategy.note(apparatus, 60.0 * minute, kPi);
  }
  const Score s = score(strategy);
  CHECK(s.worst_rad == Approx(0.02 * kPi).margin(1e-9));
  CHECK(s.percentile_99_rad == Approx(0.01 * kPi).margin(1e-9));
  CHECK(s.rms_rad == Approx(kPi * std::sqrt((120 * 1e-4 + 4e-4) / 200)).margin(1e-9));
  CHECK(s.good_fraction == Approx(199.0 / 200));
  CHECK(s.carrier_rms_hz == Approx(0).margin(1e-9));
  CHECK(std::isnan(score(Strategy("none", 1e-6, 0)).rms_rad));
}

TEST_CASE("A night that is not given its start ends now, and nothing in it lies in the future") {
  for (const double hours : {1.0 / 60, 0.1, 3.0}) {
    auto options = red(1, hours);
    options.starts_at.clear();
    auto daemon = knowing(options, wire::now() - static_cast<wire::Time>(hours * 3600e9));
    rehearsed(options, daemon);
    const wire::Time now = wire::now();
    REQUIRE_FALSE(daemon.scans.empty());
    for (const auto& scan : daemon.scans) CHECK(*wire::parse_time(scan.at("taken_at").get<std::string>()) <= now);
    for (const auto& applied : daemon.applied) CHECK(*wire::parse_time(applied.at("applied_at").get<std::string>()) <= now);
  }
}

TEST_CASE("A night has 96 flops and 12 line scans, each as a laboratory takes them") {
  const auto options = red();
  auto daemon = knowing(options);
  const Night night = rehearsed(options, daemon);
  CHECK(night.minutes == 480);
  CHECK(night.drives[0].tally().flops == 96);
  CHECK(night.drives[0].tally().lines == 12);
  CHECK(daemon.questions == 1);
  REQUIRE(daemon.scans.size() == 108);
  std::set<std::string> names;
  std::string last;
  for (const auto& scan : daemon.scans) {
    names.insert(scan.at("scan_name").get<std::string>());
    CHECK(last < scan.at("taken_at").get<std::string>());
    last = scan.at("taken_at").get<std::string>();
    const auto& axis = scan.contains("duration_s") ? scan.at("duration_s") : scan.at("detuning_hz");
    CHECK(axis.size() == scan.at("counts").size());
    CHECK(scan.contains("pulse_s") == scan.contains("detuning_hz"));
    for (const auto& count : scan.at("counts")) CHECK((count >= 0 && count <= scan.at("shots")));
    CHECK(scan.at("ambient").at("temperature_c").get<double>() == Approx(21.7).margin(1.0));
  }
  CHECK(names.size() == 108);
  CHECK(daemon.scans.front().at("taken_at") == kEvening);
}

TEST_CASE("Every message of the rehearsal passes the decoder of the contract") {
  auto options = red(6, 2);
  options.apparatus.mishap_probability = 0.3;
  auto daemon = knowing(options);
  std::set<std::string> kinds;
  int sent = 0;
  const Ask decoding = [&](const std::string& kind, nlohmann::json body) {
    nlohmann::json message = body;
    message.update({{"proto", 1}, {"kind", kind}, {"id", "message-" + std::to_string(++sent)}});
    const auto packed = nlohmann::json::to_msgpack(message);
    const auto decoded = wire::decode_request(std::string(packed.begin(), packed.end()), {});
    INFO(message.dump() << (decoded.request ? "" : decoded.request.error().message));
    CHECK(decoded.request);
    kinds.insert(kind);
    return Result<nlohmann::json>(daemon.answer(kind, body));
  };
  REQUIRE(rehearse_night(options, decoding, always));
  CHECK(kinds == std::set<std::string>{"applied", "fit", "history", "status"});
}

TEST_CASE("Successive flops differ in span and in spacing by more than a tenth") {
  const auto even = flop_lengths(4e-6, 40, 0);
  const auto odd = flop_lengths(4e-6, 40, 1);
  CHECK(even.size() == 40);
  CHECK(odd.back() / even.back() > 1.1);
  CHECK(odd.front() / even.front() > 1.1);
  CHECK(even.back() == Approx(2.5 * 8e-6));
  CHECK(flop_lengths(4e-6, 40, 2) == even);
}

TEST_CASE("With a daemon that is always right, the pulse follows the drive to within a tick and five minutes of drift") {
  // Half a tick of 4 ns is 3.1 mrad at 125 kHz. In five minutes the walk moves by 1 % sqrt(1/12) = 0.29 %, 9.1 mrad, the warm-up by
  // up to 0.33 %, 10.5 mrad. Six times the walk on top of both holds for all 480 minutes in all but one night in a million. The rms
  // over the five minutes is near 5.7 mrad (walk), 4 (warm-up) and 1.8 (tick) in quadrature, 7.2. The line walks by 571 Hz in 40
  // minutes, 404 rms over them. The bounds leave room for luck; the seeds are fixed.
  for (const std::uint64_t seed : {1, 2, 3}) {
    const auto options = red(seed);
    auto daemon = knowing(options);
    const Night night = rehearsed(options, daemon);
    const auto strategies = night.drives[0].strategies();
    CHECK(score(strategies[0]).worst_rad < 0.069);
    CHECK(score(strategies[0]).rms_rad < 0.012);
    CHECK(score(strategies[1]).rms_rad < score(strategies[0]).rms_rad + 1e-3);
    CHECK(score(strategies[0]).carrier_rms_hz < 700);
    CHECK(night.drives[0].tally().intervals_true == 96);

    // Without recalibration the error is the drive's own drift: pi times its relative change, the carrier's offset aside (0.4 mrad
    // for 3.5 kHz).
    const Apparatus& truth = night.drives[0].apparatus();
    CHECK(strategies[2].errors_rad().front() == Approx(0).margin(1e-4));
    for (std::size_t minute = 0; minute < 480; minute += 60) {
      const double relative = truth.truth(60.0 * static_cast<double>(minute)).rabi_hz / truth.truth(0).rabi_hz - 1;
      CHECK(strategies[2].errors_rad()[minute] == Approx(kPi * relative).margin(4e-3));
    }
  }
}

TEST_CASE("A refused scan changes nothing with Halfturn and everything for who takes fits blindly") {
  const auto options = red(4);
  auto daemon = knowing(options);
  int flops = 0;
  daemon.spoil = [&](const nlohmann::json& scan, nlohmann::json& reply) {
    if (!scan.contains("duration_s") || ++flops % 8 != 0) return;
    reply["verdict"] = "refuse";
    reply["reasons"] = {{{"code", "alias"}, {"text", "two frequencies fit alike"}}, {{"code", "poor_fit"}, {"text", "scatter"}}};
    for (auto& pulse : reply["pulses"]) {
      pulse["verdict"] = "refuse";
      pulse["exact_s"] = pulse["exact_s"].get<double>() / 2;
      pulse["length_s"] = 4.00e-6;
    }
  };
  const Night night = rehearsed(options, daemon);
  const Tally& tally = night.drives[0].tally();
  CHECK(tally.refused == 12);
  CHECK(tally.refused_for == std::map<std::string, int>{{"alias", 12}});
  CHECK(tally.applied + tally.kept + tally.refused == 108);
  const auto strategies = night.drives[0].strategies();
  CHECK(score(strategies[0]).worst_rad < 0.1);
  CHECK(score(strategies[1]).worst_rad == Approx(kPi / 2).margin(0.1));
  // Twelve times five of 480 minutes with half the pulse: pi/2 sqrt(1/8).
  CHECK(score(strategies[1]).rms_rad == Approx(kPi / 2 * std::sqrt(1.0 / 8)).margin(0.02));
}

TEST_CASE("What was loaded is reported as applied, with every pulse and the carrier") {
  const auto options = red(5, 1);
  auto daemon = knowing(options);
  daemon.spoil = [](const nlohmann::json& scan, nlohmann::json& reply) {
    if (!scan.contains("duration_s")) return;
    reply["verdict"] = "keep";  // the scan's verdict is the most cautious of its pulses'
    reply["pulses"]["split"]["verdict"] = "keep";
    reply["pulses"]["split"]["length_s"] = 2.00e-6;
  };
  const Night night = rehearsed(options, daemon);
  REQUIRE(daemon.applied.size() == 14);  // 12 flops, 2 line scans
  CHECK(night.drives[0].tally().applied == 14);
  for (const auto& applied : daemon.applied) {
    CHECK(applied.at("drive") == "red");
    CHECK(applied.at("pulses").at("split") == 2.00e-6);
    CHECK(wire::parse_time(applied.at("applied_at").get<std::string>()).has_value());
  }
  CHECK(daemon.applied.back().at("pulses").at("flip").get<double>() == night.drives[0].strategies()[0].pulse_s);
  CHECK(daemon.applied.back().at("carrier_hz").get<double>() == night.drives[0].strategies()[0].carrier_hz);
  CHECK(daemon.applied.front().at("carrier_hz").get<double>() == options.apparatus.carrier_start_hz);
}

TEST_CASE("Equal seeds give equal nights, different seeds different ones") {
  const auto told = [](std::uint64_t seed) {
    const auto options = red(seed, 2);
    auto daemon = knowing(options);
    auto object = to_json(rehearsed(options, daemon));
    object.erase("wall_s");
    object["messages"] = daemon.scans;
    return object.dump();
  };
  CHECK(told(7) == told(7));
  CHECK(told(7) != told(8));
}

TEST_CASE("A night that cannot begin says what is wrong") {
  auto options = red();
  auto daemon = knowing(options);
  options.drive = "blue";
  auto night = rehearse_night(options, daemon.ask(), always);
  REQUIRE_FALSE(night);
  CHECK(night.error().code == "unknown_drive");
  CHECK(night.error().message == "the daemon has no drive 'blue'; it has: red");

  options = red();
  options.pulse = "flop";
  night = rehearse_night(options, daemon.ask(), always);
  REQUIRE_FALSE(night);
  CHECK(night.error().message == "the drive has no pulse 'flop'; it has: flip, split");

  options = red();
  options.hours = 0;
  night = rehearse_night(options, daemon.ask(), always);
  REQUIRE_FALSE(night);
  CHECK(night.error().where == "hours");

  options = red();
  options.starts_at = "yesterday";
  night = rehearse_night(options, daemon.ask(), always);
  REQUIRE_FALSE(night);
  CHECK(night.error().where == "starts_at");

  const Ask silent = [](const std::string&, nlohmann::json) -> Result<nlohmann::json> { return fault("timeout", "", "no reply"); };
  night = rehearse_night(red(), silent, always);
  REQUIRE_FALSE(night);
  CHECK(night.error().code == "timeout");
}

TEST_CASE("A night that is cut short keeps what it has") {
  const auto options = red(1, 2);
  auto daemon = knowing(options);
  int minutes = 0;
  const auto stopped = rehearse_night(options, daemon.ask(), [&](const Moment&) { return ++minutes <= 30; });
  REQUIRE(stopped);
  CHECK(stopped->interrupted);
  CHECK(stopped->minutes == 30);
  CHECK(stopped->drives[0].strategies()[0].errors_rad().size() == 30);

  int asked = 0;
  const auto broken = rehearse_night(
      options,
      [&](const std::string& kind, nlohmann::json body) -> Result<nlohmann::json> {
        if (++asked > 20) return fault("timeout", "", "no reply within 30 s");
        return daemon.answer(kind, body);
      },
      always);
  REQUIRE(broken);
  REQUIRE(broken->ended_by);
  CHECK(broken->ended_by->code == "timeout");
  CHECK(broken->minutes > 20);
  CHECK(to_json(*broken).at("ended_by").at("code") == "timeout");
}

TEST_CASE("A reply of the wrong shape ends the night with a fault and never takes a wrong length") {
  const auto options = red(1, 1);
  for (const auto& verdict : {nlohmann::json("maybe"), nlohmann::json(), nlohmann::json(3)}) {
    auto daemon = knowing(options);
    daemon.spoil = [&](const nlohmann::json&, nlohmann::json& reply) { reply["verdict"] = verdict; };
    const Night night = rehearsed(options, daemon);
    REQUIRE(night.ended_by);
    CHECK(night.ended_by->code == "bad_reply");
  }
  for (const auto& length : {nlohmann::json(), nlohmann::json("4 us"), nlohmann::json(-1e-6), nlohmann::json(0)}) {
    auto daemon = knowing(options);
    daemon.spoil = [&](const nlohmann::json&, nlohmann::json& reply) {
      for (auto& pulse : reply["pulses"]) pulse["length_s"] = pulse["exact_s"] = length;
    };
    const Night night = rehearsed(options, daemon);
    CHECK(night.drives[0].strategies()[0].pulse_s == 4.00e-6);
    CHECK(night.drives[0].strategies()[1].pulse_s == 4.00e-6);
  }
}

TEST_CASE("The table and the JSON tell the same night") {
  const auto options = red(3, 1);
  auto daemon = knowing(options);
  const Night night = rehearsed(options, daemon);
  std::ostringstream table;
  write_table(night, table);
  for (const char* part : {"1.00 h rehearsed from 2026-02-03T18:00:00Z, seed 3", "drive red, pulse flip", "with Halfturn", "without recalibration",
                           "every fit taken blindly", "14 scans: 12 flops, 2 line scans; 14 applied, 0 kept, 0 refused"}) {
    CHECK_THAT(table.str(), Catch::Contains(part));
  }
  const auto object = to_json(night);
  const auto& drive = object.at("drives").at(0);
  CHECK(drive.at("rotation_error").at("halfturn").at("rms_rad").get<double>() == score(night.drives[0].strategies()[0]).rms_rad);
  CHECK(drive.at("rotation_error").at("untouched").at("worst_rad").get<double>() > drive.at("rotation_error").at("blind").at("rms_rad").get<double>());
  CHECK(drive.at("scans").at("flops") == 12);
  CHECK(drive.at("truth").at("rabi_start_hz").get<double>() == Approx(0.5 / 3.99e-6));
}

TEST_CASE("Simulating eight hours costs less than five seconds of processor time") {
  const auto options = red();
  auto daemon = knowing(options);
  const auto start = std::clock();
  rehearsed(options, daemon);
  CHECK(static_cast<double>(std::clock() - start) / CLOCKS_PER_SEC < 5.0);
}
