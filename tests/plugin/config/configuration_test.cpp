// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/configuration.hpp"

#include <algorithm>
#include <cmath>
#include <fstream>
#include <random>
#include <sstream>
#include <utility>

#include "model/quantity/constants.hpp"
#include "plugin/wire/digest.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using config::read;

namespace {

constexpr double kTwoPi = constants::kTwoPi;

std::string faults(const std::string& text) {
  std::string out;
  for (const config::Diagnosis& one : read(text, "").faults) out += config::to_text(one, "f") + "\n";
  return out;
}

/// A configuration of one drive whose other keys stand in line 5.
std::string drive(const std::string& line) {
  return "format: 1\ndrives:\n  red:\n    pulses: {flip: {angle: pi, length: 4 us}}\n    " + line + "\n";
}

/// A configuration of one pulse, which begins at 4:20.
std::string pulse(const std::string& keys) { return "format: 1\ndrives:\n  red:\n    pulses: {flip: {" + keys + "}}\n"; }

std::string top(const std::string& line) {
  return "format: 1\n" + line + "\ndrives: {red: {pulses: {flip: {angle: pi, length: 4 us}}}}\n";
}

std::string text_of(const std::string& path) {
  std::ifstream stream(std::string(HALFTURN_SOURCE_DIR) + "/" + path, std::ios::binary);
  std::ostringstream out;
  out << stream.rdbuf();
  return out.str();
}

// The example of the contract.
const std::string kContract = R"(format: 1
sockets: {requests: "tcp://127.0.0.1:7411", feed: "tcp://127.0.0.1:7412", results: "tcp://127.0.0.1:7413", display: "127.0.0.1:7480"}
log: nights.db                # SQLite; relative to this file
drives:
  red:
    transition: Sr88 1S0 -> 3P1 m=0 pi                  # a catalogue name, or the numbers inline
    beam: {waist: 45 um}                                # optional: for power
    carrier_uncertainty: 2 kHz                          # how well the carrier is known to sit on the line
    readout: {floor: [0.02, 0.01], contrast: [0.93, 0.02]}   # optional: value and sigma known beforehand
    expect: {rabi: [10 kHz, 1 MHz]}                     # where the frequency must lie; decides which aliases are rivals
    dynamics: [undamped, dephasing, decay]              # optional: candidates; default: all that suit
    pulses:
      flip:  {angle: pi,   length: 4.00 us, tick: 8 ns, limits: [1 us, 20 us]}
      split: {angle: pi/2, length: 2.00 us, tick: 8 ns, limits: [0.5 us, 10 us], shape: {kind: square, edge: 60 ns}}
    switching: {dead_time: 0 ns, uncertainty: 20 ns}    # optional: how late the light follows the command
    accept: {max_step: 20 %, min_cycles: 0.75, max_angle_error: 100 mrad}
)";

}  // namespace

// An alias, an anchor or a second document hid every other fault.
TEST_CASE("a pulse may be adjusted in amplitude, its length being fixed") {
  const auto one = [](const std::string& keys) { return read(pulse(keys), "").configuration.value().drives.at("red").pulses.at(0); };
  const auto flip = one("angle: pi, length: 4 us, adjust: amplitude, amplitude: 0.5, step: 0.001, limits: [0.1, 0.9], shape: {kind: square, edge: 3 us}");
  CHECK(flip.adjust == recalibrate::Adjust::amplitude);
  CHECK(flip.length_s == Approx(4e-6));
  CHECK(flip.amplitude == 0.5);
  CHECK(flip.configured() == 0.5);
  CHECK(flip.step == 0.001);
  CHECK(flip.minimum == 0.1);
  CHECK(flip.maximum == 0.9);
  CHECK(flip.area_factor == 1.0);
  // Without limits: a quarter to four times, but no more than 1 where the amplitude is a part of 1.
  const auto half = one("angle: pi, length: 4 us, adjust: amplitude, amplitude: 0.5");
  CHECK(half.minimum == 0.125);
  CHECK(half.maximum == 1.0);
  const auto volts = one("angle: pi, length: 4 us, adjust: amplitude, amplitude: 2.5");
  CHECK(volts.maximum == 10.0);
  CHECK(volts.step == 0.0);
  CHECK(one("angle: pi, length: 4 us, adjust: length").adjust == recalibrate::Adjust::length);
}

TEST_CASE("The example of pulses adjusted in amplitude is sound") {
  const auto reading = read(text_of("examples/amplitude.yaml"), "");
  REQUIRE(reading.configuration);
  for (const auto& pulse : reading.configuration->drives.at("red").pulses) {
    CHECK(pulse.adjust == recalibrate::Adjust::amplitude);
    CHECK(pulse.length_s == Approx(4e-6));
    CHECK(pulse.step == 0.001);
  }
}

