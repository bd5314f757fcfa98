// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "plugin/wire/request.hpp"

namespace halfturn::wire {

/// Writes one value in one encoding, in the order of the calls. In a map every value is preceded by its key.
class Writer {
 public:
  virtual ~Writer() = default;
  virtual void open_map() = 0;
  virtual void close_map() = 0;
  virtual void open_list() = 0;
  virtual void close_list() = 0;
  virtual void key(std::string_view name) = 0;
  virtual void null() = 0;
  virtual void flag(bool value) = 0;
  virtual void integer(std::int64_t value) = 0;
  virtual void text(std::string_view value) = 0;

  /// A number; null where it is not finite.
  void number(double value) { std::isfinite(value) ? finite(value) : null(); }
  /// The same, whole numbers up to 2^53 as integers.
  void compact_number(double value);
  void time(Time value);
  void numbers(const std::vector<double>& values);
  void texts(const std::vector<std::string>& values);

  // A field of the map that is open.
  void field(std::string_view name, double value) { key(name), number(value); }
  void field(std::string_view name, std::int64_t value) { key(name), integer(value); }
  void field(std::string_view name, bool value) { key(name), flag(value); }
  void field(std::string_view name, std::string_view value) { key(name), text(value); }
  void field(std::string_view name, const char* value) { key(name), text(value); }
  void field(std::string_view name, const std::string& value) { key(name), text(value); }
  void field(std::string_view name, const std::vector<double>& values) { key(name), numbers(values); }
  void field(std::string_view name, const std::vector<std::string>& values) { key(name), texts(values); }

 protected:
  virtual void finite(double value) = 0;
};

/// A writer that collects bytes.
class BytesWriter : public Writer {
 public:
  virtual std::string take() = 0;  // the finished bytes; once
};

/// MessagePack: integers and texts in their shortest form, numbers as 64-bit floats. JSON: one line, no blanks, numbers in
/// the fewest digits that read back to them, bytes that are no UTF-8 replaced by U+FFFD.
std::unique_ptr<BytesWriter> make_writer(Encoding encoding);

}  // namespace halfturn::wire
