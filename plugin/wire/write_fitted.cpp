// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/fields.hpp"
#include "plugin/wire/write_reply.hpp"

namespace halfturn::wire {
namespace {

void write_reasons(Writer& to, const std::vector<Reason>& reasons) {
  to.key("reasons");
  to.open_list();
  for (const Reason& reason : reasons) {
    to.open_map();
    to.field("code", reason.code);
    to.field("text", reason.text);
    to.close_map();
  }
  to.close_list();
}

void write_pulse(Writer& to, const Pulse& pulse) {
  const std::string unit = pulse.in_amplitude ? "_amplitude" : "_s";
  to.open_map();
  to.field("verdict", pulse.verdict);
  to.field("angle_rad", pulse.angle_rad);
  to.field("length" + unit, pulse.length_s);
  to.field("exact" + unit, pulse.exact_s);
  to.field("sigma" + unit, pulse.sigma_s);
  to.field("low" + unit, pulse.low_s);
  to.field("high" + unit, pulse.high_s);
  to.field("ticks", pulse.ticks);
  to.field("previous" + unit, pulse.previous_s);
  to.field("change", pulse.change);
  to.field("rotation_error_rad", pulse.rotation_error_rad);
  to.field("tick_error_rad", pulse.tick_error_rad);
  to.field("transfer", pulse.transfer);
  to.close_map();
}

void write_pulses(Writer& to, const Fitted& fitted) {
  to.key("pulses");
  to.open_map();
  for (const auto& [pulse_name, pulse] : fitted.pulses) {
    to.key(pulse_name);
    write_pulse(to, pulse);
  }
  to.close_map();
}

void write_dynamics(Writer& to, const Fitted& fitted) {
  to.key("dynamics");
  to.open_map();
  to.field("chosen", fitted.dynamics);
  to.key("candidates");
  to.open_list();
  for (const Candidate& candidate : fitted.candidates) {
    to.open_map();
    to.field("name", candidate.name);
    to.field("aicc", candidate.aicc);
    to.field("weight", candidate.weight);
    to.close_map();
  }
  to.close_list();
  to.close_map();
}

void write_indices(Writer& to, const std::vector<std::int64_t>& indices) {
  to.key("distrusted");
  to.open_list();
  for (const auto index : indices) to.integer(index);
  to.close_list();
}

void write_joint(Writer& to, const std::vector<JointScan>& scans) {
  to.key("scans");
  to.open_list();
  for (const JointScan& scan : scans) {
    to.open_map();
    if (!scan.scan_name.empty()) to.field("scan_name", scan.scan_name);
    to.field("axis", axis_name(scan.axis_kind));
    if (scan.taken_at) {
      to.key("taken_at");
      to.time(*scan.taken_at);
    }
    to.field("points", scan.points);
    to.field("deviance", scan.deviance);
    to.field("dof", scan.dof);
    to.field("p_value", scan.p_value);
    to.field("scatter", scan.scatter);
    to.field("strain", scan.strain);
    write_indices(to, scan.distrusted);
    to.close_map();
  }
  to.close_list();
}

void write_conditioning(Writer& to, const Quality& quality) {
  to.field("condition", quality.condition);
  to.key("correlation");
  if (quality.correlation) {
    to.open_map();
    to.key("between");
    to.open_list();
    for (const auto& name : quality.correlation->between) to.text(name);
    to.close_list();
    to.field("value", quality.correlation->value);
    to.close_map();
  } else {
    to.null();
  }
  to.field("at_bound", quality.at_bound);
}

void write_quality(Writer& to, const Quality& quality) {
  to.key("quality");
  to.open_map();
  to.field("deviance", quality.deviance);
  to.field("dof", quality.dof);
  to.field("p_value", quality.p_value);
  to.field("cycles", quality.cycles);
  to.field("points", quality.points);
  to.field("scatter", quality.scatter);
  write_indices(to, quality.distrusted);
  to.field("range_hz", std::vector<double>{quality.range_low_hz, quality.range_high_hz});
  to.key("rival");
  if (quality.rival) {
    to.open_map();
    to.field("rabi_hz", quality.rival->rabi_hz);
    to.field("deviance_above", quality.rival->deviance_above);
    to.close_map();
  } else {
    to.null();
  }
  write_conditioning(to, quality);
  to.close_map();
}

}  // namespace

void write_estimate(Writer& to, const Estimate& estimate) {
  to.open_map();
  to.field("value", estimate.value);
  if (std::isfinite(estimate.value)) {
    to.field("sigma", estimate.sigma);
    to.field("low", estimate.low);
    to.field("high", estimate.high);
  }
  if (!estimate.why.empty()) to.field("why", estimate.why);
  else if (!std::isfinite(estimate.value)) to.field("why", "not determined by this scan");
  to.close_map();
}

void write_overlay(Writer& to, const Overlay& overlay) {
  to.open_map();
  to.field(axis_name(overlay.axis_kind), overlay.axis);
  to.field("signal", overlay.signal);
  to.field("low", overlay.low);
  to.field("high", overlay.high);
  to.close_map();
}

void write_fields(Writer& to, const Fitted& fitted) {
  if (!fitted.scan_name.empty()) to.field("scan_name", fitted.scan_name);
  to.field("drive", fitted.drive);
  if (fitted.taken_at) {
    to.key("taken_at");
    to.time(*fitted.taken_at);
  }
  to.field("verdict", fitted.verdict);
  write_reasons(to, fitted.reasons);
  to.field("assumed", fitted.assumed);
  for (const auto& [estimate_name, estimate] : fitted.estimates) {
    to.key(estimate_name);
    write_estimate(to, estimate);
  }
  write_pulses(to, fitted);
  to.field("carrier_shift_hz", fitted.carrier_shift_hz);
  write_dynamics(to, fitted);
  write_quality(to, fitted.quality);
  if (fitted.overlay) {
    to.key("overlay");
    write_overlay(to, *fitted.overlay);
  }
  if (!fitted.scans.empty()) write_joint(to, fitted.scans);
  if (!fitted.sites.empty()) {
    to.key("sites");
    write_sites(to, fitted.sites);
  }
  to.field("stored", fitted.stored);
  if (fitted.replayed) to.field("replayed", true);
}

}  // namespace halfturn::wire
