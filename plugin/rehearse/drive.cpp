// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/drive.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"
#include "plugin/rehearse/pulses.hpp"
#include "plugin/rehearse/reply.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::rehearse {
namespace {

using constants::kPi;
using constants::kTwoPi;
using nlohmann::json;

/// The settings with the Rabi frequency at the start: the one asked for, or that for which the scored pulse is right.
ApparatusSettings settled(const RehearseOptions& options, const PulseInForce& pulse) {
  ApparatusSettings settings = options.apparatus;
  settings.rabi_hz = options.rabi_hz.value_or(pulse.angle_rad / kTwoPi / (pulse.length_s - settings.dead_time_s));
  return settings;
}

constexpr double kFirstLineS = 120;  // between the flops

/// A scan taken before the last one that the daemon believed moves nothing there: a night among scans that its log holds already
/// would rehearse nothing. A daemon that does not tell its history is taken at its word.
Result<void> check_fresh(const std::string& drive, const std::string& starts_at, const Ask& ask) {
  const auto history = ask("history", {{"drive", drive}, {"since", starts_at}, {"limit", 1}});
  if (!history || !history->contains("rows") || history->at("rows").empty()) return {};
  return fault("bad_value", "start",
               "the daemon's log holds scans of `" + drive + "` taken after " + starts_at +
                   ", among which those of the rehearsal would count as late; rehearse against a daemon with a fresh log");
}

bool is_due(double time_s, double every_s) { return std::fmod(time_s, every_s) < 60; }

}  // namespace

std::vector<double> flop_lengths(double pi_pulse_s, std::int64_t points, int number) {
  const bool odd = number % 2 != 0;
  const std::int64_t count = odd ? points - points / 10 : points;
  const double step_s = (odd ? 2.9 : 2.5) * 2 * pi_pulse_s / static_cast<double>(count);
  std::vector<double> lengths_s;
  for (std::int64_t point = 1; point <= count; ++point) lengths_s.push_back(step_s * static_cast<double>(point));
  return lengths_s;
}

std::vector<double> line_detunings(double pi_pulse_s, std::int64_t points) {
  const double half_span_hz = 1.5 * 0.7987 / pi_pulse_s;
  std::vector<double> detunings_hz;
  for (std::int64_t point = 0; point < points; ++point) {
    detunings_hz.push_back(half_span_hz * (2.0 * static_cast<double>(point) / static_cast<double>(points - 1) - 1));
  }
  return detunings_hz;
}

Result<RehearsedDrive> RehearsedDrive::begin(const RehearseOptions& options, wire::Time starts_at, const Ask& ask) {
  auto pulses = ask_pulses(options.drive, wire::format_time(starts_at), ask);
  if (!pulses) return tl::make_unexpected(pulses.error());
  if (auto fresh = check_fresh(options.drive, wire::format_time(starts_at), ask); !fresh) return tl::make_unexpected(fresh.error());
  auto pulse = choose_pulse(*pulses, options.pulse);
  if (!pulse) return tl::make_unexpected(pulse.error());
  if (!options.rabi_hz && pulses->at(*pulse).length_s <= options.apparatus.dead_time_s) {
    return fault("bad_value", "apparatus.dead_time_s", "the pulse in force is not longer than the dead time of the apparatus");
  }
  return RehearsedDrive(options, starts_at, std::move(*pulses), std::move(*pulse));
}

RehearsedDrive::RehearsedDrive(const RehearseOptions& options, wire::Time starts_at, std::map<std::string, PulseInForce> pulses,
                               std::string pulse)
    : options_(options), starts_at_(starts_at), pulses_(std::move(pulses)), pulse_(std::move(pulse)),
      apparatus_(settled(options, pulses_.at(pulse_)), options.seed, options.hours * 3600),
      with_halfturn_("with Halfturn", pulses_.at(pulse_).length_s, options.apparatus.carrier_start_hz),
      blind_("every fit taken blindly", pulses_.at(pulse_).length_s, options.apparatus.carrier_start_hz),
      untouched_("without recalibration", pulses_.at(pulse_).length_s, options.apparatus.carrier_start_hz) {}

Result<void> RehearsedDrive::minute(double time_s, const Ask& ask) {
  Result<void> done;
  if (is_due(time_s, options_.flop_every_s)) done = flop(time_s, ask);
  if (done && time_s >= kFirstLineS && is_due(time_s - kFirstLineS, options_.line_every_s)) done = line(time_s, ask);
  if (!done) return done;
  for (Strategy* strategy : {&with_halfturn_, &blind_, &untouched_}) strategy->note(apparatus_, time_s, angle_rad());
  return {};
}

Result<void> RehearsedDrive::flop(double time_s, const Ask& ask) {
  const double pi_pulse_s = with_halfturn_.pulse_s * kPi / angle_rad();
  const auto lengths_s = flop_lengths(pi_pulse_s, options_.flop_points, tally_.flops);
  const auto taken = apparatus_.take_flop(time_s, lengths_s, options_.shots, with_halfturn_.carrier_hz);
  const auto reply = send(taken, message(time_s, taken, "duration_s", ++tally_.flops), ask);
  if (!reply) return tl::make_unexpected(reply.error());
  count_interval(time_s, *reply);
  obey_blindly(*reply, true);
  return obey(time_s, *reply, ask);
}

