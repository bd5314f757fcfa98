// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/progress.hpp"

#include <unistd.h>

#include <cmath>
#include <cstdio>

namespace halfturn::campaign {

constexpr double kSilent = 2;  // s: what is over by then needs no word

std::string in_words(double seconds) {
  char text[40];
  const auto whole = std::lround(seconds), minutes = std::lround(seconds / 60);
  if (whole < 100) std::snprintf(text, sizeof text, "%ld s", whole);
  else if (minutes < 60) std::snprintf(text, sizeof text, "%ld min", minutes);
  else std::snprintf(text, sizeof text, "%ld h %02ld min", minutes / 60, minutes % 60);
  return text;
}

Progress::Progress(std::int64_t whole, std::string what) : whole_(whole), what_(std::move(what)), terminal_(isatty(STDERR_FILENO) != 0) {}

double Progress::seconds() const { return std::chrono::duration<double>(std::chrono::steady_clock::now() - begun_).count(); }

void Progress::one_more() {
  const std::int64_t done = ++done_, steps = terminal_ ? 100 : 10;
  if (done * steps / whole_ == (done - 1) * steps / whole_) return;
  if (seconds() < kSilent) return;
  const double left = seconds() * static_cast<double>(whole_ - done) / static_cast<double>(done);
  const std::lock_guard lock(saying_);
  std::fprintf(stderr, "%s%3lld %% of %lld scans %s, %s left%s", terminal_ ? "\r" : "", static_cast<long long>(done * 100 / whole_),
               static_cast<long long>(whole_), what_.c_str(), in_words(left).c_str(), terminal_ && done < whole_ ? "   " : "\n");
}

}  // namespace halfturn::campaign
