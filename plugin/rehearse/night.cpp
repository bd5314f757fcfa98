// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/night.hpp"

#include <algorithm>
#include <chrono>
#include <cmath>

#include "plugin/wire/time.hpp"

namespace halfturn::rehearse {
namespace {

constexpr std::int64_t kSecond = 1'000'000'000;

wire::Time start_of(const RehearseOptions& options) {
  if (const auto stated = wire::parse_time(options.starts_at)) return *stated;
  const wire::Time seconds = wire::now() / kSecond - static_cast<wire::Time>(options.hours * 3600);
  return seconds * kSecond;
}

Result<void> rehearse_minute(Night& night, double time_s, const Ask& ask) {
  for (auto& drive : night.drives) {
    const auto done = drive.minute(time_s, ask);
    if (!done) return done;
  }
  return {};
}

double seconds_since(std::chrono::steady_clock::time_point start) {
  return std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count();
}

}  // namespace

Result<Night> rehearse_night(const RehearseOptions& options, const Ask& ask, const Watch& watch) {
  const auto began = std::chrono::steady_clock::now();
  if (const auto checked = check(options); !checked) return tl::make_unexpected(checked.error());
  const wire::Time start = start_of(options);
  Night night;
  night.starts_at = wire::format_time(start);
  night.seed = options.seed;
  auto drive = RehearsedDrive::begin(options, start, ask);
  if (!drive) return tl::make_unexpected(drive.error());
  night.drives.push_back(std::move(*drive));

  const double minutes = std::max(1.0, std::floor(options.hours * 60 + 1e-9));
  for (; night.minutes < minutes; ++night.minutes) {
    const auto now = start + static_cast<wire::Time>(night.minutes) * 60 * kSecond;
    if (!watch({night.minutes / minutes, wire::format_time(now), night.drives.back().last_verdict()})) {
      night.interrupted = true;
      break;
    }
    if (const auto done = rehearse_minute(night, night.minutes * 60, ask); !done) {
      night.ended_by = done.error();
      break;
    }
  }
  if (!night.interrupted && !night.ended_by) {
    watch({1.0, wire::format_time(start + static_cast<wire::Time>(minutes) * 60 * kSecond), night.drives.back().last_verdict()});
  }
  night.wall_s = seconds_since(began);
  return night;
}

}  // namespace halfturn::rehearse
