// SPDX-License-Identifier: Apache-2.0
#include <spdlog/spdlog.h>

#include <algorithm>
#include <utility>

#include "plugin/daemon/daemon.hpp"
#include "plugin/wire/decode.hpp"

/// From a message to a job or a reply.
namespace halfturn::daemon {

namespace {

wire::DecodeLimits decode_limits(const wire::Limits& limits) {
  wire::DecodeLimits decode;
  decode.bytes = static_cast<std::size_t>(limits.bytes);
  decode.points = static_cast<std::size_t>(limits.points);
  decode.sites = static_cast<std::size_t>(limits.sites);
  return decode;
}

wire::Encoding encoding_of(const Incoming& incoming) {
  return incoming.text().substr(0, 1) == "{" ? wire::Encoding::json : wire::Encoding::msgpack;
}

constexpr std::size_t kRepeats = 16;  // of one request in flight; our clients send a request three times

/// The same for the same request alone.
std::string key_of(const wire::Request& request) { return request.id + '\n' + request.digest; }

bool belongs_on_feed(wire::Kind kind) {
  switch (kind) {
    case wire::Kind::fit:
    case wire::Kind::begin:
    case wire::Kind::points:
    case wire::Kind::end:
    case wire::Kind::applied:
      return true;
    default:
      return false;
  }
}

}  // namespace

wire::Error stopping_error(const std::string& id) {
  return {id, {"stopping", "", "the daemon is stopping: ask again with the same id when it runs again"}, std::nullopt};
}

void Daemon::take_request(Incoming incoming) {
  Route route{true, {}, std::move(incoming.envelope), encoding_of(incoming)};
  if (incoming.fault) return answer(route, wire::Error{"", *incoming.fault, std::nullopt});
  auto decoded = wire::decode_request(incoming.text(), decode_limits(options_.limits));
  route.encoding = decoded.encoding;
  route.id = decoded.id;
  if (!decoded.request) return answer(route, wire::Error{decoded.id, decoded.request.error(), std::nullopt});
  if (join(*decoded.request, route)) return;
  if (auto error = turned_away(*decoded.request)) return answer(route, *error);
  accept(std::move(*decoded.request), std::move(route));
}

void Daemon::take_from_feed(Incoming incoming) {
  if (incoming.fault) return reject({"", *incoming.fault, std::nullopt});
  auto decoded = wire::decode_request(incoming.text(), decode_limits(options_.limits));
  if (!decoded.request) return reject({decoded.id, decoded.request.error(), std::nullopt});
  if (!belongs_on_feed(decoded.request->kind))
    return reject({decoded.id, {"unknown_kind", "kind", "the feed takes fit, begin, points, end and applied; send others to the requests socket"}, {}});
  const Route route{false, decoded.id, {}, decoded.encoding};
  if (!join(*decoded.request, route)) accept(std::move(*decoded.request), route);
}

/// A request that is being worked on already is not worked on twice: who repeats it gets the reply too. What came by the feed
/// has no reply to be had.
bool Daemon::join(const wire::Request& request, const Route& route) {
  const auto found = joined_.find(key_of(request));
  if (found == joined_.end()) return false;
  if (found->second.size() < kRepeats)
    found->second.push_back(route);
  else if (route.answers)
    answer(route, wire::Error{route.id, {"busy", "", "this request came many times and is being worked on: wait for its reply"}, retry_after_s()});
  return true;
}

void Daemon::answer_joined(const std::string& key, wire::Reply reply) {
  const auto joined = joined_.extract(key);
  if (!joined || joined.mapped().empty()) return;
  if (auto* fitted = std::get_if<wire::Fitted>(&reply)) fitted->replayed = fitted->stored;
  if (const auto* noted = std::get_if<wire::Noted>(&reply))
    reply = wire::Stored{noted->id, wire::encode(*noted, wire::Encoding::msgpack)};
  for (const auto& route : joined.mapped()) {
    if (route.answers)
      answer(route, reply);
    else if (const auto* error = std::get_if<wire::Error>(&reply))
      reject(*error);
  }
}

void Daemon::accept(wire::Request request, Route route) {
  std::string key = route.answers ? key_of(request) : std::string();
  auto accepted = service_.accept(std::move(request), route.answers);
  if (auto* task = std::get_if<service::Task>(&accepted)) return add_job(std::move(*task), std::move(route), std::move(key));
  auto& reply = std::get<wire::Reply>(accepted);
  if (route.answers) return answer(route, std::move(reply));
  if (const auto* error = std::get_if<wire::Error>(&reply)) reject(*error);
}

void Daemon::add_job(service::Task task, Route route, std::string key) {
  auto job = std::make_shared<Job>();
  job->task = std::move(task);
  job->route = std::move(route);
  if (!key.empty() && joined_.try_emplace(key).second) job->key = std::move(key);
  if (in_flight_++ == 0) last_settled_ = std::chrono::steady_clock::now();
  const bool needs_fit = job->task.needs_fit();
  order_.add(job, !needs_fit);
  if (needs_fit) workers_->add(std::move(job));
}

std::optional<wire::Error> Daemon::turned_away(const wire::Request& request) const {
  if (request.kind == wire::Kind::status) return std::nullopt;
  if (stop_at_)
    return stopping_error(request.id);
  if (in_flight_ < static_cast<std::size_t>(options_.limits.in_flight)) return std::nullopt;
  return wire::Error{request.id,
                     {"busy", "", std::to_string(in_flight_) + " requests are being worked on, as many as are allowed: ask again later"},
                     retry_after_s()};
}

/// The time in which half of what is in flight should be done.
double Daemon::retry_after_s() const { return std::clamp(0.5 * seconds_a_job_ * static_cast<double>(in_flight_), 0.05, 30.0); }

void Daemon::answer(const Route& route, wire::Reply reply) {
  if (auto* own = std::get_if<wire::State>(&reply)) {
    const auto id = own->id;
    *own = state();
    own->id = id;
  }
  send(route, wire::encode(reply, route.encoding));
}

void Daemon::send(const Route& route, const std::string& message) {
  if (!sockets_->reply(route.envelope, message))
    options_.lines->warn("the reply to {} could not be delivered: its peer is gone or reads nothing", route.id);
}

void Daemon::reject(const wire::Error& error) {
  options_.lines->warn("rejected from the feed: {} {}: {}", error.fault.code, error.fault.where, error.fault.message);
  publisher_->publish("rejected/", error);
}

}  // namespace halfturn::daemon
