// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <utility>
#include <vector>

/// Requests as plain structs. What they mean, field by field, is in schemas/messages.schema.json; units are in the names.
namespace halfturn::wire {

/// Nanoseconds since 1970-01-01 00:00:00 UTC.
using Time = std::int64_t;

enum class Kind { fit, begin, points, end, applied, history, next, hold, release, status };
enum class Encoding { msgpack, json };
enum class AxisKind { duration, detuning, amplitude };
enum class ReadoutKind { binomial, gaussian, poisson };

/// Bright and dark references measured beside a scan: counts out of shots, or photons out of exposures.
struct References {
  double bright = 0, bright_of = 0;
  double dark = 0, dark_of = 0;
};

/// A scan as it came: the axis and one row of readout a site (one row where it has no `sites`). `observed` holds counts,
/// signal or photons, `weight` shots, sigma or exposures, each [site][point]; a point that was not measured has the weight 0
/// (binomial, Poisson) or an infinite sigma (Gaussian).
struct Scan {
  std::string scan_name;
  std::string drive;
  std::optional<Time> taken_at;
  AxisKind axis_kind = AxisKind::duration;
  std::vector<double> axis;  // s, Hz, or relative amplitude
  ReadoutKind readout_kind = ReadoutKind::binomial;
  std::vector<std::string> sites;
  std::vector<std::vector<double>> observed;
  std::vector<std::vector<double>> weight;
  std::optional<double> pulse_s;
  std::optional<double> drive_amplitude;
  std::optional<double> carrier_hz;
  std::optional<References> references;
  bool prepared_excited = false;
  std::vector<double> at_s;
  std::map<std::string, double> ambient;
};

struct Options {
  bool store = true;
  std::optional<std::int64_t> overlay_points;
  std::vector<std::string> dynamics;
  std::optional<double> level;
};

/// Any request: the members that its kind does not have are empty.
struct Request {
  Encoding encoding = Encoding::msgpack;
  Kind kind = Kind::status;
  std::string id;
  std::vector<Scan>
      scans;  // fit: `scan` (one) or `scans` (a joint fit, `joint` set); begin: the scan without data; points: the data
  bool joint = false;
  std::string scan_name;    // points, end
  Options options;
  std::string drive;        // applied, history, next, hold, release
  std::optional<Time> applied_at;
  std::map<std::string, double> pulses;
  std::optional<double> carrier_hz;
  std::optional<Time> since, until;
  std::optional<std::int64_t> limit;
  std::optional<std::int64_t> shots;
  std::string by, why;
  std::string digest;  // fingerprint of the content apart from `id`, in hexadecimal: same content, same digest
};

}  // namespace halfturn::wire
