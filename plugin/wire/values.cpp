// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/values.hpp"

#include <algorithm>

namespace halfturn::wire {

Values::Values() = default;
Values::~Values() = default;
Values::Values(Values&&) noexcept = default;
Values& Values::operator=(Values&&) noexcept = default;

Value* Values::find(Field field) {
  const auto at = std::find_if(entries_.begin(), entries_.end(), [&](const Entry& e) { return e.field == field; });
  return at == entries_.end() ? nullptr : &at->value;
}

const Value* Values::find(Field field) const { return const_cast<Values*>(this)->find(field); }

Value& Values::add(Field field) {
  entries_.push_back({field, {}});
  return entries_.back().value;
}

}  // namespace halfturn::wire
