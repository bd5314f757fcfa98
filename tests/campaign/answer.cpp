// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/answer.hpp"

#include <stdexcept>

#include "plugin/log/memory_log.hpp"
#include "plugin/service/known.hpp"
#include "plugin/service/service.hpp"

namespace halfturn::campaign {
namespace {

constexpr double kOneSigma = 0.6826894921370859;

struct StandingClock final : service::Clock {
  wire::Time time = 0;
  wire::Time now() const override { return time; }
};

/// What Service::fit does, with intervals at a second level besides: one search serves both.
void fit_at_both_levels(service::Task& task) {
  const auto* drive = task.configured();
  task.assumed.clear();
  task.prior = service::prior_for(drive, task.known, task.scan(), task.request.options, task.taken_at, task.assumed);
  const service::ModelScan scan = service::model_scan(task.scan());
  auto options = service::fit_options(drive, task.request.options);
  options.second_level = kOneSigma;
  thread_local infer::FitWorkspace workspace;
  task.fit.emplace();
  infer::fit(scan.batch, {&task.prior, 1}, options, {&*task.fit, 1}, workspace);
}

wire::Request request_for(const wire::Scan& scan, std::size_t number, bool store) {
  wire::Request request;
  request.kind = wire::Kind::fit;
  request.id = request.digest = std::to_string(number);
  request.scans = {scan};
  request.options.store = store;
  request.options.overlay_points = 0;
  return request;
}

}  // namespace

Answered answer(const Case& of) {
  auto configuration = std::make_shared<config::Configuration>();
  configuration->drives[of.drive.name] = of.drive;
  log::MemoryLog log;
  StandingClock clock;
  service::Service service(configuration, log, clock, "campaign");
  const bool stored = !of.before.empty();
  Answered last;
  for (std::size_t i = 0; i <= of.before.size(); ++i) {
    const bool asked = i == of.before.size();
    const auto& scan = asked ? of.scan : of.before[i];
    clock.time = scan.taken_at.value_or(0);
    auto accepted = service.accept(request_for(scan, i, stored), true);
    auto* task = std::get_if<service::Task>(&accepted);
    if (task == nullptr) throw std::logic_error("campaign: the service did not accept a simulated scan");
    if (asked) fit_at_both_levels(*task);
    else service::Service::fit(*task);
    const auto settled = service.settle({task, 1});
    const auto* fitted = settled.front().reply ? std::get_if<wire::Fitted>(&*settled.front().reply) : nullptr;
    if (fitted == nullptr) throw std::logic_error("campaign: the service did not answer a simulated scan");
    if (asked) last = {*fitted, std::move(*task->fit)};
  }
  return last;
}

}  // namespace halfturn::campaign
