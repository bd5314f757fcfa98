// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <limits>

#include "plugin/wire/check.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::wire {
namespace {

/// What a kind holds beside `proto`, `kind` and `id`.
struct KindRow {
  FieldSet required, optional;
};

KindRow fields_of(Kind kind) {
  switch (kind) {
    case Kind::fit: return {{}, {Field::scan, Field::scans, Field::options}};
    case Kind::begin: return {{Field::scan}, {Field::options}};
    case Kind::points:
      return {{Field::scan_name},
              {Field::duration_s, Field::detuning_hz, Field::amplitude, Field::counts, Field::shots, Field::signal,
               Field::sigma, Field::photons, Field::exposures, Field::at_s}};
    case Kind::end: return {{Field::scan_name}, {Field::options}};
    case Kind::applied: return {{Field::drive}, {Field::applied_at, Field::pulses, Field::carrier_hz}};
    case Kind::history: return {{Field::drive}, {Field::since, Field::until, Field::limit}};
    case Kind::next: return {{Field::drive, Field::shots}, {}};
    case Kind::hold: return {{Field::drive, Field::by, Field::why}, {}};
    case Kind::release: return {{Field::drive, Field::by}, {Field::why}};
    case Kind::status: return {};
  }
  return {};
}

void check_kind_fields(Checker& in, Kind kind) {
  const KindRow row = fields_of(kind);
  in.allow_only(FieldSet{Field::proto, Field::kind, Field::id} | row.required | row.optional,
                "a message `" + std::string(name(kind)) + "`");
  for (std::size_t i = 0; i < kFields; ++i)
    if (row.required.has(static_cast<Field>(i)))
      in.need(static_cast<Field>(i), "a message `" + std::string(name(kind)) + "` holds it");
}

void take_scan(Values& values, const std::string& prefix, ScanPart part, std::optional<Fault>& fault, Request& request) {
  Checker in(values, prefix, fault);
  check_scan(in, part, request.scans.emplace_back());
}

void take_joint_scans(Checker& in, Request& request) {
  Value& value = *in.find(Field::scans);
  request.joint = true;
  if (value.maps.empty()) return in.fail("bad_shape", in.place(Field::scans), "found no scans, expected at least one");
  for (std::size_t i = 0; i < value.maps.size() && !in.failed(); ++i) {
    take_scan(value.maps[i], in.place(Field::scans, i), ScanPart::whole, in.fault(), request);
    if (request.scans[i].drive != request.scans[0].drive)
      in.fail("bad_value", in.place(Field::scans, i) + ".drive",
              "found " + in_quotes(request.scans[i].drive) + ", expected the drive of the first scan, " +
                  in_quotes(request.scans[0].drive) + "; a joint fit is of one drive");
  }
}

void take_scans(Checker& in, Request& request) {
  if (request.kind == Kind::points) {
    Scan& scan = request.scans.emplace_back();
    check_scan(in, ScanPart::data, scan);
    return;
  }
  if (in.has(Field::scan) && in.has(Field::scans))
    return in.fail("bad_shape", "scans", "found `scans` beside `scan`, expected one of them");
  if (in.has(Field::scans)) return take_joint_scans(in, request);
  if (request.kind == Kind::fit) in.need(Field::scan, "a message `fit` holds `scan`, or `scans` for a joint fit");
  if (Value* value = in.find(Field::scan)) {
    const ScanPart part = request.kind == Kind::begin ? ScanPart::without_data : ScanPart::whole;
    take_scan(value->maps.front(), "scan", part, in.fault(), request);
  }
}

void take_options(Checker& in, Request& request) {
  Value* value = in.find(Field::options);
  if (value == nullptr) return;
  Checker inner(value->maps.front(), "options", in.fault());
  Options& options = request.options;
  if (const Value* store = inner.find(Field::store)) options.store = store->flag;
  options.overlay_points = inner.whole(Field::overlay_points, 0, 10'000);
  options.level = inner.any_number(Field::level);
  if (options.level && !(*options.level > 0.5 && *options.level < 0.9999))
    in.fail("bad_value", "options.level",
            "found " + number_text(*options.level) + ", expected a number between 0.5 and 0.9999, such as 0.95");
  Value* dynamics = inner.find(Field::dynamics);
  if (dynamics == nullptr) return;
  options.dynamics = std::move(dynamics->texts);
  if (options.dynamics.empty())
    in.fail("bad_shape", "options.dynamics", "found no names, expected at least one; leave it out for all");
  for (std::size_t i = 0; i < options.dynamics.size(); ++i)
    if (!is_name(options.dynamics[i]))
      in.fail("bad_value", inner.place(Field::dynamics, i),
              "found " + in_quotes(options.dynamics[i]) + ", expected the name of a candidate, such as \"decay\"");
}

void take_pulses(Checker& in, Request& request) {
  if (request.kind == Kind::applied && !in.has(Field::pulses) && !in.has(Field::carrier_hz))
    in.fail("missing_field", "pulses", "found neither `pulses` nor `carrier_hz`; say what the experiment now uses");
  const Value* value = in.find(Field::pulses);
  if (value == nullptr) return;
  if (value->named.empty()) in.fail("bad_shape", "pulses", "found no pulses, expected at least one");
  for (const auto& [pulse, length] : value->named) {
    if (!is_name(pulse))
      in.fail("bad_value", "pulses",
              "found the pulse " + in_quotes(pulse) + ", expected a name of 1 to 48 of A-Z a-z 0-9 _ -");
    if (!(length > 0))
      in.fail("bad_value", "pulses." + pulse, "found " + number_text(length) + ", expected a number above 0");
    request.pulses.emplace(pulse, length);
  }
}

void take_shots_to_spend(Checker& in, Request& request) {
  if (request.kind != Kind::next) return;
  if (in.find(Field::shots)->form != Value::Form::single)
    return in.fail("bad_type", "shots", "found a list, expected one whole number: the shots to spend");
  request.shots = in.whole(Field::shots, 1, 1'000'000'000);
}

void take_rest(Checker& in, Request& request) {
  if (request.kind == Kind::points || request.kind == Kind::end) request.scan_name = in.printable(Field::scan_name, 128);
  request.drive = in.name_of_drive(Field::drive);
  request.applied_at = in.time(Field::applied_at);
  request.carrier_hz = in.any_number(Field::carrier_hz);
  request.since = in.time(Field::since);
  request.until = in.time(Field::until);
  request.limit = in.whole(Field::limit, 1, 100'000);
  request.by = in.printable(Field::by, 128);
  request.why = in.printable(Field::why, 1'000);
  take_options(in, request);
  take_pulses(in, request);
  if (!in.failed()) take_shots_to_spend(in, request);
}

}  // namespace

Result<Request> check_request(Values& values) {
  std::optional<Fault> fault;
  Checker in(values, "", fault);
  Request request;
  in.need(Field::proto, "a request holds `proto`: 1");
  in.need(Field::kind, "a request holds its `kind`, such as \"fit\"");
  in.need(Field::id, "a request holds an `id` that never repeats, such as a UUID");
  request.id = in.printable(Field::id, 64);
  if (!fault) {
    const auto kind = std::find(kKindNames.begin(), kKindNames.end(), in.find(Field::kind)->text);
    request.kind = static_cast<Kind>(kind - kKindNames.begin());
    check_kind_fields(in, request.kind);
  }
  if (!fault) take_scans(in, request);
  if (!fault) take_rest(in, request);
  if (fault) return tl::unexpected<Fault>(*fault);
  return request;
}

}  // namespace halfturn::wire
