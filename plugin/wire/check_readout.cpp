// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <limits>

#include "plugin/wire/check.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::wire {
namespace {

using Rows = std::vector<std::vector<double>>;
using Form = Value::Form;

std::string plural(std::size_t count, const std::string& what) {
  return std::to_string(count) + " " + what + (count == 1 ? "" : "s");
}

std::string points_of(const Scan& scan) {
  return plural(scan.axis.size(), "point") + " of `" + std::string(axis_name(scan.axis_kind)) + "`";
}

/// The one readout that the fields name; none, with a fault, where there is none or more than one.
std::optional<ReadoutKind> readout_of(Checker& in) {
  std::optional<ReadoutKind> found;
  for (std::size_t k = 0; k < 3; ++k) {
    if (!in.has(kObservedFields[k]) && !in.has(kWeightFields[k])) continue;
    if (found) {
      const Field other = in.has(kObservedFields[k]) ? kObservedFields[k] : kWeightFields[k];
      in.fail("bad_shape", in.place(other),
              "found `" + std::string(name(other)) +
                  "` beside another readout, expected one pair: "
                  "`counts` and `shots`, `signal` and `sigma`, or `photons` and `exposures`");
      return std::nullopt;
    }
    found = static_cast<ReadoutKind>(k);
    const std::string pair =
        "`" + std::string(name(kObservedFields[k])) + "` and `" + std::string(name(kWeightFields[k])) + "` come together";
    in.need(kObservedFields[k], pair);
    in.need(kWeightFields[k], pair);
  }
  if (!found)
    in.fail("missing_field", in.place(Field::counts),
            "found no readout; send `counts` and `shots`, `signal` and `sigma`, or `photons` and `exposures`");
  return found;
}

/// Whether every row is as long as the axis; the fault names the first that is not.
bool fits_axis(Checker& in, Field field, const Value& value, const Scan& scan) {
  for (std::size_t s = 0; s < value.rows.size(); ++s) {
    if (value.rows[s].size() == scan.axis.size()) continue;
    const std::string where = value.form == Form::rows ? in.place(field, s) : in.place(field);
    in.fail("bad_shape", where,
            "found " + plural(value.rows[s].size(), "number") + ", expected one for each of the " + points_of(scan));
    return false;
  }
  return true;
}

/// The observed rows, one a site.
bool take_observed(Checker& in, ScanPart part, Field field, Scan& scan) {
  Value& value = *in.find(field);
  const std::string what = "`" + std::string(name(field)) + "`";
  if (value.form == Form::single) {
    in.fail("bad_type", in.place(field), "found the number " + number_text(value.number) + ", expected a list of numbers");
    return false;
  }
  if (part == ScanPart::whole && value.form == Form::rows && scan.sites.empty()) {
    in.fail("bad_shape", in.place(field),
            "found a list of lists, expected one list of numbers; " + what + "[site][point] needs `sites`");
    return false;
  }
  if (!scan.sites.empty() && (value.form != Form::rows || value.rows.size() != scan.sites.size())) {
    const std::string found = value.form == Form::rows ? plural(value.rows.size(), "row") : "one list of numbers";
    in.fail("bad_shape", in.place(field),
            "found " + found + ", expected one list for each of the " + plural(scan.sites.size(), "site"));
    return false;
  }
  if (value.rows.empty()) {
    in.fail("bad_shape", in.place(field), "found no rows, expected one list for each site");
    return false;
  }
  if (!fits_axis(in, field, value, scan)) return false;
  scan.observed = std::move(value.rows);
  return true;
}

/// The weights: one number for all, one list for every site, or one list a site.
bool take_weight(Checker& in, Field field, Scan& scan) {
  Value& value = *in.find(field);
  const std::size_t rows = scan.observed.size();
  if (value.form == Form::single) {
    scan.weight.assign(rows, std::vector<double>(scan.axis.size(), value.number));
    return true;
  }
  if (value.form == Form::rows && value.rows.size() != rows) {
    in.fail("bad_shape", in.place(field),
            "found " + plural(value.rows.size(), "row") + ", expected as many as observed, " + std::to_string(rows));
    return false;
  }
  if (!fits_axis(in, field, value, scan)) return false;
  if (value.form == Form::rows) scan.weight = std::move(value.rows);
  else scan.weight.assign(rows, value.rows.front());
  return true;
}

/// What is wrong with one measured point; empty where nothing is.
struct Wrong {
  bool in_weight = false;
  std::string sentence;
};

Wrong wrong_point(ReadoutKind kind, double observed, double weight) {
  const std::string found_weight = "found " + number_text(weight) + ", expected ";
  if (kind == ReadoutKind::gaussian) {
    if (!(weight > 0)) return {true, found_weight + "a number above 0 (or null for a point that was not measured)"};
    return {};
  }
  if (!is_count(weight)) return {true, found_weight + "a whole number of at least 0"};
  if (weight == 0 || std::isnan(observed)) return {};
  if (!is_count(observed)) return {false, "found " + number_text(observed) + ", expected a whole number of at least 0"};
  if (kind == ReadoutKind::binomial && observed > weight)
    return {false, "found " + number_text(observed) + ", expected at most the shots, " + number_text(weight)};
  return {};
}

std::string point_place(const Checker& in, Field field, Form form, std::size_t site, std::size_t point) {
  if (form == Form::single) return in.place(field);
  return form == Form::rows ? in.place(field, site) + "[" + std::to_string(point) + "]" : in.place(field, point);
}

/// Checks every point, and writes those that were not measured in the one way of Scan.
void check_points(Checker& in, Scan& scan, Form observed_form, Form weight_form) {
  const auto k = static_cast<std::size_t>(scan.readout_kind);
  const bool gaussian = scan.readout_kind == ReadoutKind::gaussian;
  for (std::size_t s = 0; s < scan.observed.size(); ++s) {
    for (std::size_t p = 0; p < scan.axis.size(); ++p) {
      double &observed = scan.observed[s][p], &weight = scan.weight[s][p];
      const Wrong wrong = std::isnan(weight) ? Wrong{} : wrong_point(scan.readout_kind, observed, weight);
      if (!wrong.sentence.empty()) {
        const Field field = wrong.in_weight ? kWeightFields[k] : kObservedFields[k];
        return in.fail("bad_value", point_place(in, field, wrong.in_weight ? weight_form : observed_form, s, p),
                       wrong.sentence);
      }
      if (!std::isnan(observed) && !std::isnan(weight) && weight != 0) continue;
      observed = 0;
      weight = gaussian ? std::numeric_limits<double>::infinity() : 0;
    }
  }
}

}  // namespace

void check_readout(Checker& in, ScanPart part, Scan& scan) {
  const auto kind = readout_of(in);
  if (!kind || in.failed()) return;
  scan.readout_kind = *kind;
  const Field observed = kObservedFields[static_cast<std::size_t>(*kind)],
              weight = kWeightFields[static_cast<std::size_t>(*kind)];
  const Form observed_form = in.find(observed)->form, weight_form = in.find(weight)->form;
  if (take_observed(in, part, observed, scan) && take_weight(in, weight, scan))
    check_points(in, scan, observed_form, weight_form);
}

}  // namespace halfturn::wire