TEST_CASE("faults of pulses that are adjusted in amplitude") {
  const std::string flip = "angle: pi, length: 4 us, adjust: amplitude, ";
  CHECK(faults(pulse(flip + "step: 0.001")) ==
        "f:4:14: drives.red.pulses.flip.amplitude: found nothing, expected the relative drive amplitude in force, such as 0.5\n");
  CHECK(faults(pulse(flip + "amplitude: 0.5, tick: 8 ns")) ==
        "f:4:87: drives.red.pulses.flip.tick: found a tick, expected none: the length of a pulse with adjust: amplitude is fixed; `step` "
        "is that of its amplitude\n");
  CHECK(faults(pulse(flip + "amplitude: 0.5, limits: [0.6, 0.9]")) ==
        "f:4:89: drives.red.pulses.flip.limits: found limits that do not hold the amplitude of 0.50000, expected limits around it\n");
  CHECK(faults(pulse(flip + "amplitude: 0.5, limits: [1 us, 20 us]")).find("found \"1 us\"") != std::string::npos);
  CHECK(faults(pulse(flip + "amplitude: 0.5, step: 0.4, limits: [0.45, 0.55]")) ==
        "f:4:87: drives.red.pulses.flip.step: found \"0.4\", of which no multiple lies within the limits, expected a smaller step\n");
  CHECK(faults(pulse(flip + "amplitude: -1")) == "f:4:76: drives.red.pulses.flip.amplitude: found \"-1\", expected a number above 0\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, amplitude: 0.5, step: 0.01")) ==
        "f:4:57: drives.red.pulses.flip.amplitude: found \"amplitude\" in a pulse whose length is adjusted, expected adjust: amplitude "
        "beside it\n"
        "f:4:68: drives.red.pulses.flip.step: found \"step\" in a pulse whose length is adjusted, expected adjust: amplitude beside it\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, adjust: phase")) ==
        "f:4:54: drives.red.pulses.flip.adjust: found \"phase\", expected length or amplitude\n");
}

TEST_CASE("Faults of the document's form hide no others") {
  const std::string faulty = "    expct: {rabi: [10 kHz, 1 MHz]}\n    carrier_uncertainty: 2\n";
  const std::string others[] = {"f:6:5: drives.red.expct: found the unknown key", "f:7:26: drives.red.carrier_uncertainty: found"};
  const std::string head = "format: 1\ndrives:\n  red:\n    pulses: {flip: {angle: pi, length: 4 us}}\n";
  for (const auto& [form, fault] : {std::pair<std::string, std::string>{"    accept: *usual", "f:5:13: drives.red.accept: found an alias"},
                                    {"    transition: &line Sr88", "f:5:17: drives.red.transition: found an anchor"},
                                    {"    pulses: {flip: {angle: pi, length: 4 us}}", "f:5:5: drives.red.pulses: found the key"}}) {
    const auto said = faults(head + form + "\n" + faulty);
    INFO(said);
    CHECK(said.find(fault) != std::string::npos);
    for (const auto& other : others) CHECK(said.find(other) != std::string::npos);
  }
  const auto said = faults(head + "    impurity: 0.0\n" + faulty + "---\nformat: 1\n");
  INFO(said);
  CHECK(said.find("f:8:1: found a second document") != std::string::npos);
  for (const auto& other : others) CHECK(said.find(other) != std::string::npos);
  CHECK(faults("format: 1\ndrives: *all\n") == "f:2:9: drives: found an alias (*), expected the value itself\n");
}

TEST_CASE("The contract's configuration is read to the letter") {
  const auto reading = read(kContract, "/somewhere");
  REQUIRE(reading.faults.empty());
  REQUIRE(reading.configuration.has_value());
  const config::Configuration& c = *reading.configuration;
  CHECK(c.sockets.requests == "tcp://127.0.0.1:7411");
  CHECK(c.sockets.feed == "tcp://127.0.0.1:7412");
  CHECK(c.sockets.results == "tcp://127.0.0.1:7413");
  CHECK(c.sockets.display == "127.0.0.1:7480");
  CHECK(c.log_path == "/somewhere/nights.db");
  CHECK_FALSE(c.insecure);
  CHECK(c.text == kContract);
  REQUIRE(c.drives.size() == 1);
  const config::Drive& red = c.drives.at("red");
  CHECK(red.name == "red");
  REQUIRE(red.transition.has_value());
  CHECK(red.transition->wavelength_m == Approx(689.449e-9).epsilon(1e-5));  // 1S0 - 3P1 of strontium, 689 nm
  CHECK(red.waist_m == Approx(45e-6));
  CHECK(*red.carrier_uncertainty == Approx(kTwoPi * 2000.0));
  CHECK(red.floor->mean == 0.02);
  CHECK(red.floor->sigma == 0.01);
  CHECK(red.contrast->mean == 0.93);
  CHECK(red.contrast->sigma == 0.02);
  CHECK(red.expect->low == Approx(kTwoPi * 1e4));
  CHECK(red.expect->high == Approx(kTwoPi * 1e6));
  REQUIRE(red.dynamics.has_value());
  CHECK(red.dynamics->has(infer::Dynamics::undamped));
  CHECK(red.dynamics->has(infer::Dynamics::dephasing));
  CHECK(red.dynamics->has(infer::Dynamics::decay));
  CHECK_FALSE(red.dynamics->has(infer::Dynamics::leak));
  REQUIRE(red.pulses.size() == 2);
  CHECK(red.pulses[0].name == "flip");
  CHECK(red.pulses[0].angle_rad == Approx(constants::kPi));
  CHECK(red.pulses[0].length_s == Approx(4e-6));
  CHECK(red.pulses[0].step == Approx(8e-9));
  CHECK(red.pulses[0].minimum == Approx(1e-6));
  CHECK(red.pulses[0].maximum == Approx(20e-6));
  CHECK(red.pulses[0].area_factor == 1.0);
  CHECK(red.pulses[1].name == "split");
  CHECK(red.pulses[1].angle_rad == Approx(constants::kPi / 2.0));
  CHECK(red.pulses[1].minimum == Approx(0.5e-6));
  CHECK(red.dead_time->mean == 0.0);
  CHECK(red.dead_time->sigma == Approx(20e-9));
  CHECK(red.accept.max_step == Approx(0.20));
  CHECK(red.accept.min_cycles == 0.75);
  CHECK(red.accept.max_angle_error_rad == Approx(0.100));
}

