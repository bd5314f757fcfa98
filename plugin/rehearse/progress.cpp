// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/progress.hpp"

#include <cmath>

namespace halfturn::rehearse {

Progress::~Progress() {
  if (open_) out_ << '\n' << std::flush;
}

void Progress::show(const Moment& moment) {
  const int percent = static_cast<int>(std::floor(moment.done * 100 + 1e-9));
  const int step = terminal_ ? percent : percent / 10;
  if (step == shown_) return;
  shown_ = step;
  // The line is cleared to its end, for a shorter one leaves the rest of a longer one behind.
  if (terminal_) out_ << '\r';
  out_ << percent << " %  " << moment.time << "  last verdict: " << moment.verdict << (terminal_ ? "\x1b[K" : "\n") << std::flush;
  open_ = terminal_;
}

}  // namespace halfturn::rehearse
