// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <cstdint>
#include <string>
#include <string_view>

#include "plugin/wire/request.hpp"

/// The one stream of events that both encodings are read into.
namespace halfturn::wire {

/// What a reader meets, in the order of the bytes. Each returns false to stop the reading. Views live until the call
/// returns.
class Events {
 public:
  virtual ~Events() = default;
  virtual bool null() = 0;
  virtual bool flag(bool value) = 0;
  virtual bool integer(std::int64_t value) = 0;
  virtual bool number(double value) = 0;
  virtual bool text(std::string_view value) = 0;
  virtual bool time(Time value) = 0;
  virtual bool alien(std::string_view what) = 0;  // what has no meaning here: "binary data"
  virtual bool open_map() = 0;
  virtual bool key(std::string_view name) = 0;
  virtual bool close_map() = 0;
  virtual bool open_list() = 0;
  virtual bool close_list() = 0;
};

/// How a reading ended.
struct ReadEnd {
  enum class How { complete, stopped, broken } how = How::complete;
  std::string message;  // broken: what is wrong and at which byte
};

/// Reads one MessagePack value that fills all the bytes. Keys that are no text stop as broken.
ReadEnd read_msgpack(std::string_view bytes, Events& events);

/// Reads one JSON value (RFC 8259) that fills all the bytes. A number too large for a double comes as an infinity and ends
/// the reading.
ReadEnd read_json(std::string_view bytes, Events& events);

}  // namespace halfturn::wire