TEST_CASE("What is left out has the defaults of the contract") {
  const auto reading = read(text_of("examples/minimal.yaml"), "");
  REQUIRE(reading.faults.empty());
  const config::Configuration& c = *reading.configuration;
  CHECK(c.sockets.requests == "tcp://127.0.0.1:7411");
  CHECK(c.log_path == "halfturn.db");
  const config::Drive& red = c.drives.at("red");
  CHECK_FALSE(red.transition.has_value());
  CHECK_FALSE(red.carrier_uncertainty.has_value());
  CHECK_FALSE(red.expect.has_value());
  CHECK_FALSE(red.dynamics.has_value());
  CHECK_FALSE(red.dead_time.has_value());
  CHECK(red.lost_reads == dynamics::LostReads::dark);
  CHECK(red.impurity == 0.0);
  CHECK(red.pulses[0].step == 0.0);
  CHECK(red.pulses[0].minimum == Approx(1e-6));
  CHECK(red.pulses[0].maximum == Approx(16e-6));
  CHECK(red.accept.max_step == 0.20);
  CHECK(red.accept.max_angle_error_rad == 0.100);
  CHECK(red.accept.min_evidence == 30.0);
  CHECK(red.accept.rival_margin == 25.0);
  CHECK(red.accept.min_p_value == 1e-4);
  CHECK(red.accept.max_carrier_step == 0.5);
  CHECK(red.accept.max_carrier_error == 0.05);
}

TEST_CASE("The example of a night shows every key, and is sound") {
  const auto reading = config::read_file(std::string(HALFTURN_SOURCE_DIR) + "/examples/first-night.yaml");
  REQUIRE(reading.faults.empty());
  const config::Configuration& c = *reading.configuration;
  CHECK(c.log_path == std::string(HALFTURN_SOURCE_DIR) + "/examples/nights.db");
  CHECK(c.drives.at("red").impurity == Approx(0.005));
  CHECK(c.drives.at("red").accept.min_p_value == 1e-4);
}

TEST_CASE("Faults of the whole are all found at once, with their places") {
  CHECK(faults("format: 2\nsocket: {}\nlog: ~\ninsecure: yes\ndrives: {}\n") ==
        "f:1:9: format: found \"2\", expected 1\n"
        "f:2:1: socket: found the unknown key \"socket\", expected a known key: the nearest is \"sockets\"\n"
        "f:3:1: log: found nothing, expected the path of a file\n"
        "f:4:11: insecure: found \"yes\", expected true or false, without quotes\n"
        "f:5:9: drives: found an empty map, expected at least one drive by its name\n");
  CHECK(faults("log: x\n") ==
        "f:1:1: format: found nothing, expected format: 1\nf:1:1: drives: found nothing, expected at least one drive by its "
        "name\n");
  CHECK(faults("- a\n") == "f:1:1: found a list, expected a map with keys such as format, sockets or log\n");
  CHECK(faults(top("insecure: y")) == "f:2:11: insecure: found \"y\", expected true or false, without quotes\n");
  CHECK(faults(top("insecure: \"true\"")) == "f:2:11: insecure: found \"true\", expected true or false, without quotes\n");
  CHECK(faults(top("log: ~/nights.db")) == "f:2:6: log: found \"~/nights.db\", expected the path of a file, without ~\n");
  CHECK(faults(top("log: [a]")) == "f:2:6: log: found a list, expected the path of a file\n");
  CHECK(faults(top("secret_keys: x")) ==
        "f:2:1: secret_keys: found the key \"secret_keys\", which is not available in this version, expected none\n");
  CHECK(faults("format: 1\ndrives:\n  red two: {pulses: {flip: {angle: pi, length: 4 us}}}\n") ==
        "f:3:3: drives.red two: found the name \"red two\", expected 1 to 48 of A-Z a-z 0-9 _ -\n");
  CHECK(faults("format: 1\ndrives:\n  red:\n") ==
        "f:3:3: drives.red: found nothing, expected a map with keys such as transition, beam or carrier_uncertainty\n");
  CHECK(faults(top("format: 1")) ==
        "f:2:1: format: found the key \"format\" a second time (first in line 1), expected it once\n");
}

