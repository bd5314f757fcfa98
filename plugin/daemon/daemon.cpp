// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/daemon.hpp"

#include <spdlog/spdlog.h>

#include <algorithm>
#include <cstdlib>
#include <thread>
#include <utility>

#include "plugin/daemon/notify.hpp"
#include "plugin/daemon/scan_line.hpp"
#include "plugin/wire/time.hpp"

/// Start, the loop and its steps, the end.
namespace halfturn::daemon {

namespace {

using std::chrono::steady_clock;

constexpr int kMessagesARound = 64;  // of one socket before the others have their turn
constexpr std::chrono::seconds kCommitAtStop{4};  // with the time to stop and 1 s of linger below the 20 s that systemd grants

}  // namespace

wire::Time SystemClock::now() const { return wire::now(); }

Daemon::Daemon(Options options)
    : options_(std::move(options)),
      configuration_(options_.configuration),
      service_(configuration_, *options_.log, clock_, options_.version) {
  if (options_.signals) signals_.emplace();
}

Daemon::~Daemon() = default;

Result<void> Daemon::start() {
  if (auto restored = service_.restore(); !restored) return restored;
  auto sockets = Sockets::open(configuration_->sockets, options_.limits.bytes);
  if (!sockets) return tl::unexpected(sockets.error());
  sockets_ = std::move(*sockets);
  publisher_.emplace(new_boot(), clock_, [this](auto topic, auto message) { sockets_->publish(topic, message); });
  start_threads();
  endpoints_ = sockets_->endpoints();
  options_.lines->info("listening: requests {}, feed {}, results {}", endpoints_.requests, endpoints_.feed, endpoints_.results);
  return {};
}

void Daemon::start_threads() {
  const unsigned threads = options_.threads > 0 ? options_.threads : std::max(1u, std::thread::hardware_concurrency());
  ledger_.emplace(service_, order_, outbox_);
  workers_.emplace(threads, options_.fit, [this](Job& job) { order_.fitted(job); });
  last_settled_ = health_at_ = steady_clock::now();
}

int Daemon::run() {
  notify("READY=1\nSTATUS=Serving");
  while (!finished()) {
    wait_for_work();
    take_signals();
    take_requests();
    take_feed();
    take_subscriptions();
    send_settled();
    publish_health();
  }
  close();
  return 0;
}

void Daemon::stop() {
  stop_asked_ = true;
  wake_.ring();
}

void Daemon::reload() {
  reload_asked_ = true;
  wake_.ring();
}

bool Daemon::out_of_time() const { return stop_at_ && steady_clock::now() >= *stop_at_; }

bool Daemon::finished() const { return out_of_time() || (stop_at_ && in_flight_ == 0); }

void Daemon::wait_for_work() {
  std::vector<zmq::pollitem_t> items = {
      {sockets_->requests().handle(), 0, ZMQ_POLLIN, 0},
      {sockets_->results().handle(), 0, ZMQ_POLLIN, 0},
      {nullptr, outbox_.descriptor(), ZMQ_POLLIN, 0},
      {nullptr, wake_.descriptor(), ZMQ_POLLIN, 0},
  };
  // A feed that brings more than can be fitted waits in its own queue, and then with its sender.
  const bool room = in_flight_ < static_cast<std::size_t>(options_.limits.in_flight);
  if (room && !stop_at_) items.push_back({sockets_->feed().handle(), 0, ZMQ_POLLIN, 0});
  if (signals_) items.push_back({nullptr, signals_->descriptor(), ZMQ_POLLIN, 0});

  const auto until = stop_at_ ? std::min(health_at_, *stop_at_) : health_at_;
  const auto left = std::chrono::ceil<std::chrono::milliseconds>(until - steady_clock::now());
  wait_for(items, std::max<std::int64_t>(0, left.count()));
}

void Daemon::take_signals() {
  wake_.clear();
  if (stop_asked_.exchange(false)) begin_stopping();
  if (reload_asked_.exchange(false)) take_new_configuration();
  if (!signals_) return;
  while (const auto signal = signals_->take()) {
    if (*signal == Signal::interrupt && stop_at_) std::_Exit(3);
    if (*signal == Signal::reload)
      take_new_configuration();
    else
      begin_stopping();
  }
}

void Daemon::take_requests() {
  for (int i = 0; i < kMessagesARound && !out_of_time(); ++i) {
    auto incoming = sockets_->take_request();
    if (!incoming) return;
    take_request(std::move(*incoming));
  }
}

void Daemon::take_feed() {
  const auto room = static_cast<std::size_t>(options_.limits.in_flight);
  for (int i = 0; i < kMessagesARound && in_flight_ < room && !stop_at_; ++i) {
    auto incoming = sockets_->take_feed();
    if (!incoming) return;
    take_from_feed(std::move(*incoming));
  }
}

void Daemon::take_subscriptions() {
  while (const auto prefix = sockets_->take_subscription()) publisher_->replay(*prefix);
}

void Daemon::send_settled() {
  for (auto& outgoing : outbox_.take_all()) {
    for (const auto& parcel : outgoing.replies) send(parcel.route, parcel.message);
    for (auto& landing : outgoing.landings) answer_joined(landing.key, std::move(landing.reply));
    for (const auto& publication : outgoing.publications) publisher_->publish(publication);
    for (const auto& scan : outgoing.scans) options_.lines->info("{}", scan_line(scan));
    in_flight_ -= outgoing.jobs;

    const auto now = steady_clock::now();
    const double seconds = std::chrono::duration<double>(now - last_settled_).count() / static_cast<double>(outgoing.jobs);
    seconds_a_job_ += 0.2 * (std::min(seconds, 5.0) - seconds_a_job_);
    last_settled_ = now;
  }
}

void Daemon::publish_health() {
  const auto now = steady_clock::now();
  if (now < health_at_) return;
  publisher_->publish("health/", wire::Health{state()});
  health_at_ = now + std::chrono::seconds(1);
}

/// Whoever could not be served in time is told so; what is being committed at this moment is still answered.
void Daemon::close() {
  const auto left = order_.close();
  for (const auto& job : left) {
    const auto error = stopping_error(job->route.id);
    if (job->route.answers) answer(job->route, error);
    else reject(error);
    answer_joined(job->key, error);
  }
  if (!left.empty()) options_.lines->warn("{} accepted requests were not decided in time", left.size());
  if (ledger_->ended_within(kCommitAtStop))
    ledger_.reset();
  else
    options_.lines->error("the log did not take the last decisions in time; whoever waits for them asks again with the same id");
  send_settled();
  sockets_.reset();
  options_.lines->info("stopped");
}

wire::State Daemon::state() const {
  auto state = service_.state();
  state.limits = options_.limits;
  state.troubles.insert(state.troubles.end(), troubles_.begin(), troubles_.end());
  return state;
}

}  // namespace halfturn::daemon
