// SPDX-License-Identifier: Apache-2.0
// Scans of the drive amplitude through the whole service. What they count comes from the integrator of the simulated apparatus
// (plugin/rehearse/integrator.hpp), which shares nothing with model/.
#include <cmath>
#include <random>

#include "plugin/rehearse/integrator.hpp"
#include "plugin/wire/encode.hpp"
#include "tests/plugin/service/house.hpp"

using namespace halfturn;
using namespace halfturn::tests;

namespace {

constexpr double kTwoPi = 6.283185307179586;
constexpr wire::Time kMinute = 60'000'000'000;

std::shared_ptr<const config::Configuration> red_drive() {
  return configured(R"(format: 1
log: nights.db
drives:
  red:
    transition: Sr88 1S0 -> 3P1 m=0 pi
    carrier_uncertainty: 2 kHz
    expect: {rabi: [10 kHz, 1 MHz]}   # of flops; a scan of amplitudes begins at nothing
    pulses:
      flip:  {angle: pi, length: 4 us, adjust: amplitude, amplitude: 0.5, step: 0.0005, limits: [0.1, 0.9]}
      split: {angle: pi/2, length: 2.00 us, tick: 8 ns, limits: [0.5 us, 10 us]}
      kick:  {angle: pi/2, length: 4 us, adjust: amplitude, amplitude: 0.25, limits: [0.05, 0.9], shape: {kind: blackman}}
    switching: {dead_time: 0 ns, uncertainty: 20 ns}
)");
}

/// What is true: the coupling k a / sqrt(1 + (a/a_s)^2) of a drive 1.5 kHz off the line, with the lifetime of 3P1.
struct Apparatus {
  double per_amplitude_hz = 280e3, saturation = 0.35, detuning_hz = 1.5e3, dead_time_s = 15e-9;

  double rabi(double amplitude) const { return kTwoPi * per_amplitude_hz * amplitude / std::hypot(1.0, saturation * amplitude); }
  double excited(double amplitude, double pulse_s) const {
    return rehearse::after_square_pulse({rabi(amplitude), kTwoPi * detuning_hz, 4.69e4, 0.0, 0.0}, pulse_s - dead_time_s).excited;
  }
  wire::Request scan(const std::string& id, std::mt19937_64& random, double largest = 1.0, int points = 51) const {
    wire::Request request;
    request.kind = wire::Kind::fit;
    request.id = id;
    request.digest = "digest of " + id;
    wire::Scan& scan = request.scans.emplace_back();
    scan.drive = "red";
    scan.scan_name = id;
    scan.axis_kind = wire::AxisKind::amplitude;
    scan.pulse_s = 4e-6;
    scan.observed.resize(1);
    scan.weight.resize(1);
    for (int i = 0; i < points; ++i) {
      const double a = largest * i / (points - 1);
      scan.axis.push_back(a);
      scan.observed[0].push_back(std::binomial_distribution<int>(200, 0.02 + 0.93 * excited(a, 4e-6))(random));
      scan.weight[0].push_back(200);
    }
    return request;
  }
};

struct House : HouseWith<log::MemoryLog> {
  House() : HouseWith(red_drive()) {}
};

bool says(const std::vector<std::string>& lines, const std::string& words) {
  return std::any_of(lines.begin(), lines.end(), [&](const std::string& line) { return line.find(words) != std::string::npos; });
}

}  // namespace

TEST_CASE("a scan of amplitudes goes in, an amplitude that flips the atom comes out") {
  House house;
  const Apparatus apparatus;
  std::mt19937_64 random(1);
  const auto fitted = house.fit(apparatus.scan("a", random));
  for (const auto& reason : fitted.reasons) UNSCOPED_INFO(reason.code << ": " << reason.text);
  CHECK(fitted.verdict == "apply");
  const auto& flip = pulse(fitted, "flip");
  CHECK(flip.in_amplitude);
  CHECK(flip.verdict == "apply");
  CHECK(flip.previous_s == 0.5);
  CHECK(std::abs(flip.length_s / 0.0005 - std::round(flip.length_s / 0.0005)) < 1e-9);
  CHECK(flip.ticks == std::llround(flip.length_s / 0.0005));
  // What it is for: the pulse as proposed turns the apparatus' own atom by pi, to within the stated uncertainty.
  const double turned = apparatus.rabi(flip.length_s) * (4e-6 - apparatus.dead_time_s);
  const double sigma = kTwoPi / 2 * flip.sigma_s / flip.exact_s;
  CHECK(std::abs(turned - kTwoPi / 2) < 4.0 * sigma + flip.tick_error_rad);
  CHECK(sigma < 0.06);
  CHECK(flip.low_s < flip.exact_s);
  CHECK(flip.exact_s < flip.high_s);
  // A pulse adjusted in length rests, and no Rabi frequency is made up.
  CHECK_FALSE(pulse(fitted, "split").in_amplitude);
  CHECK(pulse(fitted, "split").verdict == "keep");
  CHECK(pulse(fitted, "split").length_s == 2e-6);
  CHECK(std::isnan(estimate(fitted, "rabi_hz").value));
  CHECK_FALSE(estimate(fitted, "rabi_hz").why.empty());
  CHECK(std::isnan(estimate(fitted, "intensity_w_m2").value));
  const auto& gain = estimate(fitted, "rabi_per_amplitude_hz");
  CHECK(std::abs(gain.value - 280e3) < 4.0 * gain.sigma);
  CHECK(gain.sigma < 12e3);
  const auto& lost = estimate(fitted, "compression");
  CHECK(std::abs(lost.value - (1.0 - 1.0 / std::hypot(1.0, 0.35))) < 4.0 * lost.sigma);
  REQUIRE(fitted.overlay);
  CHECK(fitted.overlay->axis_kind == wire::AxisKind::amplitude);
  CHECK(fitted.overlay->axis.back() == 1.0);
  CHECK(says(fitted.assumed, "response: "));
  CHECK(says(fitted.assumed, "shape: the pulses of the scan were square, of the peak amplitude given; `kick` is shaped"));
  // The sampling of 50 steps to 1 ends at 25 turns, 6.3 MHz per amplitude in 4 us.
  CHECK(fitted.quality.range_high_hz == Approx(25.0 / 4e-6).epsilon(0.01));
  // Blackman's area is 0.42 of its peak times the whole length, of which the length at half amplitude is 0.405.
  CHECK(pulse(fitted, "kick").exact_s == Approx(flip.exact_s / 2 / (0.42 / 0.405)).epsilon(0.03));
}