TEST_CASE("Sockets are endpoints of their own, and on loopback") {
  const std::string closed =
      ", expected a loopback address such as 127.0.0.1. Binding an address that is not loopback needs keys, or insecure: "
      "true; "
      "keys are not available in this version\n";
  CHECK(faults(top("sockets: {requests: \"tcp://0.0.0.0:7411\"}")) ==
        "f:2:21: sockets.requests: found \"tcp://0.0.0.0:7411\"" + closed);
  CHECK(faults(top("sockets: {results: \"tcp://*:7411\", requests: \"tcp://127.0.0.1:1\"}")) ==
        "f:2:20: sockets.results: found \"tcp://*:7411\"" + closed);
  CHECK(faults(top("sockets: {display: \"lab.example:7480\"}")) ==
        "f:2:20: sockets.display: found \"lab.example:7480\"" + closed);
  CHECK(faults(top("sockets: {display: \"127.evil.example:7480\"}")) ==
        "f:2:20: sockets.display: found \"127.evil.example:7480\"" + closed);
  CHECK(faults(top("insecure: true\nsockets: {requests: \"tcp://0.0.0.0:7411\", display: \"0.0.0.0:80\"}")).empty());
  CHECK(faults(top("sockets: {requests: \"tcp://127.0.0.1:*\", feed: \"tcp://127.0.0.1:*\", results: \"tcp://[::1]:0\", "
                   "display: \"localhost:0\"}"))
            .empty());
  CHECK(faults(top("sockets: {requests: \"ipc:///run/halfturn/requests\"}")).empty());
  CHECK(faults(top("sockets: {requests: \"7411\", display: \"tcp://127.0.0.1:7480\"}")) ==
        "f:2:21: sockets.requests: found \"7411\", expected an endpoint such as \"tcp://127.0.0.1:7411\"\n"
        "f:2:38: sockets.display: found \"tcp://127.0.0.1:7480\", expected HOST:PORT, such as 127.0.0.1:7480\n");
  CHECK(
      faults(top("sockets: {requests: \"tcp://127.0.0.1:70000\"}")) ==
      "f:2:21: sockets.requests: found \"tcp://127.0.0.1:70000\", expected an endpoint such as \"tcp://127.0.0.1:7411\"\n");
  CHECK(faults(top("sockets: {feed: \"tcp://127.0.0.1:7411\"}")) ==
        "f:2:17: sockets.feed: found the address of sockets.requests again, expected one of its own\n");
  CHECK(faults(top("sockets: {requests: \"tcp://127.0.0.1:7480\"}")) ==
        "f:2:21: sockets.requests: found the address of sockets.display again, expected one of its own\n");
  CHECK(faults(top("sockets: {feed: {connect: \"tcp://127.0.0.1:9\"}}")) ==
        "f:2:17: sockets.feed: found a map; a feed that connects to the experiment's own PUB is not available in this "
        "version, expected an endpoint\n");
}

