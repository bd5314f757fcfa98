// SPDX-License-Identifier: Apache-2.0
#include "tests/plugin/daemon/running.hpp"

#include <spdlog/sinks/null_sink.h>
#include <spdlog/spdlog.h>

#include <cmath>
#include <numbers>

#include "plugin/log/memory_log.hpp"
#include "tests/support/catch.hpp"

namespace halfturn::tests {

void Gate::wait(const std::string& name) {
  std::unique_lock lock(mutex_);
  arrived_.insert(name);
  changed_.notify_all();
  changed_.wait(lock, [&] { return all_ || open_.count(name) > 0; });
}

void Gate::wait_for_arrival(const std::string& name) {
  std::unique_lock lock(mutex_);
  REQUIRE(changed_.wait_for(lock, kPatience, [&] { return arrived_.count(name) > 0; }));
}

void Gate::open(const std::string& name) {
  const std::lock_guard lock(mutex_);
  open_.insert(name);
  changed_.notify_all();
}

void Gate::open_all() {
  const std::lock_guard lock(mutex_);
  all_ = true;
  changed_.notify_all();
}

void hold_fits(daemon::Options& options, Gate& gate) {
  options.fit = [&gate](service::Task& task) {
    gate.wait(task.request.scans.front().scan_name);
    service::Service::fit(task);
  };
}

std::shared_ptr<config::Configuration> configuration() {
  const std::string drive = "{pulses: {flip: {angle: pi, length: 4 us, limits: [1 us, 20 us]}}}";
  const auto text = "format: 1\nlog: nights.db\ndrives:\n  red: " + drive + "\n  red2: " + drive + "\n  blue: " + drive + "\n";
  auto reading = config::read(text, ".");
  for (const auto& each : reading.faults) FAIL(config::to_text(each, "configuration"));
  auto made = std::make_shared<config::Configuration>(*reading.configuration);
  made->sockets.requests = made->sockets.feed = made->sockets.results = "tcp://127.0.0.1:*";
  return made;
}

Running::Running(const std::function<void(daemon::Options&)>& change) {
  daemon::Options options;
  options.configuration = configuration();
  options.log = std::make_unique<log::MemoryLog>();
  options.version = "test";
  options.lines = std::make_shared<spdlog::logger>("test", std::make_shared<spdlog::sinks::null_sink_mt>());
  if (change) change(options);
  daemon_ = std::make_unique<daemon::Daemon>(std::move(options));
  const auto started = daemon_->start();
  if (!started) FAIL(started.error().message);
  thread_ = std::thread([this] { status_ = daemon_->run(); });
}

Running::~Running() { stop(); }

int Running::stop() {
  daemon_->stop();
  return wait();
}

int Running::wait() {
  if (thread_.joinable()) thread_.join();
  return status_;
}

Peer::Peer(zmq::socket_type type, const std::string& endpoint) : socket_(context_, type) {
  socket_.set(zmq::sockopt::linger, 0);
  socket_.connect(endpoint);
}

void Peer::send(const Frames& frames) {
  for (std::size_t i = 0; i < frames.size(); ++i) {
    const auto flags = i + 1 < frames.size() ? zmq::send_flags::sndmore : zmq::send_flags::none;
    REQUIRE(socket_.send(zmq::buffer(frames[i]), flags));
  }
}

Frames Peer::receive() {
  socket_.set(zmq::sockopt::rcvtimeo, static_cast<int>(std::chrono::milliseconds(kPatience).count()));
  Frames frames;
  zmq::message_t message;
  do {
    REQUIRE(socket_.recv(message));
    frames.push_back(message.to_string());
  } while (message.more());
  return frames;
}

json Peer::decoded(const std::string& message) {
  return message.substr(0, 1) == "{" ? json::parse(message) : json::from_msgpack(message);
}

Listener::Listener(const std::string& endpoint, const std::string& prefix) : peer_(zmq::socket_type::sub, endpoint) {
  peer_.socket().set(zmq::sockopt::subscribe, prefix);
}

Listener::Heard Listener::next() {
  const auto frames = peer_.receive();
  REQUIRE(frames.size() == 2);
  return {frames[0], Peer::decoded(frames[1])};
}

json fit_request(const std::string& id, const std::string& drive) {
  json scan = {{"scan_name", id}, {"drive", drive}, {"taken_at", "2026-02-03T04:05:06Z"}, {"shots", 100}};
  for (int i = 1; i <= 40; ++i) {
    const double length_s = 0.4e-6 * i;
    const double excited = std::pow(std::sin(std::numbers::pi * 125e3 * length_s), 2);
    scan["duration_s"].push_back(length_s);
    scan["counts"].push_back(std::lround(100.0 * (0.02 + 0.95 * excited)));
  }
  return {{"proto", 1}, {"kind", "fit"}, {"id", id}, {"scan", scan}};
}

json status_request(const std::string& id) { return {{"proto", 1}, {"kind", "status"}, {"id", id}}; }

std::string packed(const json& message) {
  const auto bytes = json::to_msgpack(message);
  return {bytes.begin(), bytes.end()};
}

}  // namespace halfturn::tests
