// SPDX-License-Identifier: Apache-2.0
#include <array>
#include <charconv>

#include "plugin/config/keys.hpp"
#include "plugin/config/sections.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

struct Endpoint {
  std::string host;  // of TCP; empty for a socket in the file system
  int port = 0;      // 0: any free one
  std::string text;
  Place at;
};

std::optional<int> port(std::string_view text) {
  int value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  const bool whole = error == std::errc() && end == text.data() + text.size();
  return whole && value >= 0 && value <= 65535 ? std::optional(value) : std::nullopt;
}

/// `HOST:PORT`, a host with colons in brackets.
std::optional<Endpoint> host_and_port(std::string_view text) {
  const std::size_t colon = text.rfind(':');
  if (colon == std::string_view::npos || colon == 0) return std::nullopt;
  std::string_view host = text.substr(0, colon);
  const bool bracketed = host.size() > 2 && host.front() == '[' && host.back() == ']';
  if (bracketed) host = host.substr(1, host.size() - 2);
  if (host.find_first_of(" /[]") != std::string_view::npos || (!bracketed && host.find(':') != std::string_view::npos))
    return std::nullopt;
  const auto number = port(text.substr(colon + 1));
  if (!number) return std::nullopt;
  return Endpoint{std::string(host), *number, std::string(text), {}};
}

std::optional<Endpoint> zeromq_endpoint(std::string_view text) {
  if (text.starts_with("ipc://") && text.size() > 6) return Endpoint{"", 0, std::string(text), {}};
  if (!text.starts_with("tcp://")) return std::nullopt;
  std::string_view rest = text.substr(6);
  const bool any_port = rest.ends_with(":*");
  auto endpoint = host_and_port(any_port ? std::string(rest.substr(0, rest.size() - 1)) + "0" : std::string(rest));
  if (endpoint) endpoint->text = text;
  return endpoint;
}

bool is_loopback(const std::string& host) {
  if (host.empty() || host == "localhost" || host == "::1") return true;
  const bool numbers = host.find_first_not_of("0123456789.") == std::string::npos;
  return numbers && host.starts_with("127.");
}

bool is_any(const std::string& host) { return host == "*" || host == "0.0.0.0" || host == "::"; }

bool clash(const Endpoint& a, const Endpoint& b) {
  if (a.host.empty() || b.host.empty()) return a.text == b.text;
  return a.port != 0 && a.port == b.port && (a.host == b.host || is_any(a.host) || is_any(b.host));
}

std::optional<Endpoint> read_endpoint(Reader& reader, const Place& at, const std::string& normal, bool http, bool insecure) {
  const std::string words = http ? "HOST:PORT, such as 127.0.0.1:7480" : "an endpoint such as " + wire::in_quotes(normal);
  const auto text = at ? reader.text(at, words) : std::optional(normal);
  if (!text) return std::nullopt;
  auto endpoint = http ? host_and_port(*text) : zeromq_endpoint(*text);
  if (!endpoint) {
    reader.fault(at, "found " + wire::in_quotes(*text) + ", expected " + words);
    return std::nullopt;
  }
  endpoint->at = at;
  if (!is_loopback(endpoint->host) && !insecure)
    reader.fault(at, "found " + wire::in_quotes(*text) +
                         ", expected a loopback address such as 127.0.0.1. Binding an address that is not " +
                         "loopback needs keys, or insecure: true; keys are not available in this version");
  return endpoint;
}

}  // namespace

Sockets read_sockets(Reader& reader, const Place& at, bool insecure) {
  Sockets sockets;
  if (!at || !reader.map(at, {keys::kSockets})) return sockets;
  if (const Place feed = at["feed"]; feed && feed.node->kind == Node::Kind::map)
    reader.fault(feed,
                 "found a map; a feed that connects to the experiment's own PUB is not available in this version, expected "
                 "an endpoint");
  const std::array<std::string*, 4> texts = {&sockets.requests, &sockets.feed, &sockets.results, &sockets.display};
  std::array<std::optional<Endpoint>, 4> endpoints;
  for (std::size_t i = 0; i < texts.size(); ++i) {
    const Place place = at[keys::kSockets[i]];
    if (place && place.node->kind == Node::Kind::map && i == 1) continue;
    endpoints[i] = read_endpoint(reader, place, *texts[i], i == 3, insecure);
    if (endpoints[i]) *texts[i] = endpoints[i]->text;
    for (std::size_t j = 0; j < i; ++j)
      if (endpoints[i] && endpoints[j] && clash(*endpoints[i], *endpoints[j]))
        reader.fault(endpoints[i]->at ? endpoints[i]->at : endpoints[j]->at,
                     "found the address of sockets." + std::string(keys::kSockets[endpoints[i]->at ? j : i]) +
                         " again, expected one of its own");
  }
  return sockets;
}

}  // namespace halfturn::config
