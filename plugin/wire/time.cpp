// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/time.hpp"

#include <chrono>
#include <cstdio>

namespace halfturn::wire {
namespace {

constexpr std::int64_t kGiga = 1'000'000'000;
constexpr std::int64_t kSecondsPerDay = 86'400;

/// Days since 1970-01-01 of a date in the Gregorian calendar.
std::int64_t days_of(int year, unsigned month, unsigned day) {
  using namespace std::chrono;
  return sys_days{std::chrono::year{year} / std::chrono::month{month} / std::chrono::day{day}}.time_since_epoch().count();
}

bool is_date(int year, unsigned month, unsigned day) {
  return (std::chrono::year{year} / std::chrono::month{month} / std::chrono::day{day}).ok();
}

/// Reads from the front of a text.
struct Cursor {
  std::string_view rest;
  bool ok = true;

  int digits(std::size_t count) {
    if (rest.size() < count) return fail();
    int value = 0;
    for (std::size_t i = 0; i < count; ++i) {
      if (rest[i] < '0' || rest[i] > '9') return fail();
      value = 10 * value + (rest[i] - '0');
    }
    rest.remove_prefix(count);
    return value;
  }
  char one_of(std::string_view choice) {
    if (rest.empty() || choice.find(rest[0]) == std::string_view::npos) return static_cast<char>(fail());
    const char found = rest[0];
    rest.remove_prefix(1);
    return found;
  }
  bool next_is_digit() const { return !rest.empty() && rest[0] >= '0' && rest[0] <= '9'; }
  int fail() {
    ok = false;
    return 0;
  }
};

std::uint32_t fraction(Cursor& in) {
  std::uint32_t nanoseconds = 0, unit = 100'000'000;
  if (!in.next_is_digit()) in.ok = false;
  for (; in.next_is_digit(); unit /= 10) nanoseconds += unit * static_cast<std::uint32_t>(in.digits(1));
  return nanoseconds;
}

/// Minutes east of UTC.
int offset(Cursor& in) {
  const char sign = in.one_of("Zz+-");
  if (sign == 'Z' || sign == 'z' || !in.ok) return 0;
  const int hours = in.digits(2);
  in.one_of(":");
  const int minutes = in.digits(2);
  if (hours > 23 || minutes > 59) in.ok = false;
  return (sign == '-' ? -1 : 1) * (60 * hours + minutes);
}

}  // namespace

std::optional<Time> time_from_parts(std::int64_t seconds, std::uint32_t nanoseconds) {
  static const std::int64_t first = days_of(1678, 1, 1) * kSecondsPerDay;
  static const std::int64_t beyond = days_of(2262, 1, 1) * kSecondsPerDay;
  if (seconds < first || seconds >= beyond || nanoseconds >= kGiga) return std::nullopt;
  return seconds * kGiga + nanoseconds;
}

std::optional<Time> parse_time(std::string_view text) {
  Cursor in{text};
  const int year = in.digits(4);
  in.one_of("-");
  const int month = in.digits(2);
  in.one_of("-");
  const int day = in.digits(2);
  in.one_of("Tt ");
  const int hour = in.digits(2);
  in.one_of(":");
  const int minute = in.digits(2);
  in.one_of(":");
  const int second = in.digits(2);
  std::uint32_t nanoseconds = 0;
  if (in.ok && !in.rest.empty() && in.rest[0] == '.') {
    in.rest.remove_prefix(1);
    nanoseconds = fraction(in);
  }
  const int east = offset(in);
  if (!in.ok || !in.rest.empty() || hour > 23 || minute > 59 || second > 60) return std::nullopt;
  if (!is_date(year, static_cast<unsigned>(month), static_cast<unsigned>(day))) return std::nullopt;
  const std::int64_t days = days_of(year, static_cast<unsigned>(month), static_cast<unsigned>(day));
  return time_from_parts(days * kSecondsPerDay + hour * 3600 + (minute - east) * 60 + second, nanoseconds);
}

std::string format_time(Time time) {
  using namespace std::chrono;
  const std::int64_t below = ((time % kGiga) + kGiga) % kGiga;
  const std::int64_t seconds = (time - below) / kGiga;
  const std::int64_t of_day = ((seconds % kSecondsPerDay) + kSecondsPerDay) % kSecondsPerDay;
  const year_month_day date{sys_days{days{(seconds - of_day) / kSecondsPerDay}}};
  char text[64];
  std::snprintf(text, sizeof text, "%04d-%02u-%02uT%02d:%02d:%02d", static_cast<int>(date.year()),
                static_cast<unsigned>(date.month()), static_cast<unsigned>(date.day()), static_cast<int>(of_day / 3600),
                static_cast<int>(of_day / 60 % 60), static_cast<int>(of_day % 60));
  std::string written = text;
  if (below != 0) {
    const int digits = below % 1'000'000 == 0 ? 3 : below % 1'000 == 0 ? 6 : 9;
    std::snprintf(text, sizeof text, ".%09lld", static_cast<long long>(below));
    written.append(text, static_cast<std::size_t>(digits) + 1);
  }
  return written + "Z";
}

Time now() {
  return std::chrono::duration_cast<std::chrono::nanoseconds>(std::chrono::system_clock::now().time_since_epoch()).count();
}

}  // namespace halfturn::wire
