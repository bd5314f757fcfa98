// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/rehearse.hpp"

#include <atomic>
#include <csignal>
#include <sstream>
#include <thread>
#include <zmq.hpp>
#include <zmq_addon.hpp>

#include "tests/plugin/rehearse/fake_daemon.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::rehearse;
using halfturn::tests::FakeDaemon;
using nlohmann::json;

namespace {

const std::string kEvening = "2026-02-03T18:00:00Z";

RehearseOptions red(double hours) {
  RehearseOptions options;
  options.drive = "red";
  options.hours = hours;
  options.starts_at = kEvening;
  options.timeout_s = 10;
  options.apparatus.mishap_probability = 0;
  return options;
}

/// A fake daemon behind a ROUTER on a free port of the loopback, in a thread of its own that ends with the object.
class Served {
 public:
  explicit Served(const RehearseOptions& options) : daemon(settled(options), options.seed, options.hours * 3600, *wire::parse_time(kEvening)) {
    socket_.set(zmq::sockopt::linger, 0);
    socket_.bind("tcp://127.0.0.1:*");
    endpoint = socket_.get(zmq::sockopt::last_endpoint);
    thread_ = std::thread([this] { serve(); });
  }
  ~Served() {
    stop_ = true;
    thread_.join();
  }

  FakeDaemon daemon;
  std::string endpoint;
  std::function<void(int)> before_reply = [](int) {};  // told how many requests came so far
  std::atomic<int> requests = 0;

 private:
  static ApparatusSettings settled(const RehearseOptions& options) {
    auto settings = options.apparatus;
    settings.rabi_hz = 0.5 / (4.00e-6 - settings.dead_time_s);
    return settings;
  }

  void serve() {
    zmq::pollitem_t item{socket_.handle(), 0, ZMQ_POLLIN, 0};
    while (!stop_) {
      zmq::poll(&item, 1, std::chrono::milliseconds(20));
      if ((item.revents & ZMQ_POLLIN) != 0) reply();
    }
  }

  void reply() {
    std::vector<zmq::message_t> frames;
    if (!zmq::recv_multipart(socket_, std::back_inserter(frames))) return;
    const std::string body = frames.back().to_string();
    frames.pop_back();
    const bool is_json = body.front() == '{';
    json request = is_json ? json::parse(body) : json::from_msgpack(body);
    before_reply(++requests);
    json answer = daemon.answer(request.at("kind").get<std::string>(), without_envelope(request));
    answer["proto"] = 1;
    answer["id"] = request.at("id");
    const auto packed = json::to_msgpack(answer);
    frames.push_back(is_json ? zmq::message_t(answer.dump()) : zmq::message_t(packed.data(), packed.size()));
    zmq::send_multipart(socket_, frames);
  }

  static json without_envelope(json request) {
    for (const char* key : {"proto", "kind", "id"}) request.erase(key);
    return request;
  }

  zmq::context_t context_;
  zmq::socket_t socket_{context_, zmq::socket_type::router};
  std::atomic<bool> stop_ = false;
  std::thread thread_;
};

}  // namespace

TEST_CASE("A rehearsal through the socket tells what one without it would, and ends with 0") {
  auto options = red(2);
  Served served(options);
  options.endpoint = served.endpoint;
  options.json = true;
  std::ostringstream out, progress;
  CHECK(run(options, out, progress) == 0);
  const auto night = json::parse(out.str());
  CHECK(night.at("drives").at(0).at("scans").at("applied") == 27);
  CHECK(night.at("drives").at(0).at("rotation_error").at("halfturn").at("worst_rad").get<double>() < 0.069);
  CHECK(night.at("hours") == 2.0);
  CHECK(served.daemon.scans.size() == 27);  // 24 flops, 3 line scans
  CHECK_THAT(progress.str(), Catch::StartsWith("0 %") && Catch::Contains("100 %"));
}

TEST_CASE("A rehearsal with a refused scan ends with 1 and names the reason") {
  auto options = red(0.5);
  Served served(options);
  options.endpoint = served.endpoint;
  served.daemon.spoil = [](const json&, json& reply) {
    reply["verdict"] = "refuse";
    reply["reasons"] = {{{"code", "flat"}, {"text", "no oscillation"}}};
    reply["carrier_shift_hz"] = 0;
    for (auto& pulse : reply["pulses"]) pulse["verdict"] = "refuse";
  };
  std::ostringstream out, progress;
  CHECK(run(options, out, progress) == 1);
  CHECK_THAT(out.str(), Catch::Contains("refused for flat: 7"));
}

TEST_CASE("An unknown drive ends with 2, a daemon that is not there with 3") {
  auto options = red(1);
  Served served(options);
  options.endpoint = served.endpoint;
  options.drive = "blue";
  std::ostringstream out, progress;
  CHECK(run(options, out, progress) == 2);
  CHECK(out.str().empty());
  CHECK_THAT(progress.str(), Catch::Contains("no drive 'blue'; it has: red"));

  zmq::context_t context;
  zmq::socket_t mute(context, zmq::socket_type::router);  // bound, and never answers
  mute.bind("tcp://127.0.0.1:*");
  options = red(1);
  options.endpoint = mute.get(zmq::sockopt::last_endpoint);
  options.timeout_s = 0.2;
  CHECK(run(options, out, progress) == 3);
}

TEST_CASE("Ctrl-C ends the night with the table so far") {
  auto options = red(8);
  Served served(options);
  options.endpoint = served.endpoint;
  served.before_reply = [](int requests) {
    if (requests == 20) std::raise(SIGINT);
  };
  std::ostringstream out, progress;
  CHECK(run(options, out, progress) == 0);
  CHECK_THAT(out.str(), Catch::Contains("(interrupted)") && Catch::Contains("with Halfturn"));
  CHECK(served.requests < 25);
}