TEST_CASE("amplitudes applied are those compared with, in status, and after a restart") {
  House house;
  const Apparatus apparatus;
  std::mt19937_64 random(2);
  const double proposed = pulse(house.fit(apparatus.scan("a", random)), "flip").length_s;
  CHECK(std::holds_alternative<wire::Noted>(house.ask(applied_of("b", {{"flip", proposed}, {"split", 2.08e-6}}))));
  for (const bool restarted : {false, true}) {
    CAPTURE(restarted);
    if (restarted) house.restart();
    const auto state = house.service->state();
    const auto& red = state.drives.at("red");
    CHECK(red.amplitudes.at("flip") == proposed);
    CHECK(red.amplitudes.at("kick") == 0.25);
    CHECK(red.pulses_s == std::map<std::string, double>{{"split", 2.08e-6}});
    CHECK_FALSE(red.rabi_hz);
    REQUIRE(red.rabi_per_amplitude_hz);
    CHECK(*red.rabi_per_amplitude_hz == Approx(280e3).epsilon(0.1));
    CHECK(state.troubles.empty());
  }
  house.clock.time += 10 * kMinute;
  const auto again = house.fit(apparatus.scan("c", random, 0.95, 49));
  CHECK(pulse(again, "flip").previous_s == proposed);
  CHECK(pulse(again, "split").previous_s == 2.08e-6);
  CHECK(again.reasons.empty());
  // The log tells lengths from amplitudes.
  std::vector<log::Event> events;
  REQUIRE(house.log.replay([&](const log::Event& event) { events.push_back(event); }));
  CHECK(events.at(0).axis == "amplitude");
  CHECK(events[0].amplitudes.count("flip") == 1);
  CHECK(events[0].pulses_s.empty());
  CHECK(std::isnan(events[0].rabi_hz));
  CHECK(events[0].rabi_per_amplitude_hz == Approx(280e3).epsilon(0.1));
  CHECK(events[0].span == 1.0);
  CHECK(events.at(1).pulses_s == std::map<std::string, double>{{"split", 2.08e-6}});
  CHECK(events[1].amplitudes == std::map<std::string, double>{{"flip", proposed}});
}

TEST_CASE("a length applied as an amplitude is refused") {
  House house;
  const auto fault = std::get<wire::Error>(house.ask(applied_of("x", {{"flip", 4e-6}}))).fault;
  CHECK(fault.code == "bad_value");
  CHECK(fault.where == "pulses.flip");
  CHECK(fault.message.find("relative drive amplitude, such as 0.5") != std::string::npos);
  CHECK(std::holds_alternative<wire::Noted>(house.ask(applied_of("y", {{"flip", 0.95}}))));
  const auto state = house.service->state();
  REQUIRE(state.troubles.size() == 1);
  CHECK(state.troubles[0].find("red: the pulse `flip` in force, 0.95000, lies outside its limits, 0.10000 to 0.90000. Load an amplitude") == 0);
}

TEST_CASE("a jump of the gain is a step, refused once") {
  House house;
  Apparatus apparatus;
  apparatus.saturation = 0.2;
  std::mt19937_64 random(4);
  for (int i = 0; i < 4; ++i) {
    house.clock.time += 10 * kMinute;
    CHECK(house.fit(apparatus.scan("s" + std::to_string(i), random)).verdict != "refuse");
  }
  apparatus.per_amplitude_hz *= 1.5;
  house.clock.time += 10 * kMinute;
  const auto jumped = house.fit(apparatus.scan("t", random));
  CHECK(jumped.verdict == "refuse");
  CHECK(jumped.reasons.at(0).code == "step");
  CHECK(pulse(jumped, "flip").length_s == pulse(jumped, "flip").previous_s);
  CHECK(pulse(jumped, "flip").verdict == "refuse");
  house.clock.time += kMinute;
  const auto confirmed = house.fit(apparatus.scan("u", random, 0.9, 44));
  CHECK(confirmed.reasons.at(0).code == "step_confirmed");
  CHECK(pulse(confirmed, "flip").exact_s == Approx(0.4464 / 1.5).epsilon(0.05));
}

TEST_CASE("a scan on its own, without configuration, tells the gain alone") {
  std::mt19937_64 random(5);
  const auto request = Apparatus{}.scan("alone", random);
  const auto fitted = service::fit_alone(request.scans[0], nullptr, {});
  CHECK(fitted.pulses.empty());
  CHECK(fitted.verdict == "keep");
  CHECK(estimate(fitted, "rabi_per_amplitude_hz").value == Approx(280e3).epsilon(0.1));
}
