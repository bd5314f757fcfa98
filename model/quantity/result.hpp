// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <tl/expected.hpp>
#include <utility>

namespace halfturn {

/// What is wrong with an input: a stable code (`bad_value`, `bad_shape`, ...), the place (`scan.counts[3]`), and a
/// sentence that says what was found and what would be right.
struct Fault {
  std::string code;
  std::string where;
  std::string message;
};

/// A value or a Fault, which the caller may not drop unread. (A class and not an alias: an alias of tl::expected would
/// lose `[[nodiscard]]`.)
template <class T>
class [[nodiscard]] Result : public tl::expected<T, Fault> {
 public:
  using Base = tl::expected<T, Fault>;
  using Base::Base;
  Result(Base base) : Base(std::move(base)) {}
};

template <>
class [[nodiscard]] Result<void> : public tl::expected<void, Fault> {
 public:
  using Base = tl::expected<void, Fault>;
  using Base::Base;
  Result(Base base) : Base(std::move(base)) {}
};

/// `return fault("bad_value", "scan.shots[2]", "found -3, expected a whole number of at least 0");`
inline tl::unexpected<Fault> fault(std::string code, std::string where, std::string message) {
  return tl::unexpected<Fault>(Fault{std::move(code), std::move(where), std::move(message)});
}

}  // namespace halfturn
