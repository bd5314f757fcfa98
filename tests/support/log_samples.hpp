// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <cstdint>
#include <limits>
#include <random>
#include <string>

#include "plugin/log/log.hpp"

/// Seeded random events and replies for the tests of the log.
namespace halfturn::tests {

inline constexpr double kNone = std::numeric_limits<double>::quiet_NaN();

class LogSamples {
 public:
  explicit LogSamples(std::uint64_t seed) : random_(seed) {}

  std::int64_t whole(std::int64_t low, std::int64_t high) {
    return std::uniform_int_distribution<std::int64_t>(low, high)(random_);
  }

  /// A value of any magnitude, one time in five none.
  double real() {
    if (whole(0, 4) == 0) return kNone;
    const double mantissa = std::uniform_real_distribution<double>(-1.0, 1.0)(random_);
    const double value = std::ldexp(mantissa, static_cast<int>(whole(-300, 300)));
    return value == 0.0 ? 1.0 : value;
  }

  /// Any bytes, zero among them.
  std::string bytes(std::int64_t longest) {
    std::string text(static_cast<std::size_t>(whole(0, longest)), '\0');
    for (auto& byte : text) byte = static_cast<char>(whole(0, 255));
    return text;
  }

  std::string drive() { return "drive" + std::to_string(whole(0, 2)); }

  log::Event event() {
    static const char* const kKinds[] = {"fit", "fit", "fit", "applied", "hold", "release"};
    log::Event event;
    event.drive = drive();
    event.kind = kKinds[whole(0, 5)];
    event.happened_at = whole(-5, 40);  // many of equal time
    event.received_at = whole(0, std::numeric_limits<std::int64_t>::max());
    event.id = "id-" + std::to_string(whole(0, 1 << 30));
    event.scan_name = "flop \u00b5 '\"; " + std::to_string(whole(0, 99));
    if (event.kind == "fit") {
      static const char* const kAxes[] = {"duration", "detuning", "amplitude"};
      event.axis = kAxes[whole(0, 2)];
      event.verdict = whole(0, 1) == 0 ? "apply" : "refuse";
      event.effect = "accepted";
      event.reasons = "step first";
    } else {
      event.by = "night shift";
      event.why = "realigning";
    }
    for (auto* value : {&event.rabi_hz, &event.rabi_sigma_hz, &event.rabi_low_hz, &event.rabi_high_hz, &event.generalised_hz,
                        &event.rabi_mean_hz, &event.rabi_mean_sigma_hz, &event.dead_time_points_s, &event.dead_time_points_sigma_s, &event.generalised_sigma_hz, &event.line_offset_hz, &event.line_offset_sigma_hz, &event.carrier_hz,
                        &event.dead_time_s, &event.dead_time_sigma_s, &event.intensity_w_m2, &event.drive_amplitude, &event.span,
                        &event.spacing, &event.rabi_per_amplitude_hz, &event.rabi_per_amplitude_sigma_hz, &event.compression}) {
      *value = real();
    }
    for (auto left = whole(0, 3); left > 0; --left) event.pulses_s["pulse" + std::to_string(left)] = real();
    for (auto left = whole(0, 2); left > 0; --left) event.amplitudes["level" + std::to_string(left)] = static_cast<double>(whole(1, 1000)) / 1000.0;
    return event;
  }

  log::Bulk bulk() {
    log::Bulk bulk{bytes(300), std::to_string(whole(0, 9)), "configuration", bytes(300), {}};
    for (auto left = whole(0, 2); left > 0; --left) bulk.ambient["T" + std::to_string(left)] = real();
    return bulk;
  }

 private:
  std::mt19937_64 random_;
};

inline bool same(double a, double b) { return (std::isnan(a) && std::isnan(b)) || a == b; }

/// Equal in every member; NaN equals NaN.
inline bool same(const log::Event& a, const log::Event& b) {
  if (a.pulses_s.size() != b.pulses_s.size()) return false;
  for (auto at = a.pulses_s.begin(), bt = b.pulses_s.begin(); at != a.pulses_s.end(); ++at, ++bt) {
    if (at->first != bt->first || !same(at->second, bt->second)) return false;
  }
  return a.amplitudes == b.amplitudes && same(a.rabi_per_amplitude_hz, b.rabi_per_amplitude_hz) &&
         same(a.rabi_per_amplitude_sigma_hz, b.rabi_per_amplitude_sigma_hz) && same(a.compression, b.compression) && a.number == b.number && a.drive == b.drive && a.kind == b.kind && a.happened_at == b.happened_at &&
         a.received_at == b.received_at && a.id == b.id && a.scan_name == b.scan_name && a.axis == b.axis && a.verdict == b.verdict &&
         a.effect == b.effect && a.reasons == b.reasons && a.by == b.by && a.why == b.why && same(a.rabi_hz, b.rabi_hz) &&
         same(a.rabi_sigma_hz, b.rabi_sigma_hz) && same(a.rabi_low_hz, b.rabi_low_hz) && same(a.rabi_high_hz, b.rabi_high_hz) &&
         same(a.generalised_hz, b.generalised_hz) && same(a.generalised_sigma_hz, b.generalised_sigma_hz) &&
         same(a.line_offset_hz, b.line_offset_hz) && same(a.line_offset_sigma_hz, b.line_offset_sigma_hz) &&
         same(a.carrier_hz, b.carrier_hz) && same(a.dead_time_s, b.dead_time_s) && same(a.dead_time_sigma_s, b.dead_time_sigma_s) &&
         same(a.intensity_w_m2, b.intensity_w_m2) && same(a.drive_amplitude, b.drive_amplitude) && same(a.span, b.span) &&
         same(a.spacing, b.spacing) && same(a.rabi_mean_hz, b.rabi_mean_hz) && same(a.rabi_mean_sigma_hz, b.rabi_mean_sigma_hz) &&
         same(a.dead_time_points_s, b.dead_time_points_s) && same(a.dead_time_points_sigma_s, b.dead_time_points_sigma_s);
}

}  // namespace halfturn::tests