TEST_CASE("Faults of a drive say where and what") {
  CHECK(faults(drive("beam: {wiast: 45 um}")) ==
        "f:5:5: drives.red.beam.waist: found nothing, expected the 1/e^2 radius of the beam, such as 45 um\n"
        "f:5:12: drives.red.beam.wiast: found the unknown key \"wiast\", expected a known key: the nearest is \"waist\"\n");
  CHECK(faults(drive("beam: {waist: 45}")) ==
        "f:5:19: drives.red.beam.waist: found \"45\", expected a length with its unit, such as 45 um (or nm, mm, m)\n");
  CHECK(faults(drive("beam: {waist: 0 um}")) ==
        "f:5:19: drives.red.beam.waist: found \"0 um\", expected a length above 0\n");
  CHECK(faults(drive("carrier_uncertainty: 2000")) ==
        "f:5:26: drives.red.carrier_uncertainty: found \"2000\", expected a frequency with its unit, such as 2000 kHz (or "
        "Hz, MHz, GHz)\n");
  CHECK(faults(drive("carrier_uncertainty: [1 kHz]")) ==
        "f:5:26: drives.red.carrier_uncertainty: found a list, expected a frequency with its unit, such as 12.5 kHz (or Hz, "
        "MHz, GHz)\n");
  CHECK(faults(drive("carrier_uncertainty: -1 kHz")) ==
        "f:5:26: drives.red.carrier_uncertainty: found \"-1 kHz\", expected a frequency of at least 0\n");
  CHECK(faults(drive("carier_uncertainty: 1 kHz")) ==
        "f:5:5: drives.red.carier_uncertainty: found the unknown key \"carier_uncertainty\", expected a known key: the "
        "nearest is \"carrier_uncertainty\"\n");
  CHECK(faults(drive("expect: {rabi: [1 MHz, 10 kHz]}")) ==
        "f:5:20: drives.red.expect.rabi: found a lower end that is not below the upper one, expected [lowest, highest]\n");
  CHECK(faults(drive("expect: {rabi: [1 MHz]}")) ==
        "f:5:20: drives.red.expect.rabi: found a list of 1, expected the lowest and the highest Rabi frequency, such as [10 "
        "kHz, 1 MHz]\n");
  CHECK(faults(drive("expect: {rabi: [0 Hz, 1]}")) ==
        "f:5:21: drives.red.expect.rabi[0]: found \"0 Hz\", expected a frequency above 0\n"
        "f:5:27: drives.red.expect.rabi[1]: found \"1\", expected a frequency with its unit, such as 1 kHz (or Hz, MHz, "
        "GHz)\n");
  CHECK(faults(drive("dynamics: [undamped, dephased, undamped]")) ==
        "f:5:26: drives.red.dynamics[1]: found \"dephased\", expected undamped, dephasing, decay, leak, decay_dephasing, "
        "leak_dephasing, spread, doppler, cloud or thermal\n"
        "f:5:36: drives.red.dynamics[2]: found \"undamped\" a second time, expected it once\n");
  CHECK(faults(drive("dynamics: []")) ==
        "f:5:15: drives.red.dynamics: found an empty list, expected a list such as [undamped, dephasing]\n");
  CHECK(faults(drive("dynamics: [undamped, thermal]")) ==
        "f:5:15: drives.red.dynamics: found thermal, which needs the drive's motion, expected it beside, such as motion: "
        "{lamb_dicke: 0.08}\n");
  CHECK(faults(drive("switching: {dead_time: 0, uncertainty: 0x14 ns}")) ==
        "f:5:28: drives.red.switching.dead_time: found \"0\", expected a time with its unit, such as 0 us (or ns, ms, s)\n"
        "f:5:44: drives.red.switching.uncertainty: found \"0x14 ns\", expected a time with its unit, such as 4 us (or ns, "
        "ms, s)\n");
  CHECK(faults(drive("lost_reads: grey")) == "f:5:17: drives.red.lost_reads: found \"grey\", expected dark or bright\n");
  CHECK(faults(drive("impurity: 60 %")) ==
        "f:5:15: drives.red.impurity: found \"60 %\", expected a fraction between 0 and 0.5\n");
  CHECK(
      faults(drive("pulses: {}"))
          .find("f:5:5: drives.red.pulses: found the key \"pulses\" a second time (first in line 4), expected it once\n") ==
      0);
}

TEST_CASE("What is known of the readout must be possible") {
  CHECK(faults(drive("readout: {floor: [0.02, 0.01], contrast: [0.99, 0.02]}")) ==
        "f:5:46: drives.red.readout.contrast: found floor + contrast outside 0 to 1, expected fractions of counts (or kind: "
        "signal, kind: photons)\n");
  CHECK(faults(drive("readout: {floor: [1.2, 0.01]}")) ==
        "f:5:22: drives.red.readout.floor: found \"1.2\", expected a fraction of counts between 0 and 1\n");
  CHECK(faults(drive("readout: {contrast: [-1.5, 0.01]}")) ==
        "f:5:25: drives.red.readout.contrast: found \"-1.5\", expected a fraction of counts between -1 and 1\n");
  CHECK(faults(drive("readout: {contrast: [0, 0.01]}")) ==
        "f:5:25: drives.red.readout.contrast: found a contrast of 0, expected one that shows the oscillation\n");
  CHECK(faults(drive("readout: {floor: 0.02}")) ==
        "f:5:22: drives.red.readout.floor: found \"0.02\", expected its value and sigma, such as [0.02, 0.01]\n");
  CHECK(faults(drive("readout: {floor: [0.02, -0.01]}")) ==
        "f:5:29: drives.red.readout.floor[1]: found \"-0.01\", expected a fraction of at least 0\n");
  CHECK(faults(drive("readout: {floor: [0.02, 0.01], contrast: [0.98, 0.02]}")).empty());
  CHECK(faults(drive("readout: {floor: [0.98, 0.01], contrast: [-0.9, 0.02]}")).empty());
  const auto photons = read(drive("readout: {kind: photons, floor: [0.5, 0.1], contrast: [20, 1]}"), "");
  REQUIRE(photons.configuration.has_value());
  CHECK(photons.configuration->drives.at("red").readout_kind == wire::ReadoutKind::poisson);
  CHECK(photons.configuration->drives.at("red").contrast->mean == 20.0);
}

