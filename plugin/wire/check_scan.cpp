// SPDX-License-Identifier: Apache-2.0
#include <set>

#include "plugin/wire/check.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::wire {
namespace {

/// The one axis that the fields name, moved into the scan.
void take_axis(Checker& in, Scan& scan) {
  std::optional<Field> found;
  for (std::size_t k = 0; k < kAxisFields.size(); ++k) {
    const Field field = kAxisFields[k];
    if (!in.has(field)) continue;
    if (found)
      return in.fail(
          "bad_shape", in.place(field),
          "found `" + std::string(name(field)) + "` beside `" + std::string(name(*found)) + "`, expected exactly one axis");
    found = field;
    scan.axis_kind = static_cast<AxisKind>(k);
  }
  if (!found)
    return in.fail("missing_field", in.place(Field::duration_s),
                   "found no axis; send `duration_s`, `detuning_hz` or `amplitude`");
  Value& value = *in.find(*found);
  if (!value.rows.empty()) scan.axis = std::move(value.rows.front());
  if (scan.axis.empty()) return in.fail("bad_shape", in.place(*found), "found no points, expected at least one");
  if (scan.axis_kind == AxisKind::detuning) return;
  for (std::size_t i = 0; i < scan.axis.size(); ++i)
    if (scan.axis[i] < 0)
      return in.fail("bad_value", in.place(*found, i),
                     "found " + number_text(scan.axis[i]) + ", expected a number of at least 0");
}

void take_sites(Checker& in, Scan& scan) {
  Value* value = in.find(Field::sites);
  if (value == nullptr) return;
  if (value->texts.empty())
    return in.fail("bad_shape", in.place(Field::sites), "found no sites, expected at least one name");
  std::set<std::string_view> seen;
  for (std::size_t i = 0; i < value->texts.size(); ++i) {
    const std::string& site = value->texts[i];
    if (!is_printable(site, 48))
      return in.fail("bad_value", in.place(Field::sites, i),
                     "found " + in_quotes(site) + ", expected a name of 1 to 48 printable characters");
    if (!seen.insert(site).second)
      return in.fail("bad_value", in.place(Field::sites, i),
                     "found " + in_quotes(site) + " a second time, expected a name for each site");
  }
  scan.sites = std::move(value->texts);
}

void take_times(Checker& in, Scan& scan) {
  Value* value = in.find(Field::at_s);
  if (value == nullptr) return;
  if (!value->rows.empty()) scan.at_s = std::move(value->rows.front());
  if (scan.at_s.size() != scan.axis.size())
    in.fail("bad_shape", in.place(Field::at_s),
            "found " + std::to_string(scan.at_s.size()) + " times, expected one for each of the " +
                std::to_string(scan.axis.size()) + " points");
}

/// One reference: how many of how many. A reference of 0 shots or exposures was not measured.
void take_reference(Checker& in, Field observed, Field of, bool binomial, double& count, double& total) {
  const std::string all = binomial
                              ? "references hold `bright_counts`, `bright_shots`, `dark_counts` and `dark_shots`"
                              : "references hold `bright_photons`, `bright_exposures`, `dark_photons` and `dark_exposures`";
  in.need(observed, all);
  in.need(of, all);
  if (in.failed()) return;
  count = in.find(observed)->number;
  total = in.find(of)->number;
  for (const Field field : {observed, of})
    if (!is_count(in.find(field)->number))
      return in.fail("bad_value", in.place(field),
                     "found " + number_text(in.find(field)->number) + ", expected a whole number of at least 0");
  if (binomial && count > total)
    in.fail("bad_value", in.place(observed),
            "found " + number_text(count) + ", expected at most the shots, " + number_text(total));
}

constexpr bool is_binomial_reference(Field field) { return field >= Field::bright_counts && field <= Field::dark_shots; }

void take_references(Checker& in, ScanPart part, Scan& scan) {
  Value* value = in.find(Field::references);
  if (value == nullptr) return;
  Checker inner(value->maps.front(), in.place(Field::references), in.fault());
  bool counts = false, photons = false;
  for (const Entry& entry : value->maps.front().entries()) (is_binomial_reference(entry.field) ? counts : photons) = true;
  if (counts && photons)
    return in.fail("bad_shape", in.place(Field::references),
                   "found counts and photons, expected the references of one readout");
  const ReadoutKind kind = photons ? ReadoutKind::poisson : ReadoutKind::binomial;
  if (part == ScanPart::without_data) scan.readout_kind = kind;
  if (scan.readout_kind != kind)
    return in.fail("bad_shape", in.place(Field::references),
                   "found references of another readout than the scan's; `counts` go with counts, "
                   "`photons` with photons, and a `signal` has none");
  References& to = scan.references.emplace();
  if (photons) {
    take_reference(inner, Field::bright_photons, Field::bright_exposures, false, to.bright, to.bright_of);
    take_reference(inner, Field::dark_photons, Field::dark_exposures, false, to.dark, to.dark_of);
  } else {
    take_reference(inner, Field::bright_counts, Field::bright_shots, true, to.bright, to.bright_of);
    take_reference(inner, Field::dark_counts, Field::dark_shots, true, to.dark, to.dark_of);
  }
}

void take_prepared(Checker& in, Scan& scan) {
  const Value* value = in.find(Field::prepared);
  if (value == nullptr) return;
  scan.prepared_excited = value->text == "e";
  if (value->text != "g" && value->text != "e")
    in.fail("bad_value", in.place(Field::prepared), "found " + in_quotes(value->text) + ", expected \"g\" or \"e\"");
}

/// What describes a scan, beside its points.
void take_description(Checker& in, ScanPart part, Scan& scan) {
  in.need(Field::drive, "a scan names its drive");
  if (part == ScanPart::without_data) in.need(Field::scan_name, "the points that follow name their scan");
  scan.scan_name = in.printable(Field::scan_name, 128);
  scan.drive = in.name_of_drive(Field::drive);
  scan.taken_at = in.time(Field::taken_at);
  scan.pulse_s = in.positive(Field::pulse_s);
  scan.drive_amplitude = in.positive(Field::drive_amplitude);
  scan.carrier_hz = in.any_number(Field::carrier_hz);
  take_prepared(in, scan);
  if (const Value* value = in.find(Field::ambient)) scan.ambient.insert(value->named.begin(), value->named.end());
}

void check_pulse(Checker& in, const Scan& scan) {
  const bool on_duration = scan.axis_kind == AxisKind::duration;
  if (!on_duration)
    in.need(Field::pulse_s, "a scan of `" + std::string(axis_name(scan.axis_kind)) + "` says the length of its pulse");
  else if (scan.pulse_s)
    in.fail("bad_shape", in.place(Field::pulse_s),
            "found `pulse_s` in a scan of `duration_s`, whose axis is the pulse length; leave it out");
}

const FieldSet kData = {Field::duration_s, Field::detuning_hz, Field::amplitude, Field::counts, Field::shots, Field::signal,
                        Field::sigma, Field::photons, Field::exposures, Field::at_s};
const FieldSet kDescription = {Field::scan_name, Field::drive,           Field::taken_at,   Field::sites,
                               Field::pulse_s,   Field::drive_amplitude, Field::carrier_hz, Field::references,
                               Field::prepared,  Field::ambient};

}  // namespace

void check_scan(Checker& in, ScanPart part, Scan& scan) {
  if (part == ScanPart::without_data) in.allow_only(kDescription, "the scan of a `begin`, whose points follow by `points`");
  if (part != ScanPart::data) {
    take_description(in, part, scan);
    take_sites(in, scan);
  }
  if (part != ScanPart::without_data && !in.failed()) {
    take_axis(in, scan);
    if (!in.failed()) check_readout(in, part, scan);
    if (!in.failed()) take_times(in, scan);
    if (part == ScanPart::whole && !in.failed()) check_pulse(in, scan);
  }
  if (!in.failed()) take_references(in, part, scan);
}

}  // namespace halfturn::wire
