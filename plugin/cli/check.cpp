// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/check.hpp"

#include "model/quantity/format.hpp"
#include "plugin/cli/layout.hpp"
#include "plugin/config/configuration.hpp"

namespace halfturn::cli {

namespace {

std::string summary(const config::Drive& drive) {
  std::string text = drive.transition ? drive.transition->name + "; " : "no transition, so nothing is inferred about light; ";
  const char* separator = drive.pulses.size() == 1 ? "pulse " : "pulses ";
  for (const auto& pulse : drive.pulses) {
    text += separator + pulse.name + " " + plain(pulse.angle_rad) + " rad in " + engineering(pulse.length_s, "s");
    if (pulse.adjust == recalibrate::Adjust::amplitude) text += " at amplitude " + plain(pulse.amplitude);
    separator = ", ";
  }
  return text;
}

}  // namespace

Exit check(const std::string& file, Streams& streams) {
  const auto reading = config::read_file(file);
  for (const auto& each : reading.faults) streams.out << config::to_text(each, file) << '\n';
  if (!reading.configuration) return kBadInput;
  streams.out << file << ": in order\n";
  for (const auto& [name, drive] : reading.configuration->drives) streams.out << wrapped(summary(drive), "  " + name + ": ");
  return kDone;
}

}  // namespace halfturn::cli
