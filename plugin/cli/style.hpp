// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <string_view>

namespace halfturn::cli {

/// Whether a file descriptor wants colour: a terminal that is not dumb, and NO_COLOR unset or empty.
bool colour_wanted(int descriptor);

/// Emphasis on a terminal. It never says more than the words do.
class Style {
 public:
  explicit Style(bool on = false) : on_(on) {}

  bool on() const { return on_; }

  std::string strong(std::string_view text) const { return with("1", text); }
  std::string quiet(std::string_view text) const { return with("2", text); }

  /// `apply` green, `keep` yellow, `refuse` red; anything else as it is.
  std::string verdict(std::string_view text) const;

 private:
  std::string with(std::string_view code, std::string_view text) const;
  bool on_;
};

}  // namespace halfturn::cli
