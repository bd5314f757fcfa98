// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/decode.hpp"

#include <algorithm>

#include "plugin/wire/check.hpp"
#include "plugin/wire/digest.hpp"
#include "plugin/wire/events.hpp"
#include "plugin/wire/sink.hpp"
#include "plugin/wire/words.hpp"
#include "plugin/wire/write_request.hpp"

namespace halfturn::wire {
namespace {

using Problem = std::optional<Fault>;

/// What is wrong with the size of a message, before anything is read.
Problem size_problem(std::string_view bytes, const DecodeLimits& limits) {
  if (bytes.empty()) return Fault{"bad_encoding", "", "found an empty message, expected a MessagePack map or a JSON object"};
  if (bytes.size() <= limits.bytes) return std::nullopt;
  return Fault{
      "too_large", "",
      "found a message of " + std::to_string(bytes.size()) + " bytes, expected at most " + std::to_string(limits.bytes)};
}

/// Reads all bytes into the sink; a fault that ended the reading.
Problem read(std::string_view bytes, Encoding encoding, Sink& sink) {
  const ReadEnd end = encoding == Encoding::json ? read_json(bytes, sink) : read_msgpack(bytes, sink);
  if (sink.stopped()) return sink.fault();
  if (end.how != ReadEnd::How::broken) return std::nullopt;
  const std::string form = encoding == Encoding::json ? "JSON" : "MessagePack";
  return Fault{"bad_encoding", "", "the message is no " + form + ": " + end.message};
}

Problem wrong_proto(const Values& values) {
  const Value* proto = values.find(Field::proto);
  if (proto == nullptr || proto->number == 1) return std::nullopt;
  return Fault{"proto", "proto",
               "found " + number_text(proto->number) + ", expected 1, the only version that this program speaks"};
}

Problem unknown_kind(const Values& values) {
  const Value* kind = values.find(Field::kind);
  if (kind == nullptr || std::find(kKindNames.begin(), kKindNames.end(), kind->text) != kKindNames.end())
    return std::nullopt;
  return Fault{"unknown_kind", "kind", "found " + in_quotes(kind->text) + "; the nearest known kind is \"" +
                                           std::string(nearest(kind->text, kKindNames)) + "\""};
}

std::string id_in(const Values& values) {
  const Value* id = values.find(Field::id);
  return id != nullptr && is_printable(id->text, 64) ? id->text : std::string{};
}

Result<Request> request_in(Sink& sink, Problem ended, Encoding encoding) {
  for (const Problem& problem : {std::move(ended), wrong_proto(sink.values()), unknown_kind(sink.values()), sink.fault()})
    if (problem) return tl::unexpected<Fault>(*problem);
  Result<Request> request = check_request(sink.values());
  if (!request) return request;
  request->encoding = encoding;
  request->digest = digest_of(*request);
  return request;
}

Encoding encoding_of(std::string_view bytes) { return bytes.starts_with('{') ? Encoding::json : Encoding::msgpack; }

}  // namespace

Decoded decode_request(std::string_view bytes, const DecodeLimits& limits) {
  const Encoding encoding = encoding_of(bytes);
  if (auto problem = size_problem(bytes, limits)) return {encoding, {}, tl::unexpected<Fault>(std::move(*problem))};
  Sink sink(limits, Map::request);
  Problem ended = read(bytes, encoding, sink);
  std::string id = id_in(sink.values());
  return {encoding, std::move(id), request_in(sink, std::move(ended), encoding)};
}

std::string encode_scan(const Scan& scan) {
  const auto writer = make_writer(Encoding::msgpack);
  write_scan(*writer, scan);
  return writer->take();
}

std::string encode_scans(const std::vector<Scan>& scans) {
  if (scans.size() == 1) return encode_scan(scans.front());
  const auto writer = make_writer(Encoding::msgpack);
  writer->open_map();
  writer->key(name(Field::scans));
  writer->open_list();
  for (const Scan& scan : scans) write_scan(*writer, scan);
  writer->close_list();
  writer->close_map();
  return writer->take();
}

Result<std::vector<Scan>> decode_scans(std::string_view bytes, const DecodeLimits& limits) {
  if (auto problem = size_problem(bytes, limits)) return tl::unexpected<Fault>(std::move(*problem));
  Sink sink(limits, Map::request);
  if (auto problem = read(bytes, encoding_of(bytes), sink)) return tl::unexpected<Fault>(std::move(*problem));
  Value* const list = sink.values().find(Field::scans);
  if (list == nullptr) {
    auto one = decode_scan(bytes, limits);
    if (!one) return tl::unexpected<Fault>(one.error());
    return std::vector<Scan>{std::move(*one)};
  }
  std::optional<Fault> fault = sink.fault();
  std::vector<Scan> scans(list->maps.size());
  for (std::size_t i = 0; i < scans.size() && !fault; ++i) {
    Checker in(list->maps[i], "scans[" + std::to_string(i) + "]", fault);
    check_scan(in, ScanPart::whole, scans[i]);
  }
  if (fault) return tl::unexpected<Fault>(std::move(*fault));
  return scans;
}

Result<Scan> decode_scan(std::string_view bytes, const DecodeLimits& limits) {
  if (auto problem = size_problem(bytes, limits)) return tl::unexpected<Fault>(std::move(*problem));
  Sink sink(limits, Map::scan);
  if (auto problem = read(bytes, encoding_of(bytes), sink)) return tl::unexpected<Fault>(std::move(*problem));
  std::optional<Fault> fault = sink.fault();
  Scan scan;
  Checker in(sink.values(), "", fault);
  if (!fault) check_scan(in, ScanPart::whole, scan);
  if (fault) return tl::unexpected<Fault>(std::move(*fault));
  return scan;
}

}  // namespace halfturn::wire
