// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <functional>
#include <limits>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "model/quantity/result.hpp"

/// The record of scans, fits and applied pulses. The rest of the program sees this interface; SQL stays in sqlite_log.cpp.
namespace halfturn::log {

/// Nanoseconds since 1970-01-01 00:00:00 UTC.
using Time = std::int64_t;

/// Written as NULL.
inline constexpr double kNull = std::numeric_limits<double>::quiet_NaN();

/// One thing that happened to a drive, with what the drive's state is folded from, in columns. NaN (stored as NULL) where a
/// column does not concern the kind.
struct Event {
  std::int64_t number = 0;  // order of commitment, from 1; given by the log
  std::string drive;
  std::string kind;  // fit, applied, hold, release
  Time happened_at = 0;     // taken_at or applied_at
  Time received_at = 0;
  std::string id;           // of the request
  std::string scan_name;
  std::string axis;         // duration, detuning, amplitude; empty unless a fit
  std::string verdict;      // apply, keep, refuse
  std::string effect;       // how it moved the tracked state: none, first, accepted, pending, confirmed, aside
  std::string reasons;      // codes, most serious first, separated by spaces
  double rabi_hz = kNull, rabi_sigma_hz = kNull, rabi_low_hz = kNull, rabi_high_hz = kNull;
  double rabi_mean_hz = kNull, rabi_mean_sigma_hz = kNull;  // of the ensemble: what the track follows
  double generalised_hz = kNull, generalised_sigma_hz = kNull;
  double line_offset_hz = kNull, line_offset_sigma_hz = kNull, line_width_hz = kNull;  // width: full, at half maximum
  double carrier_hz = kNull;
  double dead_time_s = kNull, dead_time_sigma_s = kNull;
  double dead_time_points_s = kNull, dead_time_points_sigma_s = kNull;  // as the points alone tell it: what history adds up
  double intensity_w_m2 = kNull;
  double drive_amplitude = kNull;
  double span = kNull, spacing = kNull;  // of the scan's axis, s or Hz, or relative amplitude
  double rabi_per_amplitude_hz = kNull, rabi_per_amplitude_sigma_hz = kNull;
  double compression = kNull;            // part of the coupling lost at the largest amplitude of a scan of amplitudes
  std::string by, why;           // hold, release
  std::map<std::string, double> pulses_s;    // fit: lengths proposed; applied: lengths reported
  std::map<std::string, double> amplitudes;  // the same of pulses whose amplitude is adjusted; no name stands in both
};

/// A fit's bulk beside its event: what came, what was answered, under which configuration.
struct Bulk {
  std::string scan;           // canonical MessagePack
  std::string fingerprint;    // of the scan
  std::string configuration;  // its fingerprint
  std::string reply;          // MessagePack without overlay
  std::map<std::string, double> ambient;
};

struct StoredReply {
  std::string digest;  // of the request's content
  std::string reply;   // MessagePack
};

struct Range {
  std::string drive;  // empty: all
  std::optional<Time> since, until;  // since <= happened_at < until
  std::int64_t limit = 1000;         // 0: no limit
  std::int64_t after = 0;            // number of the event to go on behind, among those at `since`; 0: from the start
};

/// One connection, one thread at a time. A Fault has the code `log_unavailable` and says what failed and what to do; the group
/// of writes is then rolled back, and a later `begin` tries afresh. Misuse has other codes and leaves the group as it was:
/// `bad_value` (an event that makes no sense), `id_reused`, `internal` (a write outside a group, a group inside a group).
class Log {
 public:
  virtual ~Log() = default;

  /// A group of writes: `begin`, any number of `append` and `keep_reply`, then `commit` (durable on return) or `roll_back`.
  virtual Result<void> begin() = 0;
  virtual Result<void> commit() = 0;
  virtual void roll_back() = 0;

  /// Appends an event, with a fit's bulk where given. Returns its number.
  virtual Result<std::int64_t> append(const Event& event, const Bulk* bulk) = 0;

  /// Keeps the reply to a request for seven days, so that the same request finds it again. The first reply to an id stands:
  /// the same digest again changes nothing, another one is a Fault `id_reused`.
  virtual Result<void> keep_reply(const std::string& id, const StoredReply& reply, Time now) = 0;
  virtual Result<std::optional<StoredReply>> find_reply(const std::string& id) = 0;
  /// Forgets the replies kept before that time. May stand outside a group.
  virtual Result<void> forget_replies(Time before) = 0;

  /// Stores the text of a configuration by its fingerprint, once. May stand outside a group.
  virtual Result<void> keep_configuration(const std::string& fingerprint, const std::string& text, Time now) = 0;

  /// Every event of all drives in order of commitment: what states are folded from.
  virtual Result<void> replay(const std::function<void(const Event&)>& visit) = 0;

  /// Fits in a range of time, oldest first (by happened_at, then number), with their stored replies.
  struct Row {
    Event event;
    std::string reply;
  };
  virtual Result<std::vector<Row>> history(const Range& range) = 0;

  /// Events of every kind in a range of time, oldest first, without replies.
  virtual Result<std::vector<Event>> events(const Range& range) = 0;

  /// The stored scan of an event, canonical MessagePack; none where it was not kept.
  virtual Result<std::optional<std::string>> scan(std::int64_t event_number) = 0;
};

}  // namespace halfturn::log
