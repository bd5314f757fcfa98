// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/encode.hpp"

#include "plugin/wire/fields.hpp"
#include "plugin/wire/transcribe.hpp"
#include "plugin/wire/write_reply.hpp"
#include "plugin/wire/write_request.hpp"

namespace halfturn::wire {
namespace {

constexpr std::int64_t kProto = 1;

/// The beginning of every message.
void begin(Writer& to, std::string_view kind, const std::string& id) {
  to.open_map();
  to.field("proto", kProto);
  to.field("kind", kind);
  if (!id.empty()) to.field("id", id);
}

template <class Body>
std::string message(std::string_view kind, const std::string& id, const Body& body, Encoding encoding) {
  const auto to = make_writer(encoding);
  begin(*to, kind, id);
  write_fields(*to, body);
  to->close_map();
  return to->take();
}

std::string unreadable(const std::string& id, Encoding encoding) {
  const Error error{id, {"internal", "", "a reply in the log cannot be read; check the log with its backup"}, {}};
  return message("error", id, error, encoding);
}

std::string reply(const Fitted& fitted, Encoding encoding) { return message("fitted", fitted.id, fitted, encoding); }
std::string reply(const State& state, Encoding encoding) { return message("state", state.id, state, encoding); }
std::string reply(const Error& error, Encoding encoding) { return message("error", error.id, error, encoding); }
std::string reply(const Advised& advised, Encoding encoding) { return message("advised", advised.id, advised, encoding); }

std::string reply(const Noted& noted, Encoding encoding) {
  const auto to = make_writer(encoding);
  begin(*to, "noted", noted.id);
  to->close_map();
  return to->take();
}

std::string reply(const Rows& rows, Encoding encoding) {
  const auto to = make_writer(encoding);
  begin(*to, "rows", rows.id);
  to->key("rows");
  to->open_list();
  for (const std::string& row : rows.rows)
    if (!transcribe(row, *to)) return unreadable(rows.id, encoding);
  to->close_list();
  if (rows.next) to->field("next", *rows.next);
  to->close_map();
  return to->take();
}

std::string reply(const Stored& stored, Encoding encoding) {
  const auto to = make_writer(encoding);
  if (!transcribe(stored.message, *to, [](Writer& end) { end.field("replayed", true); }))
    return unreadable(stored.id, encoding);
  return to->take();
}

void write_published(Writer& to, const Published& published) {
  to.field("boot", published.boot);
  to.field("sequence", static_cast<std::int64_t>(published.sequence));
  to.key("published_at");
  to.time(published.published_at);
}

template <class Body>
std::string published_message(const Published& published, std::string_view kind, const std::string& id, const Body& body,
                              Encoding encoding) {
  const auto to = make_writer(encoding);
  begin(*to, kind, id);
  write_published(*to, published);
  write_fields(*to, body);
  to->close_map();
  return to->take();
}

}  // namespace

std::string encode(const Reply& one, Encoding encoding) {
  return std::visit([&](const auto& body) { return reply(body, encoding); }, one);
}

std::string encode_stored(const Fitted& fitted) {
  Fitted bare = fitted;
  bare.overlay.reset();
  bare.replayed = false;
  return reply(bare, Encoding::msgpack);
}

std::string encode_published(const Published& published, const Fitted& fitted, Encoding encoding) {
  return published_message(published, "fitted", fitted.id, fitted, encoding);
}

std::string encode_published(const Published& published, const Live& live, Encoding encoding) {
  return published_message(published, "live", {}, live, encoding);
}

std::string encode_published(const Published& published, const Drift& drift, Encoding encoding) {
  return published_message(published, "drift", {}, drift, encoding);
}

std::string encode_published(const Published& published, const Health& health, Encoding encoding) {
  return published_message(published, "health", {}, health.state, encoding);
}

std::string encode_published(const Published& published, const Error& error, Encoding encoding) {
  return published_message(published, "error", error.id, error, encoding);
}

std::string encode_published(const Published& published, const Stored& stored, Encoding encoding) {
  const auto to = make_writer(encoding);
  if (!transcribe(stored.message, *to, [&](Writer& end) { write_published(end, published); }))
    return unreadable(stored.id, encoding);
  return to->take();
}

std::string encode_request(const Request& request, Encoding encoding) {
  const auto to = make_writer(encoding);
  begin(*to, name(request.kind), request.id);
  write_fields(*to, request);
  to->close_map();
  return to->take();
}

}  // namespace halfturn::wire
