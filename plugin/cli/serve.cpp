// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/serve.hpp"

#include <signal.h>
#include <spdlog/spdlog.h>
#include <unistd.h>

#include <cstdlib>
#include <exception>
#include <memory>
#include <utility>

#include "plugin/cli/layout.hpp"
#include "plugin/cli/version.hpp"
#include "plugin/daemon/daemon.hpp"
#include "plugin/daemon/lines.hpp"
#include "plugin/log/sqlite_log.hpp"

namespace halfturn::cli {

namespace {

constexpr std::string_view kCaution =
    "Halfturn proposes settings and controls nothing. Limits and interlocks belong to the apparatus. Local safety rules and "
    "the responsible laser-safety officer come first.";

spdlog::level::level_enum level(const ServeOptions& options) {
  return options.quiet ? spdlog::level::warn : options.verbose ? spdlog::level::debug : spdlog::level::info;
}

void print_faults(const config::Reading& reading, const std::string& file, std::ostream& err) {
  for (const auto& each : reading.faults) err << config::to_text(each, file) << '\n';
}

}  // namespace

Exit serve(const ServeOptions& options, Streams& streams) {
  auto reading = config::read_file(options.config);
  if (!reading.configuration) return print_faults(reading, options.config, streams.err), kBadInput;
  if (!options.quiet) streams.err << wrapped(kCaution, "") << std::flush;

  ::signal(SIGPIPE, SIG_IGN);  // the reader of the log lines may go away
  auto log = log::open(reading.configuration->log_path, log::Access::read_write);
  if (!log) return print_fault(streams.err, "", log.error()), kFailed;

  daemon::Options daemon_options;
  daemon_options.configuration = std::make_shared<config::Configuration>(std::move(*reading.configuration));
  daemon_options.log = std::move(*log);
  daemon_options.version = kVersion;
  daemon_options.lines = daemon::lines_to(STDERR_FILENO, level(options));
  daemon_options.read_again = [file = options.config] { return config::read_file(file); };
  daemon_options.configuration_name = options.config;
  daemon_options.threads = options.threads;
  daemon_options.signals = true;

  daemon::Daemon daemon(std::move(daemon_options));
  if (const auto started = daemon.start(); !started) return print_fault(streams.err, options.config, started.error()), kFailed;
  // A fit that outlasted the time to stop, or a failure, must not hold the exit; the log is as after the last commit.
  try {
    const int status = daemon.run();
    // The stop is done: one more signal must not turn it into a death by signal.
    for (const int signal : {SIGINT, SIGTERM, SIGHUP}) ::signal(signal, SIG_IGN);
    if (daemon.in_flight() > 0) std::_Exit(status);
    return static_cast<Exit>(status);
  } catch (const std::exception& error) {
    print_fault(streams.err, "", {"internal", "", std::string("the program failed: ") + error.what()});
    streams.err << std::flush;
    std::_Exit(kFailed);
  }
}

}  // namespace halfturn::cli
