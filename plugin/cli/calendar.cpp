// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/calendar.hpp"

#include <chrono>

namespace halfturn::cli {
namespace {

constexpr std::int64_t kSecondNs = 1'000'000'000;
constexpr std::int64_t kDayNs = 86'400 * kSecondNs;

std::string padded(std::int64_t number, std::size_t width) {
  const auto digits = std::to_string(number);
  return digits.size() >= width ? digits : std::string(width - digits.size(), '0') + digits;
}

std::string fraction(std::int64_t ns) {
  if (ns == 0) return {};
  auto digits = padded(ns, 9);
  while (digits.substr(digits.size() - 3) == "000") digits.resize(digits.size() - 3);
  return "." + digits;
}

}  // namespace

std::string date_text(std::int64_t day) {
  const std::chrono::year_month_day date{std::chrono::sys_days{std::chrono::days{day}}};
  return padded(static_cast<int>(date.year()), 4) + "-" + padded(static_cast<unsigned>(date.month()), 2) + "-" +
         padded(static_cast<unsigned>(date.day()), 2);
}

std::string time_text(std::int64_t time_ns) {
  const std::int64_t day = time_ns / kDayNs - (time_ns % kDayNs < 0 ? 1 : 0);
  const std::int64_t within = time_ns % kDayNs + (time_ns % kDayNs < 0 ? kDayNs : 0);
  const std::int64_t second = within / kSecondNs;
  return date_text(day) + "T" + padded(second / 3600, 2) + ":" + padded(second / 60 % 60, 2) + ":" + padded(second % 60, 2) +
         fraction(within % kSecondNs) + "Z";
}

}  // namespace halfturn::cli
