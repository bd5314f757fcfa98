// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/write_request.hpp"

#include <algorithm>

#include "plugin/wire/fields.hpp"

namespace halfturn::wire {
namespace {

void compact(Writer& to, Field field, double value) {
  to.key(name(field));
  to.compact_number(value);
}

void compact(Writer& to, Field field, const std::optional<double>& value) {
  if (value) compact(to, field, *value);
}

void compact_list(Writer& to, const std::vector<double>& values) {
  to.open_list();
  for (const double value : values) to.compact_number(value);
  to.close_list();
}

void time(Writer& to, Field field, const std::optional<Time>& value) {
  if (!value) return;
  to.key(name(field));
  to.time(*value);
}

void text(Writer& to, Field field, const std::string& value) {
  if (!value.empty()) to.field(name(field), value);
}

void whole(Writer& to, Field field, const std::optional<std::int64_t>& value) {
  if (value) to.field(name(field), *value);
}

void numbers_by_name(Writer& to, Field field, const std::map<std::string, double>& values) {
  if (values.empty()) return;
  to.key(name(field));
  to.open_map();
  for (const auto& [entry, value] : values) {
    to.key(entry);
    to.compact_number(value);
  }
  to.close_map();
}

void rows(Writer& to, const std::vector<std::vector<double>>& values) {
  to.open_list();
  for (const auto& row : values) compact_list(to, row);
  to.close_list();
}

void weight(Writer& to, const std::vector<std::vector<double>>& values, bool is_rows) {
  const auto& first = values.front();
  const bool same_rows = std::all_of(values.begin(), values.end(), [&](const auto& row) { return row == first; });
  const bool same_points = std::all_of(first.begin(), first.end(), [&](double v) { return v == first.front(); });
  if (same_rows && same_points && !first.empty() && std::isfinite(first.front())) return to.compact_number(first.front());
  if (same_rows || !is_rows) return compact_list(to, first);
  rows(to, values);
}

void data(Writer& to, const Scan& scan) {
  if (scan.axis.empty() || scan.observed.empty()) return;
  const auto k = static_cast<std::size_t>(scan.readout_kind);
  const bool is_rows = !scan.sites.empty() || scan.observed.size() > 1;
  to.key(axis_name(scan.axis_kind));
  compact_list(to, scan.axis);
  to.key(name(kObservedFields[k]));
  if (is_rows) rows(to, scan.observed);
  else compact_list(to, scan.observed.front());
  to.key(name(kWeightFields[k]));
  weight(to, scan.weight, is_rows);
}

void references(Writer& to, const Scan& scan) {
  if (!scan.references) return;
  const bool photons = scan.readout_kind == ReadoutKind::poisson;
  to.key(name(Field::references));
  to.open_map();
  compact(to, photons ? Field::bright_photons : Field::bright_counts, scan.references->bright);
  compact(to, photons ? Field::bright_exposures : Field::bright_shots, scan.references->bright_of);
  compact(to, photons ? Field::dark_photons : Field::dark_counts, scan.references->dark);
  compact(to, photons ? Field::dark_exposures : Field::dark_shots, scan.references->dark_of);
  to.close_map();
}

void times(Writer& to, const Scan& scan) {
  if (scan.at_s.empty()) return;
  to.key(name(Field::at_s));
  compact_list(to, scan.at_s);
}

void options(Writer& to, const Options& options) {
  if (options.store && !options.overlay_points && options.dynamics.empty() && !options.level) return;
  to.key(name(Field::options));
  to.open_map();
  if (!options.store) to.field(name(Field::store), false);
  whole(to, Field::overlay_points, options.overlay_points);
  if (!options.dynamics.empty()) to.field(name(Field::dynamics), options.dynamics);
  compact(to, Field::level, options.level);
  to.close_map();
}

void scans(Writer& to, const Request& request) {
  if (request.kind == Kind::points && !request.scans.empty()) {
    data(to, request.scans.front());
    times(to, request.scans.front());
  } else if (request.joint) {
    to.key(name(Field::scans));
    to.open_list();
    for (const Scan& scan : request.scans) write_scan(to, scan);
    to.close_list();
  } else if (!request.scans.empty()) {
    to.key(name(Field::scan));
    write_scan(to, request.scans.front());
  }
}

}  // namespace

void write_scan(Writer& to, const Scan& scan) {
  to.open_map();
  text(to, Field::scan_name, scan.scan_name);
  text(to, Field::drive, scan.drive);
  time(to, Field::taken_at, scan.taken_at);
  if (!scan.sites.empty()) to.field(name(Field::sites), scan.sites);
  data(to, scan);
  compact(to, Field::pulse_s, scan.pulse_s);
  compact(to, Field::drive_amplitude, scan.drive_amplitude);
  compact(to, Field::carrier_hz, scan.carrier_hz);
  references(to, scan);
  if (scan.prepared_excited) to.field(name(Field::prepared), "e");
  times(to, scan);
  numbers_by_name(to, Field::ambient, scan.ambient);
  to.close_map();
}

void write_fields(Writer& to, const Request& request) {
  text(to, Field::scan_name, request.scan_name);
  scans(to, request);
  text(to, Field::drive, request.drive);
  time(to, Field::applied_at, request.applied_at);
  numbers_by_name(to, Field::pulses, request.pulses);
  compact(to, Field::carrier_hz, request.carrier_hz);
  time(to, Field::since, request.since);
  time(to, Field::until, request.until);
  whole(to, Field::limit, request.limit);
  whole(to, Field::shots, request.shots);
  text(to, Field::by, request.by);
  text(to, Field::why, request.why);
  options(to, request.options);
}

void write_content(Writer& to, const Request& request) {
  to.open_map();
  to.field(name(Field::kind), name(request.kind));
  write_fields(to, request);
  to.close_map();
}

}  // namespace halfturn::wire
