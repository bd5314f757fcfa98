// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/fit.hpp"

#include <optional>

#include "plugin/cli/report.hpp"
#include "plugin/config/configuration.hpp"
#include "plugin/config/scan_file.hpp"
#include "plugin/service/service.hpp"
#include "plugin/wire/encode.hpp"

namespace halfturn::cli {

namespace {

std::string drive_names(const config::Configuration& configuration) {
  std::string names;
  for (const auto& [name, drive] : configuration.drives) names += (names.empty() ? "" : ", ") + name;
  return names;
}

/// The scan's drive in the configuration; null without a configuration.
Result<const config::Drive*> find_drive(const std::optional<config::Configuration>& configuration, const std::string& name) {
  if (!configuration) return nullptr;
  if (name.empty())
    return fault("missing_field", "drive",
                 "the file names no drive: give --drive, or a line `# drive: NAME` before the header; the configuration has " +
                     drive_names(*configuration));
  const auto found = configuration->drives.find(name);
  if (found == configuration->drives.end())
    return fault("unknown_drive", "drive", "found " + name + ", expected one of the configuration: " + drive_names(*configuration));
  return &found->second;
}

Exit fit_one(const std::string& file, const FitOptions& options, const std::optional<config::Configuration>& configuration,
             Streams& streams) {
  auto reading = config::read_scan_file(file);
  for (const auto& each : reading.faults) streams.err << config::to_text(each, file) << '\n';
  if (!reading.scan) return kBadInput;
  auto& scan = *reading.scan;
  if (!options.drive.empty()) scan.drive = options.drive;
  const auto drive = find_drive(configuration, scan.drive);
  if (!drive) return print_fault(streams.err, file, drive.error()), kBadInput;

  const auto fitted = service::fit_alone(scan, *drive, {});
  if (options.json)
    streams.out << wire::encode(wire::Reply(fitted), wire::Encoding::json) << '\n';
  else
    streams.out << report(fitted, streams.style) << (options.files.size() > 1 ? "\n" : "");
  return fitted.verdict == "refuse" ? kRefused : kDone;
}

}  // namespace

Exit fit(const FitOptions& options, Streams& streams) {
  std::optional<config::Configuration> configuration;
  if (!options.config.empty()) {
    auto reading = config::read_file(options.config);
    for (const auto& each : reading.faults) streams.err << config::to_text(each, options.config) << '\n';
    if (!reading.configuration) return kBadInput;
    configuration = std::move(reading.configuration);
  }
  Exit status = kDone;
  for (const auto& file : options.files) status = worst(status, fit_one(file, options, configuration, streams));
  return status;
}

}  // namespace halfturn::cli