Result<void> RehearsedDrive::line(double time_s, const Ask& ask) {
  const double pi_pulse_s = with_halfturn_.pulse_s * kPi / angle_rad();
  const auto taken = apparatus_.take_line(time_s, line_detunings(pi_pulse_s, options_.line_points), pi_pulse_s, options_.shots,
                                          with_halfturn_.carrier_hz);
  auto scan = message(time_s, taken, "detuning_hz", ++tally_.lines);
  scan["pulse_s"] = pi_pulse_s;
  const auto reply = send(taken, std::move(scan), ask);
  if (!reply) return tl::make_unexpected(reply.error());
  obey_blindly(*reply, false);
  return obey(time_s, *reply, ask);
}

json RehearsedDrive::message(double time_s, const TakenScan& taken, const char* axis, int number) {
  const bool is_flop = std::string(axis) == "duration_s";
  return {{"scan_name", "rehearsal-" + std::to_string(options_.seed) + (is_flop ? "-flop-" : "-line-") + std::to_string(number)},
          {"drive", options_.drive},
          {"taken_at", at(time_s)},
          {axis, taken.axis},
          {"counts", taken.counts},
          {"shots", taken.shots},
          {"carrier_hz", with_halfturn_.carrier_hz},
          {"ambient", {{"temperature_c", apparatus_.read_temperature(time_s)}}}};
}

Result<json> RehearsedDrive::send(const TakenScan& taken, json scan, const Ask& ask) {
  auto reply = ask("fit", {{"scan", std::move(scan)}});
  if (!reply) return reply;
  const auto verdict = text(*reply, "verdict");
  if (verdict != "apply" && verdict != "keep" && verdict != "refuse") {
    return fault("bad_reply", "verdict", "found '" + verdict + "', expected apply, keep or refuse");
  }
  last_verdict_ = verdict;
  tally_.spoilt += taken.mishap != Mishap::none;
  if (verdict == "refuse") count_refusal(*reply, taken);
  return reply;
}

void RehearsedDrive::count_refusal(const json& reply, const TakenScan& taken) {
  ++tally_.refused;
  tally_.spoilt_refused += taken.mishap != Mishap::none;
  const auto& reasons = member(reply, "reasons");
  const auto code = reasons.is_array() && !reasons.empty() ? text(reasons.front(), "code") : std::string();
  ++tally_.refused_for[code.empty() ? "no reason given" : code];
}

void RehearsedDrive::count_interval(double time_s, const json& reply) {
  const auto low_hz = number(member(reply, "rabi_hz"), "low");
  const auto high_hz = number(member(reply, "rabi_hz"), "high");
  if (last_verdict_ == "refuse" || !low_hz || !high_hz) return;
  const double truth_hz = apparatus_.truth(time_s).rabi_hz;
  ++tally_.intervals;
  tally_.intervals_true += *low_hz <= truth_hz && truth_hz <= *high_hz;
}

Result<void> RehearsedDrive::obey(double time_s, const json& reply, const Ask& ask) {
  bool changed = false;
  for (auto& [name, pulse] : pulses_) {
    const auto& proposed = member(member(reply, "pulses"), name);
    const auto length_s = number(proposed, "length_s");
    if (text(proposed, "verdict") != "apply" || !length_s || !(*length_s > 0)) continue;
    pulse.length_s = *length_s;
    changed = true;
  }
  const double shift_hz = number(reply, "carrier_shift_hz").value_or(0);
  with_halfturn_.carrier_hz += shift_hz;
  with_halfturn_.pulse_s = pulses_.at(pulse_).length_s;
  changed = changed || shift_hz != 0;
  tally_.applied += changed && last_verdict_ != "refuse";
  tally_.kept += !changed && last_verdict_ != "refuse";
  return changed ? report_applied(time_s, ask) : Result<void>();
}

Result<void> RehearsedDrive::report_applied(double time_s, const Ask& ask) {
  json lengths = json::object();
  for (const auto& [name, pulse] : pulses_) lengths[name] = pulse.length_s;
  const auto noted = ask("applied", {{"drive", options_.drive},
                                     {"applied_at", at(time_s + 30)},
                                     {"pulses", lengths},
                                     {"carrier_hz", with_halfturn_.carrier_hz}});
  if (!noted) return tl::make_unexpected(noted.error());
  return {};
}

void RehearsedDrive::obey_blindly(const json& reply, bool is_flop) {
  const auto length_s = number(member(member(reply, "pulses"), pulse_), "exact_s");
  const auto offset_hz = number(member(reply, "line_offset_hz"), "value");
  if (is_flop && length_s && *length_s > 0) blind_.pulse_s = *length_s;
  if (!is_flop && offset_hz) blind_.carrier_hz = with_halfturn_.carrier_hz + *offset_hz;
}

std::string RehearsedDrive::at(double time_s) const {
  return wire::format_time(starts_at_ + static_cast<wire::Time>(std::llround(time_s * 1e3)) * 1'000'000);
}

}  // namespace halfturn::rehearse