TEST_CASE("When a fit is believed is bounded by sense") {
  CHECK(faults(drive("accept: {max_step: 20}")) ==
        "f:5:24: drives.red.accept.max_step: found \"20\", expected a fraction above 0 and at most 1\n");
  CHECK(faults(drive("accept: {min_cycles: 0123}")) ==
        "f:5:26: drives.red.accept.min_cycles: found \"0123\", expected a number without a unit, such as 0.5\n");
  CHECK(faults(drive("accept: {max_angle_error: 5 %}")) ==
        "f:5:31: drives.red.accept.max_angle_error: found \"5 %\" (a percentage), expected an angle with its unit, such as "
        "5 mrad (or rad, deg, pi/2)\n");
  CHECK(faults(drive("accept: {min_p_value: 1}")) ==
        "f:5:27: drives.red.accept.min_p_value: found \"1\", expected a number of at least 0 and below 1\n");
  CHECK(faults(drive("accept: {max_setp: 1}")) ==
        "f:5:14: drives.red.accept.max_setp: found the unknown key \"max_setp\", expected a known key: the nearest is "
        "\"max_step\"\n");
}

TEST_CASE("Faults of a pulse say where and what") {
  CHECK(faults(pulse("")) ==
        "f:4:14: drives.red.pulses.flip.angle: found nothing, expected the angle of the pulse, such as pi/2\n"
        "f:4:14: drives.red.pulses.flip.length: found nothing, expected the length in force, such as 4 us\n");
  CHECK(faults(pulse("angle: 180, length: 4 us")) ==
        "f:4:28: drives.red.pulses.flip.angle: found \"180\", expected an angle with its unit, such as 180 mrad (or rad, "
        "deg, pi/2)\n");
  CHECK(faults(pulse("angle: -pi, length: 4 us")) ==
        "f:4:28: drives.red.pulses.flip.angle: found \"-pi\", expected an angle above 0 and at most 100 pi\n");
  CHECK(faults(pulse("angle: pi, length: 4 um")) ==
        "f:4:40: drives.red.pulses.flip.length: found \"4 um\" (a length), expected a time with its unit, such as 4 us (or "
        "ns, ms, s)\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, limits: [5 us, 20 us]")) ==
        "f:4:54: drives.red.pulses.flip.limits: found limits that do not hold the length of 4.0000 \u00b5s, expected limits "
        "around it\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, limits: [5 us, 2 us]")) ==
        "f:4:54: drives.red.pulses.flip.limits: found a lower end that is not below the upper one, expected [shortest, "
        "longest]\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, limits: 5 us")) ==
        "f:4:54: drives.red.pulses.flip.limits: found \"5 us\", expected the shortest and the longest length that may be "
        "proposed, such as [1 us, 20 us]\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, tick: 3 us, limits: [3.5 us, 5 us]")) ==
        "f:4:52: drives.red.pulses.flip.tick: found \"3 us\", of which no multiple lies within the limits, expected a "
        "shorter tick\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, tick: -8 ns")) ==
        "f:4:52: drives.red.pulses.flip.tick: found \"-8 ns\", expected a time of at least 0\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, shape: {edge: 60 ns}")) ==
        "f:4:46: drives.red.pulses.flip.shape.kind: found nothing, expected square, gaussian, blackman or raised_cosine\n");
  CHECK(
      faults(pulse("angle: pi, length: 4 us, shape: {kind: sqare}")) ==
      "f:4:60: drives.red.pulses.flip.shape.kind: found \"sqare\", expected square, gaussian, blackman or raised_cosine\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, shape: {kind: square, edge: 2 us}")) ==
        "f:4:74: drives.red.pulses.flip.shape.edge: found \"2 us\", expected an edge of at most the shortest pulse, 1.0000 "
        "\u00b5s\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, shape: {kind: gaussian}")) ==
        "f:4:46: drives.red.pulses.flip.shape.width: found nothing, expected where the Gaussian is cut: the whole pulse "
        "over its length at half amplitude, such as 3\n");
  CHECK(faults(pulse("angle: pi, length: 4 us, shape: {kind: blackman, width: 3}")) ==
        "f:4:77: drives.red.pulses.flip.shape.width: found a width, expected none: only a Gaussian is cut\n");
  CHECK(faults(pulse("angle: pi, length:4 us")) ==
        "f:4:14: drives.red.pulses.flip.length: found nothing, expected the length in force, such as 4 us\n"
        "f:4:32: drives.red.pulses.flip.length:4 us: found the unknown key \"length:4 us\", expected a known key: the "
        "nearest is \"length\"; a space must follow the colon\n");
}

