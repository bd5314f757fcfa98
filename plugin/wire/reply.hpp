// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <limits>
#include <map>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include "model/quantity/result.hpp"
#include "plugin/wire/request.hpp"

/// Replies and published messages as plain structs. An optional member that is empty is left out of the message; a double
/// that is not finite is written as null.
namespace halfturn::wire {

/// `{value, sigma, low, high}`, or `{value: null, why}` where there is no value. A value may have no symmetric error or no
/// interval (NaN, written as null with `why`).
struct Estimate {
  double value = std::numeric_limits<double>::quiet_NaN();
  double sigma = std::numeric_limits<double>::quiet_NaN();
  double low = std::numeric_limits<double>::quiet_NaN();
  double high = std::numeric_limits<double>::quiet_NaN();
  std::string why;
};

struct Reason {
  std::string code;
  std::string text;
};

struct Pulse {
  std::string verdict;  // apply, keep, refuse
  double angle_rad = 0, length_s = 0, exact_s = 0, sigma_s = 0, low_s = 0, high_s = 0;
  std::int64_t ticks = 0;
  double previous_s = 0, change = 0, rotation_error_rad = 0, tick_error_rad = 0, transfer = 0;
  bool in_amplitude =
      false;  // `adjust: amplitude`: the members `_s` are relative drive amplitudes and are written `_amplitude`
};

struct Candidate {
  std::string name;
  double aicc = 0, weight = 0;
};

struct Rival {
  double rabi_hz = 0;
  double deviance_above = 0;  // how much worse it fits than the best
};

/// Two estimates, by name, and how their errors go together, -1 to 1.
struct Correlation {
  std::array<std::string, 2> between;
  double value = 0;
};

struct Quality {
  double deviance = 0, dof = 0, p_value = 0, cycles = 0;
  std::int64_t points = 0;
  double range_low_hz = 0, range_high_hz = 0;
  double scatter = 1;  // variance of the residuals over what the shots allow
  std::optional<Rival> rival;
  std::vector<std::int64_t> distrusted;  // indices of points set aside as outliers; deviance, dof and scatter are without them
  double condition = std::numeric_limits<double>::quiet_NaN();  // of the information scaled to a unit diagonal
  std::optional<Correlation> correlation;                        // the strongest
  std::vector<std::string> at_bound;                             // estimates whose parameter lies at its bound
};

struct Overlay {
  AxisKind axis_kind = AxisKind::duration;
  std::vector<double> axis, signal, low, high;
};

/// One site of a scan of many; written by columns, one array a field.
struct SiteFit {
  std::string name;
  std::string verdict;
  std::vector<Reason> reasons;
  std::vector<std::pair<std::string, Estimate>> estimates;
  std::vector<std::pair<std::string, Pulse>> pulses;
  std::string dynamics;
  Quality quality;
};

/// One scan of a joint fit.
struct JointScan {
  std::string scan_name;
  AxisKind axis_kind = AxisKind::duration;
  std::optional<Time> taken_at;
  std::int64_t points = 0;
  double deviance = 0, dof = 0, p_value = 0, scatter = 1;  // under the shared values
  double strain = 0;  // deviance that values of its own would gain it
  std::vector<std::int64_t> distrusted;
};

struct Fitted {
  std::string id;  // of the request; empty: left out
  std::string scan_name, drive;
  std::optional<Time> taken_at;
  std::string verdict;
  std::vector<Reason> reasons;
  std::vector<std::string> assumed;
  std::vector<std::pair<std::string, Estimate>> estimates;  // by contract name, in the contract's order
  std::vector<std::pair<std::string, Pulse>> pulses;
  double carrier_shift_hz = 0;
  std::string dynamics;
  std::vector<Candidate> candidates;
  Quality quality;
  std::optional<Overlay> overlay;
  std::vector<JointScan> scans;  // of a joint fit
  std::vector<SiteFit> sites;
  bool stored = false;
  bool replayed = false;
};

struct Noted {
  std::string id;
};

struct Rows {
  std::string id;
  std::vector<std::string> rows;  // each a `fitted` in MessagePack, without overlay
  std::optional<std::string> next;
};

/// The next scan's points that teach most per shot.
struct Advised {
  std::string id;
  std::string drive;
  AxisKind axis_kind = AxisKind::duration;
  std::vector<double> axis;
  std::vector<std::int64_t> shots;                              // at each point
  std::vector<std::pair<std::string, double>> expected_sigma;   // by the name of the estimate
};

struct DriveState {
  std::map<std::string, double> pulses_s;
  std::optional<double> rabi_hz;
  std::string last_verdict;
  std::optional<Time> due_at;
  bool held = false;
  std::map<std::string, double> amplitudes{};  // of pulses whose amplitude is adjusted; empty: left out
  std::optional<double> rabi_per_amplitude_hz{};
};

struct Limits {
  std::int64_t bytes = 16 << 20, points = 100'000, sites = 10'000, in_flight = 256;
  double scan_idle_s = 600;
};

struct State {
  std::string id;
  std::string version;
  double uptime_s = 0;
  bool stopping = false;
  std::string log;  // `ok`, or what is wrong with it
  Limits limits;
  std::map<std::string, DriveState> drives;
  std::vector<std::string> troubles;
};

struct Error {
  std::string id;  // empty where the request's could not be read
  Fault fault;
  std::optional<double> retry_after_s;
};

/// A reply that is stored already, in MessagePack; `replayed` is set when it is sent.
struct Stored {
  std::string id;
  std::string message;
};

using Reply = std::variant<Fitted, Noted, Rows, State, Error, Stored, Advised>;

/// Published as `live/DRIVE/`: the overlay of a scan in progress.
struct Live {
  std::string drive, scan_name;
  std::int64_t points = 0;  // so far
  Overlay overlay;
};

/// Published as `drift/DRIVE/`.
struct Drift {
  std::string drive;
  Estimate rabi_hz;
  double rate_per_hour = std::numeric_limits<double>::quiet_NaN();  // relative change an hour
  std::optional<Time> due_at;
  std::optional<Estimate> rabi_per_amplitude_hz{};  // of a drive whose amplitude was scanned
};

/// Published as `health/`.
struct Health {
  State state;
};

/// What precedes the body of every published message.
struct Published {
  std::string boot;
  std::uint64_t sequence = 0;
  Time published_at = 0;
};

}  // namespace halfturn::wire
