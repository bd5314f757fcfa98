// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <string>
#include <vector>

#include "plugin/rehearse/ensemble.hpp"
#include "plugin/rehearse/integrator.hpp"

/// An invented apparatus: what its drive truly does at every moment of a night, and the counts that its scans bring.
namespace halfturn::rehearse {

/// How the apparatus behaves. The defaults are invented, of the size seen with a narrow optical line: a drive that lost an
/// eighth of its light while warming up, a line that a reference cavity carries along.
struct ApparatusSettings {
  double rabi_hz = 125e3;               // at the start of the night
  double rabi_walk = 0.01;              // relative, standard deviation after one hour of random walk
  double warm_up = -0.06;               // relative change of the Rabi frequency once warm
  double warm_up_s = 5400;              // 1/e time of that
  double jumps_per_hour = 0;            // sudden changes (a knocked mirror): mean number, and standard deviation of each
  double jump_size = 0.06;
  double line_hz = 80e6;                // the line on the experiment's own scale, at the start
  double line_walk_hz = 700;            // standard deviation after one hour of random walk
  double carrier_start_hz = 80e6 - 600; // the carrier before anybody corrected it
  double dead_time_s = 10e-9;           // the light follows the command so much later
  double decay_per_s = 1 / 21.3e-6;     // the lifetime of Sr 5s5p 3P1 is 21.3 us
  double loss_per_s = 0;
  double dephasing_per_s = 0;
  double floor = 0.017;                 // fraction of shots that read bright without excitation
  double contrast = 0.94;
  bool lost_reads_bright = false;
  double start_excited = 0;             // impurity of the preparation
  Ensemble ensemble;                    // drawn anew each shot
  double mishap_probability = 0.02;     // of a scan that something spoils
  double temperature_c = 21.0;          // of the laboratory, at the start
  double temperature_rise_c = 1.5;      // once warm
};

/// What is true at one moment.
struct Truth {
  double rabi_hz = 0;
  double line_hz = 0;
  double temperature_c = 0;
};

/// Something that spoils a scan: no light at all, none from some point on, or none for a few points.
enum class Mishap { none, dark, unlocked, dropout };

/// Counts out of `shots` at every point of the axis (lengths in s, or detunings from the carrier in Hz).
struct TakenScan {
  std::vector<double> axis;
  std::vector<std::int64_t> counts;
  std::int64_t shots = 0;
  Mishap mishap = Mishap::none;
};

/// The apparatus. What is true depends on settings and seed alone, not on the scans taken; the counts depend on the scans
/// before them as well.
class Apparatus {
 public:
  /// Prepares `night_s` seconds; later moments are like the last one.
  Apparatus(const ApparatusSettings& settings, std::uint64_t seed, double night_s);

  /// What is true `time_s` after the start: known every minute, linear in between.
  Truth truth(double time_s) const;

  /// Probability that a shot reads bright, averaged over nothing: `member` says which atom.
  double bright_probability(double time_s, double pulse_s, double drive_hz, const Member& member = {}) const;

  /// A scan of the commanded pulse length, the drive at `carrier_hz`.
  TakenScan take_flop(double time_s, const std::vector<double>& lengths_s, std::int64_t shots, double carrier_hz);

  /// A scan of the drive's frequency around `carrier_hz` with pulses of the commanded length `pulse_s`.
  TakenScan take_line(double time_s, const std::vector<double>& detunings_hz, double pulse_s, std::int64_t shots, double carrier_hz);

  /// What a commanded length truly turns the atom by, the drive at `carrier_hz`: sqrt(Omega^2 + Delta^2) (pulse - dead time), rad.
  double rotation(double time_s, double pulse_s, double carrier_hz) const;

  /// The temperature as a thermometer with 20 mK of noise reads it.
  double read_temperature(double time_s);

  const ApparatusSettings& settings() const { return settings_; }

 private:
  struct Setting {
    double pulse_s;
    double drive_hz;
  };
  TakenScan take(double time_s, const std::vector<double>& axis, const std::vector<Setting>& points, std::int64_t shots);
  std::int64_t count_bright(double time_s, const Setting& point, std::int64_t shots, bool light);
  double readout(const Populations& populations) const;
  void walk(std::uint64_t seed, double night_s);

  ApparatusSettings settings_;
  std::vector<Truth> path_;  // one a minute
  Random shots_;
  Random mishaps_;
  Random thermometer_;
};

}  // namespace halfturn::rehearse
