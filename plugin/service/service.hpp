// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <map>
#include <memory>
#include <mutex>
#include <optional>
#include <set>
#include <span>
#include <string>
#include <variant>
#include <vector>

#include "model/infer/fit.hpp"
#include "model/recalibrate/decide.hpp"
#include "model/recalibrate/joint.hpp"
#include "plugin/config/configuration.hpp"
#include "plugin/log/log.hpp"
#include "plugin/wire/reply.hpp"
#include "plugin/wire/request.hpp"

/// The whole job, request in and reply out, with no socket, no SQL and no wall clock in it. A request passes three stages:
/// `accept` checks it against the configuration and takes a snapshot of what is known; `fit`, pure, may run anywhere and in
/// parallel; `settle` decides serially, inside the transaction that commits.
namespace halfturn::service {

using wire::Time;

class Clock {
 public:
  virtual ~Clock() = default;
  virtual Time now() const = 0;
};

/// A request between its stages. Tasks of one drive must be settled in the order in which they were accepted.
struct Task {
  wire::Request request;
  Time received_at = 0;
  bool answers = true;                                       // false: came by the feed, is not answered
  std::string drive;                                         // empty: concerns no single drive
  std::shared_ptr<const config::Configuration> configuration;
  recalibrate::State known;                                  // snapshot of the drive's state
  Time taken_at = 0;                                         // of the scan; when it arrived where it does not say
  std::vector<std::string> assumed;                          // filled by `fit`, with what follows
  infer::Prior prior;                                        // of a joint fit, that of its reference scan
  std::optional<infer::Fit> fit;
  std::optional<infer::JointFit> joint;                      // of several scans, in place of `fit`

  bool needs_fit() const { return request.kind == wire::Kind::fit; }
  const wire::Scan& scan() const { return request.scans.front(); }
  const config::Drive* configured() const;                   // null where the configuration has no such drive
};

struct Publication {
  std::string topic;  // `fitted/red/`
  std::variant<wire::Fitted, wire::Drift, wire::Error> body;
};

/// What leaves after the commit.
struct Settled {
  std::optional<wire::Reply> reply;  // none for what came by the feed
  std::vector<Publication> publications;
};

/// Replies are kept for so long: the same request finds its reply again within seven days.
inline constexpr Time kRepliesKept = 7LL * 24 * 3600 * 1'000'000'000;

class Service {
 public:
  /// `log` is used by `restore` and `settle` alone, so by the thread that calls them.
  Service(std::shared_ptr<const config::Configuration> configuration, log::Log& log, const Clock& clock, std::string version);

  /// Folds the log into the drives' states; before anything else.
  Result<void> restore();

  /// Stage one; thread-safe, quick, no log. A reply at once (`status`, faults), or a task for the other stages.
  std::variant<wire::Reply, Task> accept(wire::Request request, bool answers);

  /// Stage two; thread-safe, pure: no log, no clock.
  static void fit(Task& task);

  /// Stage three; one thread. Decides each task in turn and commits them together; what it returns, one for each task and in
  /// their order, may be sent when it returns. A `history` shows what came before it alone, so the transaction is split there.
  /// Where the log fails in writing, the tasks of that transaction and those that write behind it are answered
  /// `log_unavailable` and move no state; `history` and fits that are not stored do not hang on that. Whatever is thrown,
  /// no transaction stays open.
  std::vector<Settled> settle(std::span<Task> tasks);

  /// Takes a new configuration for requests accepted from now on; drives keep their tracked state by name. Thread-safe.
  void configure(std::shared_ptr<const config::Configuration> configuration);

  /// What `status` answers and `health/` carries; thread-safe.
  wire::State state() const;
  void set_stopping();

 private:
  struct Group;  // of tasks inside one transaction
  Result<void> settle_writers(std::span<Task> tasks, const std::vector<std::size_t>& chosen, std::vector<Settled>& settled);
  Result<Settled> settle_one(Task& task, Group& group);
  Result<Settled> settle_fit(Task& task, Group& group);
  Result<Settled> settle_history(const Task& task);
  Result<Settled> settle_note(Task& task, Group& group);
  Result<void> keep_house(Group& group);
  Result<void> keep_configuration(const config::Configuration& configuration, Group& group);
  void note_log(std::string trouble);  // empty where all is well
  recalibrate::State known_of(const std::string& drive) const;

  mutable std::mutex mutex_;  // guards what follows
  std::shared_ptr<const config::Configuration> configuration_;
  std::map<std::string, recalibrate::State> states_;
  std::string log_trouble_;
  bool stopping_ = false;

  std::set<std::string> kept_configurations_;  // fingerprints; this and the next belong to the thread of `settle`
  Time forgot_at_ = 0;                         // when old replies were last forgotten
  log::Log& log_;
  const Clock& clock_;
  std::string version_;
  Time started_at_ = 0;
};

/// Fits one scan on its own, as `halfturn fit` and `store: false` do: no history read or written. `drive` may be null: then
/// nothing is known beforehand and no pulses are proposed.
wire::Fitted fit_alone(const wire::Scan& scan, const config::Drive* drive, const wire::Options& options);

/// The same of several scans of one drive jointly. A Fault where these scans cannot be fitted together, placed as in a request.
Result<wire::Fitted> fit_together_alone(const std::vector<wire::Scan>& scans, const config::Drive* drive, const wire::Options& options);

}  // namespace halfturn::service
