// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/check.hpp"

#include <cmath>
#include <limits>

#include "plugin/wire/words.hpp"

namespace halfturn::wire {

std::string Checker::place(Field field) const { return (prefix_.empty() ? "" : prefix_ + ".") + std::string(name(field)); }

void Checker::fail(std::string code, std::string where, std::string message) {
  if (!fault_) fault_ = Fault{std::move(code), std::move(where), std::move(message)};
}

void Checker::allow_only(const FieldSet& allowed, const std::string& owner) {
  std::string held;
  for (std::size_t i = static_cast<std::size_t>(Field::id) + 1; i < kFields; ++i)
    if (allowed.has(static_cast<Field>(i)))
      held += (held.empty() ? "`" : ", `") + std::string(name(static_cast<Field>(i))) + "`";
  for (const Entry& entry : values_.entries()) {
    if (allowed.has(entry.field)) continue;
    const std::string found(name(entry.field));
    const bool in_scan = allowed.has(Field::scan) && field_named(found, Map::scan);
    fail("unknown_field", place(entry.field), "`" + found + "` does not belong to " + owner + "; " +
             (in_scan ? "it belongs inside `scan`" : "expected " + (held.empty() ? "nothing more" : "none but " + held)));
  }
}

void Checker::need(Field field, const std::string& why) {
  if (!has(field)) fail("missing_field", place(field), "found no `" + std::string(name(field)) + "`; " + why);
}

std::optional<double> Checker::number(Field field, double least, double most, const std::string& what) {
  const Value* value = find(field);
  if (value == nullptr) return std::nullopt;
  if (value->number >= least && value->number <= most) return value->number;
  fail("bad_value", place(field), "found " + number_text(value->number) + ", expected " + what);
  return std::nullopt;
}

std::optional<double> Checker::positive(Field field) {
  return number(field, std::numeric_limits<double>::denorm_min(), std::numeric_limits<double>::max(), "a number above 0");
}

std::optional<double> Checker::any_number(Field field) {
  const Value* value = find(field);
  return value == nullptr ? std::nullopt : std::optional(value->number);
}

std::optional<std::int64_t> Checker::whole(Field field, std::int64_t least, std::int64_t most) {
  const std::string what = "a whole number from " + std::to_string(least) + " to " + std::to_string(most);
  const auto value = number(field, static_cast<double>(least), static_cast<double>(most), what);
  if (!value) return std::nullopt;
  if (*value == std::floor(*value)) return static_cast<std::int64_t>(*value);
  fail("bad_value", place(field), "found " + number_text(*value) + ", expected " + what);
  return std::nullopt;
}

std::string Checker::printable(Field field, std::size_t most) {
  const Value* value = find(field);
  if (value == nullptr) return {};
  if (is_printable(value->text, most)) return value->text;
  fail("bad_value", place(field),
       "found " + in_quotes(value->text) + ", expected 1 to " + std::to_string(most) + " printable characters");
  return {};
}

std::string Checker::name_of_drive(Field field) {
  const Value* value = find(field);
  if (value == nullptr) return {};
  if (is_name(value->text)) return value->text;
  fail("bad_value", place(field), "found " + in_quotes(value->text) + ", expected a name of 1 to 48 of A-Z a-z 0-9 _ -");
  return {};
}

std::optional<Time> Checker::time(Field field) {
  const Value* value = find(field);
  return value == nullptr ? std::nullopt : std::optional(value->time);
}

bool is_count(double value) { return value >= 0 && value <= kLargestWhole && value == std::floor(value); }

}  // namespace halfturn::wire
