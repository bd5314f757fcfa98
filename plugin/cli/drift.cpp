// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/drift.hpp"

#include <filesystem>
#include <fstream>
#include <optional>

#include "plugin/cli/drift_report.hpp"
#include "plugin/log/sqlite_log.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::cli {

namespace {

Result<std::optional<wire::Time>> read_time(const std::string& text, const std::string& option) {
  if (text.empty()) return std::optional<wire::Time>();
  auto time = wire::parse_time(text);
  if (!time) time = wire::parse_time(text + "T00:00:00Z");
  if (!time)
    return fault("bad_value", option, "found " + text + ", expected a time such as 2026-02-03T18:00:00Z or a date such as 2026-02-03");
  return time;
}

Result<DriftReport> read_report(const DriftOptions& options) {
  const auto since = read_time(options.since, "--since");
  if (!since) return tl::unexpected(since.error());
  const auto until = read_time(options.until, "--until");
  if (!until) return tl::unexpected(until.error());
  if (std::error_code none; !std::filesystem::exists(options.log, none))
    return fault("bad_value", "--log", "found no file " + options.log + ", expected the log of a daemon, as its configuration names it");
  auto log = log::open(options.log, log::Access::read_only);
  if (!log) return tl::unexpected(log.error());
  return drift_report(**log, options.drive, *since, *until);
}

bool write_file(const std::string& path, const std::string& text) {
  std::ofstream file(path, std::ios::binary | std::ios::trunc);
  file << text;
  file.close();
  return file.good();
}

}  // namespace

Exit drift(const DriftOptions& options, Streams& streams) {
  const auto report = read_report(options);
  if (!report) {
    print_fault(streams.err, "", report.error());
    return report.error().code == "log_unavailable" ? kFailed : kBadInput;
  }
  if (!options.csv.empty() && !write_file(options.csv, to_csv(*report))) {
    print_fault(streams.err, "", {"", "--csv", options.csv + " could not be written: is its folder there, and has the disk room?"});
    return kFailed;
  }
  if (options.json)
    streams.out << to_json(*report) << '\n';
  else
    streams.out << to_table(*report, streams.style.on());
  return kDone;
}

}  // namespace halfturn::cli