// Integrated by hand from the windows' definitions; 1.0645 is sqrt(pi / (4 ln 2)), common practice of the trade.
TEST_CASE("The area of a pulse goes with its shape") {
  const auto factor = [](const std::string& shape) {
    const auto reading = read(pulse("angle: pi, length: 4 us, shape: {" + shape + "}"), "");
    REQUIRE(reading.configuration.has_value());
    return reading.configuration->drives.at("red").pulses[0].area_factor;
  };
  CHECK(factor("kind: square, edge: 100 ns") == 1.0);
  CHECK(factor("kind: raised_cosine") == 1.0);
  // Sum over a fine grid of 0.42 - 0.5 cos(2 pi x) + 0.08 cos(4 pi x), and of where it exceeds one half.
  double area = 0.0, width = 0.0;
  const int points = 1'000'000;
  for (int i = 0; i < points; ++i) {
    const double phase = kTwoPi * (i + 0.5) / points;
    const double value = 0.42 - 0.5 * std::cos(phase) + 0.08 * std::cos(2.0 * phase);
    area += value / points;
    width += (value > 0.5 ? 1.0 : 0.0) / points;
  }
  CHECK(factor("kind: blackman") == Approx(area / width).epsilon(1e-5));
  CHECK(factor("kind: gaussian, width: 20") == Approx(1.0644670194312262).epsilon(1e-12));
  double sum = 0.0;  // the whole pulse is 2 lengths: exp(-4 ln 2 x^2) from -1 to 1
  for (int i = 0; i < points; ++i) {
    const double x = -1.0 + 2.0 * (i + 0.5) / points;
    sum += std::exp(-4.0 * std::log(2.0) * x * x) * 2.0 / points;
  }
  CHECK(factor("kind: gaussian, width: 2") == Approx(sum).epsilon(1e-9));
}

TEST_CASE("Transitions are names of the catalogue or numbers") {
  const std::string unknown = faults(drive("transition: Sr88 1S0 -> 3P9 m=0 pi"));
  CHECK(
      unknown.find(
          "f:5:17: drives.red.transition: found \"Sr88 1S0 -> 3P9 m=0 pi\": the catalogue has no line 1S0 -> 3P9 of Sr88") ==
      0);
  CHECK(unknown.find("Sr88 1S0 -> 3P1 m=0 pi") != std::string::npos);
  CHECK(faults(drive("transition: [a]")) ==
        "f:5:17: drives.red.transition: found a list, expected the name of a transition, or a map with its numbers\n");
  const auto stated = read(drive("transition: {wavelength: 780.241 nm, linewidth: 6.0666 MHz, moment: 2.5377e-29 C m}"), "");
  REQUIRE(stated.configuration.has_value());
  CHECK(*stated.configuration->drives.at("red").transition->dipole_C_m == Approx(2.5377e-29));
  // Steck, "Rubidium 85 D Line Data", tables 4 and 7: the cycling dipole is 2.534 44(37)e-29 C m.
  const auto closed =
      read(drive("transition: {wavelength: 780.241368271 nm, lifetime: 26.2348 ns, nuclear_spin: 5/2, polarisation: sigma+, "
                 "lower: {J: 1/2, F: 3, m: 3}, upper: {J: 3/2, F: 4, m: 4}}"),
           "");
  REQUIRE(closed.faults.empty());
  CHECK(*closed.configuration->drives.at("red").transition->dipole_C_m == Approx(2.53444e-29).epsilon(2e-6));
  CHECK(faults(drive("transition: {wavelength: 780 nm, kind: dipole, lower: {J: 1/3}, upper: {F: 2}}")) ==
        "f:5:44: drives.red.transition.kind: found \"dipole\", expected electric_dipole, magnetic_dipole, "
        "electric_quadrupole, two_photon or induced\n"
        "f:5:63: drives.red.transition.lower.J: found \"1/3\", expected a whole or half number, such as 3/2, of at least 0\n"
        "f:5:69: drives.red.transition.upper.J: found nothing, expected the level's J, such as 3/2\n");
  CHECK(faults(drive("transition: {wavelength: 780 nm}"))
            .find("f:5:17: drives.red.transition: found too little for a transition: no linewidth") == 0);
  // 780.03 nm is the wavelength in air of a line at 384.2304 THz.
  CHECK(faults(drive("transition: {wavelength: 780.03 nm, frequency: 384.2304 THz, moment: 2 e a0}"))
            .find("f:5:30: drives.red.transition.wavelength: found") == 0);
  // A comma ends a plain scalar inside braces.
  const std::string comma =
      faults("format: 1\ndrives: {red: {transition: Rb87 D2 F=2, m=2 -> m=3, pulses: {flip: {angle: pi, length: 4 us}}}}\n");
  CHECK(comma.find("f:2:41: drives.red.m=2 -> m=3: found the unknown key \"m=2 -> m=3\"") != std::string::npos);
  CHECK(comma.find("inside { } a comma ends a value unless the value is in quotes\n") != std::string::npos);
}

TEST_CASE("The fingerprint follows the text") {
  const auto one = read(drive("impurity: 1 %"), ""), other = read(drive("impurity: 2 %"), "");
  REQUIRE(one.configuration.has_value());
  REQUIRE(other.configuration.has_value());
  CHECK(one.configuration->fingerprint == wire::fingerprint(drive("impurity: 1 %")));
  CHECK(one.configuration->fingerprint == read(drive("impurity: 1 %"), "/x").configuration->fingerprint);
  CHECK(one.configuration->fingerprint != other.configuration->fingerprint);
}

