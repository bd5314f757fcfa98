// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/writer.hpp"

#include "plugin/wire/check.hpp"
#include "plugin/wire/time.hpp"
#include "plugin/wire/write_json.hpp"
#include "plugin/wire/write_msgpack.hpp"

namespace halfturn::wire {

void Writer::compact_number(double value) {
  const bool whole = std::abs(value) <= kLargestWhole && value == std::floor(value);
  if (whole) integer(static_cast<std::int64_t>(value));
  else number(value);
}

void Writer::time(Time value) { text(format_time(value)); }

void Writer::numbers(const std::vector<double>& values) {
  open_list();
  for (const double value : values) number(value);
  close_list();
}

void Writer::texts(const std::vector<std::string>& values) {
  open_list();
  for (const std::string& value : values) text(value);
  close_list();
}

std::unique_ptr<BytesWriter> make_writer(Encoding encoding) {
  if (encoding == Encoding::json) return make_json_writer();
  return make_msgpack_writer();
}

}  // namespace halfturn::wire
