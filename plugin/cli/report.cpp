// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/report.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <utility>
#include <vector>

#include "model/quantity/format.hpp"
#include "plugin/cli/layout.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::cli {

namespace {

constexpr std::array<std::pair<std::string_view, std::string_view>, 21> kNames = {{
    {"rabi_hz", "Rabi frequency"},
    {"rabi_mean_hz", "mean Rabi frequency"},
    {"rabi_per_amplitude_hz", "Rabi frequency per amplitude"},
    {"compression", "lost at largest amplitude"},
    {"line_offset_hz", "line offset"},
    {"decay_s", "decay time"},
    {"dephasing_s", "dephasing time"},
    {"loss_s", "loss time"},
    {"envelope_s", "envelope, 1/e"},
    {"contrast", "contrast"},
    {"floor", "floor"},
    {"rabi_spread", "spread of Rabi frequency"},
    {"rabi_drift", "change along the scan"},
    {"mean_phonons", "mean phonons"},
    {"cloud_ratio", "cloud over waist"},
    {"detuning_spread_hz", "spread of detuning"},
    {"dead_time_s", "dead time"},
    {"intensity_w_m2", "intensity"},
    {"field_v_m", "peak field"},
    {"saturation", "saturation I/Isat"},
    {"power_w", "power"},
}};

/// Endings of fields and their units; the longer of two that fit stands first.
constexpr std::array<std::pair<std::string_view, std::string_view>, 7> kUnits = {{
    {"_w_m2", "W/m\u00b2"}, {"_v_m", "V/m"}, {"_hz", "Hz"}, {"_rad", "rad"}, {"_w", "W"}, {"_t", "T"}, {"_s", "s"}}};

std::string interval(const wire::Estimate& estimate, const std::string& unit) {
  if (!std::isfinite(estimate.low) || !std::isfinite(estimate.high)) return estimate.why;
  return engineering(estimate.low, unit, 6) + " \u2026 " + engineering(estimate.high, unit, 6);
}

std::string percent(double fraction) { return std::isfinite(fraction) ? plain(100.0 * fraction, 3) + " %" : "unknown"; }

std::string head(const wire::Fitted& scan, const Style& style) {
  std::string text = style.strong(scan.scan_name.empty() ? "scan" : scan.scan_name) + ": " + style.verdict(scan.verdict);
  if (!scan.drive.empty()) text += "  drive " + scan.drive;
  if (scan.taken_at) text += "  taken " + wire::format_time(*scan.taken_at);
  text += "\n";
  for (const auto& reason : scan.reasons) text += wrapped(reason.text, "  " + reason.code + ": ");
  for (const auto& assumed : scan.assumed) text += wrapped(assumed, "  assumed: ");
  return text;
}

/// What has no value, by reason: `line offset: a scan of this kind does not hold it`.
std::string absent(const wire::Fitted& scan) {
  std::vector<std::pair<std::string, std::string>> reasons;  // why, names
  for (const auto& [field, estimate] : scan.estimates) {
    if (std::isfinite(estimate.value)) continue;
    const std::string& why = estimate.why;
    const auto same = std::find_if(reasons.begin(), reasons.end(), [&why](const auto& each) { return each.first == why; });
    if (same == reasons.end())
      reasons.emplace_back(why, label(field).text);
    else
      same->second += ", " + label(field).text;
  }
  std::string text;
  for (const auto& [why, names] : reasons) text += wrapped(names + ": " + (why.empty() ? "not known" : why), "  without: ");
  return text;
}

std::string estimates(const wire::Fitted& scan) {
  std::vector<std::vector<std::string>> rows;
  for (const auto& [field, estimate] : scan.estimates) {
    if (!std::isfinite(estimate.value)) continue;
    const auto called = label(field);
    rows.push_back({called.text, with_uncertainty(estimate.value, estimate.sigma, called.unit), interval(estimate, called.unit)});
  }
  return table(rows, "  ");
}

/// A pulse's value: a length, or a relative amplitude.
std::string value(const wire::Pulse& pulse, double value) { return pulse.in_amplitude ? plain(value) : engineering(value, "s"); }

std::string pulses(const wire::Fitted& scan, const Style& style) {
  if (scan.pulses.empty()) return {};
  std::vector<std::vector<std::string>> rows = {
      {"pulse", "verdict", "angle", "in force", "proposed", "exact", "change", "rotation error"}};
  for (const auto& [name, pulse] : scan.pulses)
    rows.push_back({name, style.verdict(pulse.verdict), plain(pulse.angle_rad) + " rad", value(pulse, pulse.previous_s),
                    value(pulse, pulse.length_s), with_uncertainty(pulse.exact_s, pulse.sigma_s, pulse.in_amplitude ? "" : "s"),
                    percent(pulse.change),
                    engineering(pulse.rotation_error_rad, "rad", 3)});
  return "\n" + table(rows, "  ");
}

std::string sites(const wire::Fitted& scan, const Style& style) {
  if (scan.sites.empty()) return {};
  std::vector<std::vector<std::string>> rows = {{"site", "verdict", "Rabi frequency", "reasons"}};
  for (const auto& site : scan.sites) {
    std::string rabi = "none", codes;
    for (const auto& [field, estimate] : site.estimates)
      if (field == "rabi_hz" && std::isfinite(estimate.value)) rabi = with_uncertainty(estimate.value, estimate.sigma, "Hz");
    for (const auto& reason : site.reasons) codes += (codes.empty() ? "" : ", ") + reason.code;
    rows.push_back({site.name, style.verdict(site.verdict), rabi, codes});
  }
  return "\n" + table(rows, "  ");
}

std::string joint(const wire::Fitted& scan) {
  if (scan.scans.empty()) return {};
  std::vector<std::vector<std::string>> rows = {{"fitted together", "points", "deviance", "dof", "p", "would gain alone"}};
  for (const auto& each : scan.scans)
    rows.push_back({each.scan_name.empty() ? "scan" : each.scan_name, std::to_string(each.points), plain(each.deviance, 4), plain(each.dof, 3),
                    plain(each.p_value, 2), plain(each.strain, 3)});
  return "\n" + table(rows, "  ");
}

std::string dynamics(const wire::Fitted& scan) {
  if (scan.dynamics.empty()) return {};
  std::string text = scan.dynamics;
  const char* separator = "; weights: ";
  constexpr double kShown = 0.005;
  std::string ruled_out;
  for (const auto& candidate : scan.candidates) {
    if (candidate.weight < kShown) {
      ruled_out += (ruled_out.empty() ? "" : ", ") + candidate.name;
      continue;
    }
    text += separator + candidate.name + " " + plain(candidate.weight, 2);
    separator = ", ";
  }
  if (!ruled_out.empty()) text += "; below 0.005: " + ruled_out;
  return "\n" + wrapped(text, "  dynamics: ");
}

/// Estimates that lean on one another, and those at a bound.
std::string told_apart(const wire::Quality& q) {
  constexpr double kHardly = 0.99;
  std::string text;
  if (q.correlation && std::abs(q.correlation->value) > kHardly)
    text += wrapped(label(q.correlation->between[0]).text + " and " + label(q.correlation->between[1]).text + " are hardly told apart (correlation " +
                        plain(q.correlation->value, 4) + "): what holds the one holds the other. A longer or wider scan tells them apart.",
                    "  leaning: ");
  std::string names;
  // A detuning of 0 is where a carrier on the line is found one time in two.
  for (const auto& name : q.at_bound)
    if (name != "detuning_hz") names += (names.empty() ? "" : ", ") + label(name).text;
  if (!names.empty()) text += wrapped(names, "  at its bound: ");
  return text;
}

std::string quality(const wire::Fitted& scan) {
  const auto& q = scan.quality;
  std::string text = "deviance " + plain(q.deviance, 4) + " for " + plain(q.dof, 3) + " degrees of freedom, p = " +
                     plain(q.p_value, 2) + "; " + plain(q.cycles, 3) + " cycles in " + std::to_string(q.points) + " points";
  if (!q.distrusted.empty()) text += ", " + std::to_string(q.distrusted.size()) + " of them set aside";
  if (q.scatter > 1.0) text += "; the scatter has " + plain(q.scatter, 3) + " times the variance that the shots allow";
  const bool per_amplitude = scan.overlay && scan.overlay->axis_kind == wire::AxisKind::amplitude;
  if (q.rival)
    text += "; the next best frequency is " + engineering(q.rival->rabi_hz, "Hz") + (per_amplitude ? " per amplitude" : "") + ", worse by " +
            plain(q.rival->deviance_above, 4) + " in deviance";
  return wrapped(text, "  quality: ") + told_apart(q);
}

}  // namespace

Label label(std::string_view field) {
  Label label{std::string(field), {}};
  for (const auto& [ending, unit] : kUnits)
    if (field.size() > ending.size() && field.substr(field.size() - ending.size()) == ending) {
      label.unit = unit;
      break;
    }
  for (const auto& [name, text] : kNames)
    if (name == field) label.text = text;
  return label;
}

std::string report(const wire::Fitted& scan, const Style& style) {
  std::string text = head(scan, style);
  if (const auto found = estimates(scan); !found.empty()) text += "\n" + found;
  text += pulses(scan, style) + sites(scan, style) + joint(scan) + dynamics(scan);
  if (scan.quality.points > 0) text += quality(scan);
  text += absent(scan);
  return text;
}

}  // namespace halfturn::cli
