// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <map>
#include <memory>
#include <string>

#include "plugin/config/configuration.hpp"
#include "plugin/log/memory_log.hpp"
#include "plugin/service/service.hpp"
#include "tests/support/catch.hpp"

/// A service with its log and a clock that the test turns, for requests that pass all three stages at once.
namespace halfturn::tests {

struct StoppedClock final : service::Clock {
  wire::Time time = 1'790'000'000'000'000'000;
  wire::Time now() const override { return time; }
};

inline std::shared_ptr<const config::Configuration> configured(const std::string& text) {
  auto reading = config::read(text, "");
  for (const auto& f : reading.faults) UNSCOPED_INFO(f.path << ": " << f.message);
  REQUIRE(reading.configuration);
  return std::make_shared<const config::Configuration>(*reading.configuration);
}

template <class Log>
struct HouseWith {
  StoppedClock clock;
  Log log;
  std::shared_ptr<const config::Configuration> configuration;
  std::unique_ptr<service::Service> service;

  explicit HouseWith(std::shared_ptr<const config::Configuration> of) : configuration(std::move(of)) { restart(); }
  void restart() {
    service = std::make_unique<service::Service>(configuration, log, clock, "test");
    REQUIRE(service->restore());
  }
  /// Accepted and fitted.
  service::Task accepted(wire::Request request, bool answers = true) {
    auto taken = service->accept(std::move(request), answers);
    REQUIRE(std::holds_alternative<service::Task>(taken));
    auto task = std::get<service::Task>(std::move(taken));
    if (task.needs_fit()) service::Service::fit(task);
    return task;
  }
  service::Settled settle(service::Task task) {
    auto settled = service->settle({&task, 1});
    REQUIRE(settled.size() == 1);
    return std::move(settled[0]);
  }
  wire::Reply ask(wire::Request request) {
    auto taken = service->accept(request, true);
    if (auto* reply = std::get_if<wire::Reply>(&taken)) return *reply;
    auto settled = settle(accepted(std::move(request)));
    REQUIRE(settled.reply);
    return *settled.reply;
  }
  wire::Fitted fit(wire::Request request) { return std::get<wire::Fitted>(ask(std::move(request))); }
};

inline wire::Request applied_of(const std::string& id, const std::map<std::string, double>& pulses) {
  wire::Request applied;
  applied.kind = wire::Kind::applied;
  applied.id = applied.digest = id;
  applied.drive = "red";
  applied.pulses = pulses;
  return applied;
}

inline const wire::Estimate& estimate(const wire::Fitted& fitted, const std::string& name) {
  for (const auto& [key, value] : fitted.estimates)
    if (key == name) return value;
  FAIL("no estimate " << name);
  return fitted.estimates.front().second;
}

inline const wire::Pulse& pulse(const wire::Fitted& fitted, const std::string& name) {
  for (const auto& [key, value] : fitted.pulses)
    if (key == name) return value;
  FAIL("no pulse " << name);
  return fitted.pulses.front().second;
}

}  // namespace halfturn::tests
