// SPDX-License-Identifier: Apache-2.0
#include <spdlog/spdlog.h>

#include <utility>

#include "plugin/daemon/daemon.hpp"
#include "plugin/daemon/notify.hpp"

/// What changes while the daemon runs: that it is to stop, and its configuration.
namespace halfturn::daemon {

namespace {

constexpr int kFeedAtStop = 1000;  // what may have gathered in the feed's queue (its high-water mark)
constexpr std::size_t kFaultsInStatus = 20;

}  // namespace

void Daemon::begin_stopping() {
  if (stop_at_) return;
  notify("STOPPING=1\nSTATUS=Answering what was accepted");
  options_.lines->info("stopping: {} requests are still to be answered", in_flight_);
  const auto stop_at = std::chrono::steady_clock::now() + options_.stop_within;
  drain_feed();
  stop_at_ = stop_at;
  service_.set_stopping();
  health_at_ = std::chrono::steady_clock::now();  // to be told at once
}

/// What has arrived on the feed was taken from its sender, so it is accepted before the door closes.
void Daemon::drain_feed() {
  sockets_->close_feed();
  const auto until = std::chrono::steady_clock::now() + options_.stop_within / 4;
  for (int i = 0; i < kFeedAtStop; ++i) {
    auto incoming = sockets_->take_feed();
    if (!incoming) return;
    if (std::chrono::steady_clock::now() >= until)
      return reject({"", {"stopping", "", "the daemon is stopping, and what still lay on the feed was not read: send it again"}, {}});
    take_from_feed(std::move(*incoming));
  }
}

void Daemon::take_new_configuration() {
  if (!options_.read_again) return options_.lines->warn("this daemon was started without a file to read again");
  notify("RELOADING=1");
  auto reading = options_.read_again();
  troubles_.clear();
  if (reading.configuration) {
    auto fresh = std::make_shared<config::Configuration>(std::move(*reading.configuration));
    report_differences(*fresh);
    configuration_ = fresh;
    service_.configure(fresh);
    options_.lines->info("the configuration was read again and is in force for requests from now on");
  } else {
    report_faults(reading.faults);
  }
  notify("READY=1\nSTATUS=Serving");
}

void Daemon::report_faults(const std::vector<config::Diagnosis>& faults) {
  const auto& name = options_.configuration_name;
  troubles_ = {name + " is faulty and was not taken; the earlier configuration stays in force. Mend it, then reload (SIGHUP)."};
  for (const auto& each : faults) {
    const auto text = config::to_text(each, name);
    options_.lines->error("{}", text);
    if (troubles_.size() <= kFaultsInStatus) troubles_.push_back(text);
  }
  options_.lines->error("{}", troubles_.front());
}

/// Sockets and the log are opened once; what a new configuration says of them waits for the next start.
void Daemon::report_differences(const config::Configuration& fresh) {
  const auto& a = options_.configuration->sockets;
  const auto& b = fresh.sockets;
  std::string changed;
  if (a.requests != b.requests || a.feed != b.feed || a.results != b.results || a.display != b.display) changed = "sockets";
  if (options_.configuration->log_path != fresh.log_path) changed += changed.empty() ? "log" : " and log";
  if (changed.empty()) return;
  troubles_ = {"the configuration's " + changed + " changed: restart the daemon for that to take effect"};
  options_.lines->warn("{}", troubles_.front());
}

}  // namespace halfturn::daemon
