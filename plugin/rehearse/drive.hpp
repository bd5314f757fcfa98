// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <functional>
#include <map>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "model/quantity/result.hpp"
#include "plugin/rehearse/options.hpp"
#include "plugin/rehearse/strategy.hpp"
#include "plugin/wire/request.hpp"

/// One drive through the night: its scans, what it is told, and what it makes of that.
namespace halfturn::rehearse {

/// Sends a request of a kind and waits for its reply; an `error` reply is a Fault.
using Ask = std::function<Result<nlohmann::json>(const std::string& kind, nlohmann::json body)>;

struct PulseInForce {
  double angle_rad = 0;
  double length_s = 0;
};

/// What became of the scans.
struct Tally {
  int flops = 0;
  int lines = 0;
  int applied = 0;  // a pulse or the carrier changed
  int kept = 0;     // nothing changed, and the verdict was not `refuse`
  int refused = 0;  // the verdict was `refuse`
  std::map<std::string, int> refused_for;  // by the most serious reason
  int spoilt = 0;                          // scans with a mishap
  int spoilt_refused = 0;
  int intervals = 0;       // 95 % intervals for the Rabi frequency of flops that were not refused, and how many held the truth
  int intervals_true = 0;
};

/// A drive of the daemon and the apparatus behind it. Three strategies have the same start: the pulse and carrier in force.
///
/// with Halfturn: loads what a verdict `apply` proposes, and tells the daemon so. The scans are taken with what it has in force.
/// every fit taken blindly: loads every flop's `exact_s` and moves by every line's offset, whatever the verdict, wherever there
///   is a positive number.
/// without recalibration: never changes anything.
class RehearsedDrive {
 public:
  /// Asks the daemon for the drive's pulses (`status`) and their angles (a `fit` that is not stored).
  static Result<RehearsedDrive> begin(const RehearseOptions& options, wire::Time starts_at, const Ask& ask);

  /// Everything that happens in the minute that begins at `time_s`: scans that are due, then the scores.
  Result<void> minute(double time_s, const Ask& ask);

  const std::string& name() const { return options_.drive; }
  const std::string& pulse() const { return pulse_; }
  double angle_rad() const { return pulses_.at(pulse_).angle_rad; }
  const Apparatus& apparatus() const { return apparatus_; }
  const Tally& tally() const { return tally_; }
  const std::string& last_verdict() const { return last_verdict_; }
  std::vector<Strategy> strategies() const { return {with_halfturn_, blind_, untouched_}; }

 private:
  RehearsedDrive(const RehearseOptions& options, wire::Time starts_at, std::map<std::string, PulseInForce> pulses, std::string pulse);

  Result<void> flop(double time_s, const Ask& ask);
  Result<void> line(double time_s, const Ask& ask);
  nlohmann::json message(double time_s, const TakenScan& taken, const char* axis, int number);
  Result<nlohmann::json> send(const TakenScan& taken, nlohmann::json scan, const Ask& ask);
  void count_refusal(const nlohmann::json& reply, const TakenScan& taken);
  void count_interval(double time_s, const nlohmann::json& reply);
  Result<void> obey(double time_s, const nlohmann::json& reply, const Ask& ask);
  Result<void> report_applied(double time_s, const Ask& ask);
  void obey_blindly(const nlohmann::json& reply, bool is_flop);
  std::string at(double time_s) const;

  RehearseOptions options_;
  wire::Time starts_at_;
  std::map<std::string, PulseInForce> pulses_;  // in force with Halfturn
  std::string pulse_;                           // the one that is scored
  Apparatus apparatus_;
  Strategy with_halfturn_, blind_, untouched_;
  Tally tally_;
  std::string last_verdict_ = "none";
};

/// The commanded lengths of the `number`th flop. Odd and even ones differ in span and spacing (2.5 and 2.9 periods; a tenth
/// fewer points), so that a sudden change seen by one can be confirmed by the next.
std::vector<double> flop_lengths(double pi_pulse_s, std::int64_t points, int number);

/// Detunings over 1.5 full widths of the line of a square pi pulse (0.7987/length: Rabi 1937) to either side.
std::vector<double> line_detunings(double pi_pulse_s, std::int64_t points);

}  // namespace halfturn::rehearse
