// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <chrono>
#include <condition_variable>
#include <cstdint>
#include <memory>
#include <mutex>
#include <nlohmann/json.hpp>
#include <optional>
#include <set>
#include <string>
#include <thread>
#include <vector>
#include <zmq.hpp>

#include "plugin/daemon/daemon.hpp"

/// A daemon inside the test program, on ports that the system chooses, and peers that speak to it with an encoder of their own
/// (nlohmann's JSON and MessagePack).
namespace halfturn::tests {

using nlohmann::json;

inline constexpr std::chrono::seconds kPatience{20};  // a test that waits longer than this has failed

/// Holds fits until they are let through, by the name of their scan.
class Gate {
 public:
  void wait(const std::string& name);
  /// Waits until a fit of this name stands before the gate.
  void wait_for_arrival(const std::string& name);
  void open(const std::string& name);
  void open_all();

 private:
  std::mutex mutex_;
  std::condition_variable changed_;
  std::set<std::string> open_, arrived_;
  bool all_ = false;
};

/// Fits wait at the gate.
void hold_fits(daemon::Options& options, Gate& gate);

/// Drives `red`, `red2` and `blue`, sockets on ports that the system chooses.
std::shared_ptr<config::Configuration> configuration();

class Running {
 public:
  /// `change` may alter the options before the daemon is made.
  explicit Running(const std::function<void(daemon::Options&)>& change = {});
  ~Running();

  daemon::Daemon& daemon() { return *daemon_; }
  const daemon::Endpoints& endpoints() const { return daemon_->endpoints(); }

  /// Stops it and waits; its exit status.
  int stop();
  /// Waits for it to end by itself.
  int wait();

 private:
  std::unique_ptr<daemon::Daemon> daemon_;
  std::thread thread_;
  int status_ = -1;
};

using Frames = std::vector<std::string>;

/// A socket of any type, connected.
class Peer {
 public:
  Peer(zmq::socket_type type, const std::string& endpoint);

  void send(const Frames& frames);
  /// The next message; a test failure where none comes in time.
  Frames receive();

  void ask_json(const json& request) { send({request.dump()}); }
  json answer() { return decoded(receive().back()); }

  static json decoded(const std::string& message);
  zmq::socket_t& socket() { return socket_; }

 private:
  zmq::context_t context_;
  zmq::socket_t socket_;
};

/// A listener to topics that begin with `prefix`.
class Listener {
 public:
  Listener(const std::string& endpoint, const std::string& prefix);
  struct Heard {
    std::string topic;
    json message;
  };
  Heard next();

 private:
  Peer peer_;
};

/// A flop of 40 points at 125 kHz without noise, as a request.
json fit_request(const std::string& id, const std::string& drive = "red");
json status_request(const std::string& id);
std::string packed(const json& message);

}  // namespace halfturn::tests
