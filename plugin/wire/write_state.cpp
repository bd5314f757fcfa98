// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/fields.hpp"
#include "plugin/wire/write_reply.hpp"

namespace halfturn::wire {
namespace {

void write_time(Writer& to, std::string_view name, const std::optional<Time>& time) {
  if (!time) return;
  to.key(name);
  to.time(*time);
}

void write_drive(Writer& to, const DriveState& drive) {
  to.open_map();
  to.key("pulses");
  to.open_map();
  for (const auto& [pulse, length_s] : drive.pulses_s) to.field(pulse, length_s);
  to.close_map();
  if (!drive.amplitudes.empty()) {
    to.key("amplitudes");
    to.open_map();
    for (const auto& [pulse, amplitude] : drive.amplitudes) to.field(pulse, amplitude);
    to.close_map();
  }
  if (drive.rabi_hz) to.field("rabi_hz", *drive.rabi_hz);
  if (drive.rabi_per_amplitude_hz) to.field("rabi_per_amplitude_hz", *drive.rabi_per_amplitude_hz);
  if (!drive.last_verdict.empty()) to.field("last_verdict", drive.last_verdict);
  write_time(to, "due_at", drive.due_at);
  to.field("held", drive.held);
  to.close_map();
}

void write_limits(Writer& to, const Limits& limits) {
  to.key("limits");
  to.open_map();
  to.field("bytes", limits.bytes);
  to.field("points", limits.points);
  to.field("sites", limits.sites);
  to.field("in_flight", limits.in_flight);
  to.field("scan_idle_s", limits.scan_idle_s);
  to.close_map();
}

}  // namespace

void write_fields(Writer& to, const State& state) {
  to.field("version", state.version);
  to.field("uptime_s", state.uptime_s);
  to.field("stopping", state.stopping);
  to.field("log", state.log);
  write_limits(to, state.limits);
  to.key("drives");
  to.open_map();
  for (const auto& [drive_name, drive] : state.drives) {
    to.key(drive_name);
    write_drive(to, drive);
  }
  to.close_map();
  to.field("troubles", state.troubles);
}

void write_fields(Writer& to, const Live& live) {
  if (!live.scan_name.empty()) to.field("scan_name", live.scan_name);
  to.field("drive", live.drive);
  to.field("points", live.points);
  to.key("overlay");
  write_overlay(to, live.overlay);
}

void write_fields(Writer& to, const Drift& drift) {
  to.field("drive", drift.drive);
  to.key("rabi_hz");
  write_estimate(to, drift.rabi_hz);
  if (drift.rabi_per_amplitude_hz) {
    to.key("rabi_per_amplitude_hz");
    write_estimate(to, *drift.rabi_per_amplitude_hz);
  }
  to.field("rate_per_hour", drift.rate_per_hour);
  write_time(to, "due_at", drift.due_at);
}

void write_fields(Writer& to, const Error& error) {
  to.field("code", error.fault.code);
  to.field("where", error.fault.where);
  to.field("message", error.fault.message);
  if (error.retry_after_s) to.field("retry_after_s", *error.retry_after_s);
}

void write_fields(Writer& to, const Advised& advised) {
  to.field("drive", advised.drive);
  to.field(axis_name(advised.axis_kind), advised.axis);
  to.key("shots");
  to.open_list();
  for (const std::int64_t shots : advised.shots) to.integer(shots);
  to.close_list();
  to.key("expected_sigma");
  to.open_map();
  for (const auto& [estimate, sigma] : advised.expected_sigma) to.field(estimate, sigma);
  to.close_map();
}

}  // namespace halfturn::wire
