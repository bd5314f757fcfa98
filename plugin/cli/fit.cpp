// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/fit.hpp"

#include <optional>
#include <vector>

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

/// The scan of a file with its drive; what is wrong is said.
std::optional<wire::Scan> read_scan(const std::string& file, const FitOptions& options, Streams& streams) {
  auto reading = config::read_scan_file(file);
  for (const auto& each : reading.faults) streams.err << config::to_text(each, file) << '\n';
  if (!reading.scan) return std::nullopt;
  if (!options.drive.empty()) reading.scan->drive = options.drive;
  return std::move(reading.scan);
}

Exit print(const wire::Fitted& fitted, bool more, const FitOptions& options, Streams& streams) {
  if (options.json)
    streams.out << wire::encode(wire::Reply(fitted), wire::Encoding::json) << '\n';
  else
    streams.out << report(fitted, streams.style) << (more ? "\n" : "");
  return fitted.verdict == "refuse" ? kRefused : kDone;
}

Exit fit_one(const std::string& file, const FitOptions& options, const std::optional<config::Configuration>& configuration,
             Streams& streams) {
  const auto scan = read_scan(file, options, streams);
  if (!scan) return kBadInput;
  const auto drive = find_drive(configuration, scan->drive);
  if (!drive) return print_fault(streams.err, file, drive.error()), kBadInput;
  return print(service::fit_alone(*scan, *drive, {}), options.files.size() > 1, options, streams);
}

/// A scan of many sites, of amplitudes or of another drive has no place in a joint fit.
Result<void> fits_in(const wire::Scan& scan, const wire::Scan& first) {
  if (scan.axis_kind == wire::AxisKind::amplitude)
    return fault("not_available", "amplitude", "a joint fit is of duration_s and detuning_hz scans");
  if (!scan.sites.empty() || scan.observed.size() != 1) return fault("not_available", "site", "a joint fit is of scans of one site each");
  if (scan.drive != first.drive)
    return fault("bad_value", "drive", "found `" + scan.drive + "`, expected the drive of the first file, `" + first.drive + "`; a joint fit is of one drive");
  return {};
}

Exit fit_joint(const FitOptions& options, const std::optional<config::Configuration>& configuration, Streams& streams) {
  std::vector<wire::Scan> scans;
  bool sound = true;
  for (const auto& file : options.files) {
    auto scan = read_scan(file, options, streams);
    const auto place = scan ? fits_in(*scan, scans.empty() ? *scan : scans.front()) : Result<void>();
    if (!place) print_fault(streams.err, file, place.error());
    sound = sound && scan && place;
    if (scan) scans.push_back(std::move(*scan));
  }
  if (!sound) return kBadInput;
  const auto drive = find_drive(configuration, scans.front().drive);
  if (!drive) return print_fault(streams.err, options.files.front(), drive.error()), kBadInput;
  const auto fitted = service::fit_together_alone(scans, *drive, {});
  if (!fitted) return print_fault(streams.err, "--together", fitted.error()), kBadInput;
  return print(*fitted, false, options, streams);
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
  if (options.together) return fit_joint(options, configuration, streams);
  Exit status = kDone;
  for (const auto& file : options.files) status = worst(status, fit_one(file, options, configuration, streams));
  return status;
}

}  // namespace halfturn::cli