TEST_CASE("A file that cannot be read is a fault without a place") {
  const auto missing = config::read_file("no/such/file.yaml");
  REQUIRE(missing.faults.size() == 1);
  CHECK(config::to_text(missing.faults[0], "no/such/file.yaml") ==
        "no/such/file.yaml: found no file that can be read, expected one; look at its name and permissions");
  CHECK(config::read_file(HALFTURN_SOURCE_DIR).faults.size() == 1);
}

// Seeded. Whatever is done to a sound configuration, it is read or refused with a place inside the text.
TEST_CASE("Mutilated configurations are read or refused, never worse") {
  const std::string whole[] = {kContract, text_of("examples/first-night.yaml")};
  const std::string pieces[] = {
      "[",     "]",     "{",           "}",    ":",         ": ",       ",",    "\"",
      "'",     "&a ",   "*a",          "!!x ", "- ",        "? ",       "|",    ">",
      "\n",    "\t",    "#",           "~",    "0x1",       "\xC2\xB5", "\xFF", std::string(1, '\0'),
      "---\n", "...\n", "%YAML 1.2\n", "<<: ", "1e999 kHz", "-pi",      "nan",  "  "};
  std::mt19937 random(20260203);
  const auto below = [&](std::size_t n) { return std::uniform_int_distribution<std::size_t>(0, n - 1)(random); };
  int refused = 0;
  for (int round = 0; round < 3000; ++round) {
    std::string text = whole[below(2)];
    for (std::size_t change = 0, changes = 1 + below(3); change < changes; ++change) {
      const std::size_t at = below(text.size());
      switch (below(5)) {
        case 0: text.erase(at, 1 + below(20)); break;
        case 1: text.insert(at, pieces[below(std::size(pieces))]); break;
        case 2: text[at] = static_cast<char>(below(256)); break;
        case 3: {
          const std::size_t from = below(text.size());
          text.insert(at, text.substr(from, below(60)));
          break;
        }
        default: text.resize(at + 1); break;
      }
    }
    const auto reading = read(text, "");
    REQUIRE(reading.configuration.has_value() == reading.faults.empty());
    const int lines = 1 + static_cast<int>(std::count(text.begin(), text.end(), '\n'));
    for (const config::Diagnosis& one : reading.faults) {
      REQUIRE(one.line >= 1);
      REQUIRE(one.line <= lines);
      REQUIRE(one.column >= 1);
      REQUIRE(one.message.find("found") == 0);
    }
    refused += reading.configuration ? 0 : 1;
  }
  CHECK(refused > 500);  // most changes hit a comment or a value that stays possible
}

TEST_CASE("Motional modes are read, one or a list of them") {
  const auto read_one = read(drive("motion: {lamb_dicke: 0.08}"), "");
  REQUIRE(read_one.configuration.has_value());
  const auto& one = read_one.configuration->drives.at("red").motion;
  REQUIRE(one.size() == 1);
  CHECK(one[0].lamb_dicke == 0.08);
  CHECK(one[0].sideband == 0);
  CHECK(one[0].phonon_ratio == 1.0);
  const auto read_two =
      read(drive("motion: [{lamb_dicke: 0.08, sideband: -1}, {lamb_dicke: 0.05, phonon_ratio: 2.5}]\n    dynamics: [thermal]"), "");
  REQUIRE(read_two.configuration.has_value());
  const auto& red = read_two.configuration->drives.at("red");
  REQUIRE(red.motion.size() == 2);
  CHECK(red.motion[0].sideband == -1);
  CHECK(red.motion[1].lamb_dicke == 0.05);
  CHECK(red.motion[1].phonon_ratio == 2.5);
  CHECK(red.dynamics->has(infer::Dynamics::thermal));
}

TEST_CASE("Motional modes that cannot be are faults") {
  CHECK(faults(drive("motion: {sideband: 1}")) ==
        "f:5:5: drives.red.motion.lamb_dicke: found nothing, expected the Lamb-Dicke parameter of the mode, such as 0.08\n");
  CHECK(faults(drive("motion: {lamb_dicke: 0, sideband: 2, phonon_ratio: -1}")) ==
        "f:5:26: drives.red.motion.lamb_dicke: found \"0\", expected a number above 0 and at most 2\n"
        "f:5:39: drives.red.motion.sideband: found \"2\", expected a whole number from -1 to 1\n"
        "f:5:56: drives.red.motion.phonon_ratio: found \"-1\", expected a number above 0\n");
  CHECK(faults(drive("motion: 0.08")) == "f:5:13: drives.red.motion: found \"0.08\", expected a mode such as {lamb_dicke: 0.08}, or a list of them\n");
  CHECK(faults(drive("motion: []")) == "f:5:13: drives.red.motion: found an empty list, expected a mode such as {lamb_dicke: 0.08}, or a list of them\n");
}
