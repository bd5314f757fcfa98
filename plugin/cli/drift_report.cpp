// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/drift_report.hpp"

#include <algorithm>
#include <cmath>
#include <map>
#include <set>

namespace halfturn::cli {
namespace {

drift::Verdict verdict_of(const std::string& word) {
  if (word == "apply") return drift::Verdict::apply;
  return word == "keep" ? drift::Verdict::keep : drift::Verdict::refuse;
}

/// The amplitude that most duration scans of the drive were taken at; NaN stands for those that did not say.
double usual_amplitude(const std::vector<const log::Event*>& fits) {
  std::map<double, std::size_t> counts;
  std::size_t unsaid = 0;
  for (const auto* fit : fits) {
    if (fit->axis != "duration") continue;
    if (std::isnan(fit->drive_amplitude)) ++unsaid;
    else ++counts[fit->drive_amplitude];
  }
  double usual = std::numeric_limits<double>::quiet_NaN();
  std::size_t most = unsaid;
  for (const auto& [amplitude, count] : counts) {
    if (count > most) usual = amplitude;
    most = std::max(most, count);
  }
  return usual;
}

bool same_amplitude(double a, double b) { return (std::isnan(a) && std::isnan(b)) || a == b; }

struct Columns {
  std::vector<std::int64_t> time_ns;
  std::vector<double> rabi_hz, sigma_hz, intensity_w_m2;
  std::vector<drift::Verdict> verdict;
};

Result<DriveDrift> drive_drift(const std::string& name, const std::vector<const log::Event*>& fits) {
  DriveDrift result;
  result.drive = name;
  result.drive_amplitude = usual_amplitude(fits);
  Columns columns;
  for (const auto* fit : fits) {
    const bool other = fit->axis == "duration" && !same_amplitude(fit->drive_amplitude, result.drive_amplitude);
    const bool counted = fit->axis == "duration" && !other;
    result.at_other_amplitudes += other ? 1 : 0;
    columns.time_ns.push_back(fit->happened_at);
    columns.rabi_hz.push_back(counted ? fit->rabi_hz : drift::kNone);
    columns.sigma_hz.push_back(counted ? fit->rabi_sigma_hz : drift::kNone);
    columns.intensity_w_m2.push_back(counted ? fit->intensity_w_m2 : drift::kNone);
    columns.verdict.push_back(verdict_of(fit->verdict));
  }
  auto summary =
      drift::summarise({columns.time_ns, columns.rabi_hz, columns.sigma_hz, columns.verdict, columns.intensity_w_m2});
  if (!summary) return tl::unexpected<Fault>(summary.error());
  result.summary = std::move(*summary);
  return result;
}

/// Nothing where the log has ever seen the drive.
Result<void> check_known(log::Log& log, const std::string& drive) {
  std::set<std::string> names;
  auto done = log.replay([&](const log::Event& event) { names.insert(event.drive); });
  if (!done || names.count(drive) != 0) return done;
  std::string list;
  for (const auto& name : names) list += (list.empty() ? "" : ", ") + name;
  if (list.empty()) list = "none yet";
  return fault("unknown_drive", "drive", "The log has no drive `" + drive + "`; it has " + list + ".");
}

}  // namespace

Result<DriftReport> drift_report(log::Log& log, const std::string& drive, std::optional<log::Time> since,
                                 std::optional<log::Time> until) {
  if (since && until && *until <= *since) {
    return fault("bad_value", "until", "found an end that is not after the start, expected a later one");
  }
  log::Range range;
  range.drive = drive;
  range.since = since;
  range.until = until;
  range.limit = 0;
  auto events = log.events(range);
  if (!events) return tl::unexpected<Fault>(events.error());
  if (events->empty() && !drive.empty()) {
    if (auto known = check_known(log, drive); !known) return tl::unexpected<Fault>(known.error());
  }
  DriftReport report{drive, since, until, {}, {}};
  for (auto& event : *events) {
    if (event.kind == "fit") report.fits.push_back(std::move(event));
  }
  std::map<std::string, std::vector<const log::Event*>> by_drive;
  for (const auto& fit : report.fits) by_drive[fit.drive].push_back(&fit);
  for (const auto& [name, fits] : by_drive) {
    auto part = drive_drift(name, fits);
    if (!part) return tl::unexpected<Fault>(part.error());
    report.drives.push_back(std::move(*part));
  }
  return report;
}

}  // namespace halfturn::cli
