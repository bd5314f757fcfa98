// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <atomic>
#include <chrono>
#include <functional>
#include <map>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "plugin/daemon/ledger.hpp"
#include "plugin/daemon/publisher.hpp"
#include "plugin/daemon/signals.hpp"
#include "plugin/daemon/sockets.hpp"
#include "plugin/daemon/workers.hpp"
#include "plugin/service/service.hpp"

namespace spdlog {
class logger;
}

/// The daemon: sockets, threads and queues around the Service. It knows no formula and no SQL.
namespace halfturn::daemon {

class SystemClock : public service::Clock {
 public:
  wire::Time now() const override;
};

struct Options {
  std::shared_ptr<const config::Configuration> configuration;
  std::unique_ptr<log::Log> log;
  std::string version;
  std::shared_ptr<spdlog::logger> lines;                             // where the program's own log lines go
  std::function<config::Reading()> read_again = {};                  // the configuration, on SIGHUP
  std::string configuration_name = "the configuration";              // for messages
  unsigned threads = 0;                                              // that fit; 0: one a hardware core
  wire::Limits limits = {};
  std::chrono::milliseconds stop_within{9500};                       // for what was accepted before a stop; 10 s are promised
  bool signals = false;                                              // take SIGTERM, SIGINT and SIGHUP
  std::function<void(service::Task&)> fit = &service::Service::fit;
};

/// What is answered to a request that comes, or is not decided, while the daemon stops.
wire::Error stopping_error(const std::string& id);

/// `start`, then `run` by one thread, which owns the sockets. Beside it stand the workers, which fit, and the ledger, which
/// decides and commits.
class Daemon {
 public:
  explicit Daemon(Options options);
  ~Daemon();

  /// Folds the log into the drives' states and binds the sockets. Faults: `log_unavailable`; `not_available` with the
  /// configuration's key as `where` for an endpoint that cannot be bound.
  Result<void> start();

  /// Serves until it is told to stop, and answers what it had accepted. Returns the exit status of the program: 0.
  int run();

  /// As SIGTERM does; any thread may call it.
  void stop();

  /// As SIGHUP does; any thread may call it.
  void reload();

  const Endpoints& endpoints() const { return endpoints_; }

  /// Requests accepted and not answered: 0 after `run` unless the time to stop ran out.
  std::size_t in_flight() const { return in_flight_; }

 private:
  using Instant = std::chrono::steady_clock::time_point;

  void start_threads();
  bool finished() const;
  void wait_for_work();
  void take_signals();
  void take_requests();
  void take_feed();
  void take_subscriptions();
  void send_settled();
  void publish_health();
  void close();

  void take_request(Incoming incoming);
  void take_from_feed(Incoming incoming);
  void accept(wire::Request request, Route route);
  void add_job(service::Task task, Route route, std::string key);
  bool join(const wire::Request& request, const Route& route);
  void answer_joined(const std::string& key, wire::Reply reply);
  std::optional<wire::Error> turned_away(const wire::Request& request) const;
  double retry_after_s() const;
  void answer(const Route& route, wire::Reply reply);
  void send(const Route& route, const std::string& message);
  void reject(const wire::Error& error);
  wire::State state() const;

  void begin_stopping();
  void drain_feed();
  bool out_of_time() const;
  void take_new_configuration();
  void report_faults(const std::vector<config::Diagnosis>& faults);
  void report_differences(const config::Configuration& configuration);

  Options options_;
  SystemClock clock_;
  std::shared_ptr<const config::Configuration> configuration_;  // the one in force
  std::optional<Signals> signals_;                              // before any thread
  service::Service service_;
  std::unique_ptr<Sockets> sockets_;
  Endpoints endpoints_;
  std::optional<Publisher> publisher_;

  Mailbox<Outgoing> outbox_;
  Wake wake_;
  std::atomic<bool> stop_asked_ = false, reload_asked_ = false;
  Order order_;
  std::optional<Ledger> ledger_;
  std::optional<Workers> workers_;  // ends before the ledger, which takes what it has fitted

  std::map<std::string, std::vector<Route>> joined_;  // by the key of a job in flight: those who sent its request again
  std::size_t in_flight_ = 0;
  double seconds_a_job_ = 0.01;  // mean time between settled jobs, for `retry_after_s`
  Instant last_settled_;
  std::optional<Instant> stop_at_;  // set while stopping
  Instant health_at_;
  std::vector<std::string> troubles_;  // of the configuration
};

}  // namespace halfturn::daemon
