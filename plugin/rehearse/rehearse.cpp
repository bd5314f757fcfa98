// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/rehearse.hpp"

#include <unistd.h>

#include <atomic>
#include <chrono>
#include <cmath>
#include <csignal>
#include <iostream>
#include <string>
#include <utility>

#include "plugin/client/client.hpp"
#include "plugin/rehearse/night.hpp"
#include "plugin/rehearse/progress.hpp"

namespace halfturn::rehearse {
namespace {

std::atomic<bool> stop_requested = false;
static_assert(std::atomic<bool>::is_always_lock_free, "a signal handler may touch nothing else");

extern "C" void request_stop(int) { stop_requested = true; }

/// Catches SIGINT and SIGTERM while it lives, each once: a second one ends the program at once.
class StopSignals {
 public:
  StopSignals() {
    stop_requested = false;
    struct sigaction action {};
    action.sa_handler = request_stop;
    action.sa_flags = static_cast<int>(SA_RESETHAND);
    sigaction(SIGINT, &action, &interrupt_);
    sigaction(SIGTERM, &action, &terminate_);
  }
  ~StopSignals() {
    sigaction(SIGINT, &interrupt_, nullptr);
    sigaction(SIGTERM, &terminate_, nullptr);
  }
  StopSignals(const StopSignals&) = delete;
  StopSignals& operator=(const StopSignals&) = delete;

 private:
  struct sigaction interrupt_ {};
  struct sigaction terminate_ {};
};

void tell(const Fault& fault, std::ostream& progress) {
  progress << "rehearse: " << (fault.where.empty() ? "" : fault.where + ": ") << fault.message << " (" << fault.code << ")\n";
}

int status_of(const Fault& fault) {
  return fault.code == "bad_value" || fault.code == "bad_endpoint" || fault.code == "missing_field" || fault.code == "unknown_drive" ? 2 : 3;
}

int status_of(const Night& night) {
  if (night.ended_by) return 3;
  int refused = 0;
  for (const auto& drive : night.drives) refused += drive.tally().refused;
  return refused > 0 ? 1 : 0;
}

}  // namespace

int run(const RehearseOptions& options, std::ostream& out, std::ostream& progress) {
  const StopSignals signals;
  client::Client client(options.endpoint, std::chrono::milliseconds(std::llround(options.timeout_s * 1e3)));
  const Ask ask = [&](const std::string& kind, nlohmann::json body) { return client.request(kind, std::move(body)); };
  Result<Night> night = [&] {
    Progress line(progress, &progress == &std::cerr && isatty(STDERR_FILENO) == 1);
    return rehearse_night(options, ask, [&](const Moment& moment) {
      line.show(moment);
      return !stop_requested;
    });
  }();
  if (!night) {
    tell(night.error(), progress);
    return status_of(night.error());
  }
  if (night->ended_by) tell(*night->ended_by, progress);
  if (options.json) {
    out << to_json(*night).dump() << '\n';
  } else {
    write_table(*night, out);
  }
  return status_of(*night);
}

}  // namespace halfturn::rehearse
