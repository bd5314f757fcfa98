// SPDX-License-Identifier: Apache-2.0
#include <limits>
#include <msgpack.hpp>
#include <optional>

#include "plugin/wire/events.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::wire {
namespace {

std::uint64_t big_endian(const char* bytes, std::size_t count) {
  std::uint64_t value = 0;
  for (std::size_t i = 0; i < count; ++i) value = value << 8 | static_cast<unsigned char>(bytes[i]);
  return value;
}

/// The timestamp extension (MessagePack specification, "Timestamp extension type": 32, 64 and 96 bits).
std::optional<Time> timestamp(const char* bytes, std::size_t size) {
  if (size == 4) return time_from_parts(static_cast<std::int64_t>(big_endian(bytes, 4)), 0);
  if (size == 8) {
    const std::uint64_t both = big_endian(bytes, 8);
    return time_from_parts(static_cast<std::int64_t>(both & 0x3FFFFFFFFull), static_cast<std::uint32_t>(both >> 34));
  }
  if (size == 12)
    return time_from_parts(static_cast<std::int64_t>(big_endian(bytes + 4, 8)),
                           static_cast<std::uint32_t>(big_endian(bytes, 4)));
  return std::nullopt;
}

/// Turns msgpack-c's visits into events. Declared sizes are ignored: what counts is what comes.
class Visitor {
 public:
  explicit Visitor(Events& events) : events_(events) {}

  bool visit_nil() { return value() && events_.null(); }
  bool visit_boolean(bool v) { return value() && events_.flag(v); }
  bool visit_positive_integer(std::uint64_t v) {
    if (!value()) return false;
    if (v > static_cast<std::uint64_t>(std::numeric_limits<std::int64_t>::max()))
      return events_.number(static_cast<double>(v));
    return events_.integer(static_cast<std::int64_t>(v));
  }
  bool visit_negative_integer(std::int64_t v) { return value() && events_.integer(v); }
  bool visit_float32(float v) { return value() && events_.number(static_cast<double>(v)); }
  bool visit_float64(double v) { return value() && events_.number(v); }
  bool visit_str(const char* v, std::uint32_t size) {
    const std::string_view text(v, size);
    return in_key_ ? events_.key(text) : events_.text(text);
  }
  bool visit_bin(const char*, std::uint32_t) { return value() && events_.alien("binary data"); }
  bool visit_ext(const char* v, std::uint32_t size) {
    if (!value()) return false;
    if (size < 1 || static_cast<signed char>(v[0]) != -1) return events_.alien("an extension type that is no timestamp");
    const auto when = timestamp(v + 1, size - 1);
    return when ? events_.time(*when) : events_.alien("a timestamp outside the years 1678 to 2261");
  }
  bool start_array(std::uint32_t) { return value() && events_.open_list(); }
  bool start_array_item() { return true; }
  bool end_array_item() { return true; }
  bool end_array() { return events_.close_list(); }
  bool start_map(std::uint32_t) { return value() && events_.open_map(); }
  bool start_map_key() { return in_key_ = true; }
  bool end_map_key() {
    in_key_ = false;
    return true;
  }
  bool start_map_value() { return true; }
  bool end_map_value() { return true; }
  bool end_map() { return events_.close_map(); }
  void parse_error(std::size_t, std::size_t at) { broken_at(at, "holds no MessagePack value"); }
  void insufficient_bytes(std::size_t, std::size_t at) { broken_at(at, "is where the message ends, inside a value"); }
  bool referenced() const { return false; }
  void set_referenced(bool) {}

  std::string broken;  // what is wrong with the encoding itself

 private:
  /// Whether a value other than a text may stand here.
  bool value() {
    if (in_key_) broken = "a key of a map is no text";
    return !in_key_;
  }
  void broken_at(std::size_t at, const char* what) {
    if (broken.empty()) broken = "byte " + std::to_string(at) + " " + what;
  }

  Events& events_;
  bool in_key_ = false;
};

}  // namespace

ReadEnd read_msgpack(std::string_view bytes, Events& events) {
  Visitor visitor(events);
  std::size_t read = 0;
  try {
    const bool complete = msgpack::parse(bytes.data(), bytes.size(), read, visitor);
    if (!visitor.broken.empty()) return {ReadEnd::How::broken, visitor.broken};
    if (!complete) return {ReadEnd::How::stopped, {}};
  } catch (const std::exception& problem) {
    return {ReadEnd::How::broken, problem.what()};
  }
  if (read != bytes.size())
    return {ReadEnd::How::broken, std::to_string(bytes.size() - read) + " bytes follow the message, which ends at byte " +
                                      std::to_string(read)};
  return {};
}

}  // namespace halfturn::wire
