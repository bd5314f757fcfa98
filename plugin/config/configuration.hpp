// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "model/atom/transition.hpp"
#include "model/infer/prior.hpp"
#include "model/quantity/result.hpp"
#include "model/recalibrate/policy.hpp"
#include "plugin/config/diagnosis.hpp"
#include "plugin/wire/request.hpp"

/// A configuration, read and checked: SI units, angular rates in rad/s.
namespace halfturn::config {

struct Sockets {
  std::string requests = "tcp://127.0.0.1:7411";
  std::string feed = "tcp://127.0.0.1:7412";
  std::string results = "tcp://127.0.0.1:7413";
  std::string display = "127.0.0.1:7480";
};

struct Drive {
  std::string name;
  std::optional<atom::Transition> transition;
  std::optional<double> waist_m;              // 1/e^2 radius of the beam's intensity
  std::optional<double> carrier_uncertainty;  // rad/s
  std::optional<infer::Known> floor, contrast;
  wire::ReadoutKind readout_kind =
      wire::ReadoutKind::binomial;        // what floor and contrast are of: fractions, signal, photons
  std::optional<infer::Expected> expect;  // rad/s
  std::optional<infer::DynamicsSet> dynamics;
  std::vector<dynamics::Mode> motion;     // modes that the drive sees; none: no motion
  std::optional<infer::Known> dead_time;  // s
  dynamics::LostReads lost_reads = dynamics::LostReads::dark;
  double impurity = 0.0;
  std::vector<recalibrate::Pulse> pulses;  // in the order of the file
  recalibrate::Accept accept;
};

struct Configuration {
  Sockets sockets;
  std::string log_path;  // absolute, or relative to the working directory
  bool insecure = false;
  std::map<std::string, Drive> drives;
  std::string text;         // as read
  std::string fingerprint;  // wire::fingerprint of the text
};

/// Reads a configuration from its text, as schemas/configuration.schema.json describes it. `folder` is what the log's path
/// is relative to; empty for the working directory. All faults are found at once, in the order of the text.
struct Reading {
  std::optional<Configuration> configuration;  // present exactly where there are no faults
  std::vector<Diagnosis> faults;
};
Reading read(const std::string& text, const std::string& folder);

/// Reads the file, and the log's path relative to its folder; a file that cannot be read is a fault at 0:0.
Reading read_file(const std::string& path);

}  // namespace halfturn::config
