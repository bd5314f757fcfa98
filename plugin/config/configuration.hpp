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
  std::optional<double> waist_m;                        // 1/e^2 radius of the beam's intensity
  std::optional<double> carrier_uncertainty;            // rad/s
  std::optional<infer::Known> floor, contrast;
  std::optional<infer::Expected> expect;                // rad/s
  std::optional<infer::DynamicsSet> dynamics;
  std::optional<infer::Known> dead_time;                // s
  dynamics::LostReads lost_reads = dynamics::LostReads::dark;
  double impurity = 0.0;
  std::vector<recalibrate::Pulse> pulses;               // in the order of the file
  recalibrate::Accept accept;
};

struct Configuration {
  Sockets sockets;
  std::string log_path;                                 // absolute, or relative to the working directory
  bool insecure = false;
  std::map<std::string, Drive> drives;
  std::string text;                                     // as read
  std::string fingerprint;                              // of the text, hexadecimal
};

/// A fault of a configuration: the place as `line:column` (from 1) and `path` (`drives.red.pulses.flip.length`).
struct Diagnosis {
  int line = 0, column = 0;
  std::string path;
  std::string message;  // `found ..., expected ...`
};

/// Reads a configuration from its text. `file` names it in messages; `folder` is what the log's path is relative to. All faults
/// are found at once.
struct Reading {
  std::optional<Configuration> configuration;           // present exactly where there are no faults
  std::vector<Diagnosis> faults;
};
Reading read(const std::string& text, const std::string& folder);

/// Reads the file; a file that cannot be read is a fault at 0:0.
Reading read_file(const std::string& path);

/// `file:line:column: path: message`, as `check` prints it.
std::string to_text(const Diagnosis& diagnosis, const std::string& file);

}  // namespace halfturn::config
