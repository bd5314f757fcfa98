// SPDX-License-Identifier: Apache-2.0
// The drift report for other programs: CSV and JSON.
#include <array>
#include <charconv>
#include <cmath>
#include <nlohmann/json.hpp>
#include <utility>

#include "plugin/cli/calendar.hpp"
#include "plugin/cli/drift_report.hpp"

namespace halfturn::cli {
namespace {

using Json = nlohmann::ordered_json;
using Text = std::pair<const char*, std::string log::Event::*>;
using Real = std::pair<const char*, double log::Event::*>;

/// The columns behind `taken_at`, in order; one list for both forms.
const std::array<Text, 6> kTexts = {{{"drive", &log::Event::drive}, {"scan_name", &log::Event::scan_name},
    {"axis", &log::Event::axis}, {"verdict", &log::Event::verdict}, {"effect", &log::Event::effect}, {"reasons", &log::Event::reasons}}};
const std::array<Real, 16> kReals = {{{"rabi_hz", &log::Event::rabi_hz}, {"rabi_sigma_hz", &log::Event::rabi_sigma_hz},
    {"rabi_low_hz", &log::Event::rabi_low_hz}, {"rabi_high_hz", &log::Event::rabi_high_hz},
    {"generalised_hz", &log::Event::generalised_hz}, {"generalised_sigma_hz", &log::Event::generalised_sigma_hz},
    {"line_offset_hz", &log::Event::line_offset_hz}, {"line_offset_sigma_hz", &log::Event::line_offset_sigma_hz},
    {"carrier_hz", &log::Event::carrier_hz}, {"dead_time_s", &log::Event::dead_time_s},
    {"dead_time_sigma_s", &log::Event::dead_time_sigma_s}, {"intensity_w_m2", &log::Event::intensity_w_m2},
    {"drive_amplitude", &log::Event::drive_amplitude}, {"rabi_per_amplitude_hz", &log::Event::rabi_per_amplitude_hz},
    {"rabi_per_amplitude_sigma_hz", &log::Event::rabi_per_amplitude_sigma_hz}, {"compression", &log::Event::compression}}};

/// RFC 4180, 2.5 to 2.7: quoted where it holds a comma, a quote or a line's end; quotes doubled.
std::string field(const std::string& text) {
  if (text.find_first_of(",\"\r\n") == std::string::npos) return text;
  std::string quoted = "\"";
  for (const char c : text) quoted += c == '"' ? std::string("\"\"") : std::string(1, c);
  return quoted + "\"";
}

/// The shortest digits that read back to the same number; nothing where there is none.
std::string field(double value) {
  if (!std::isfinite(value)) return {};
  std::array<char, 32> buffer{};
  const auto end = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value);
  return std::string(buffer.data(), end.ptr);
}

Json number(double value) { return std::isfinite(value) ? Json(value) : Json(nullptr); }

Json day_json(const drift::Day& day) {
  return {{"day", date_text(day.day)}, {"scans", day.scans}, {"refused", day.refused}, {"used", day.used},
          {"rabi_hz", number(day.rabi_hz)}, {"rabi_sigma_hz", number(day.rabi_sigma_hz)},
          {"intensity_w_m2", number(day.intensity_w_m2)}, {"since_first", number(day.since_first)},
          {"since_previous", number(day.since_previous)}};
}

Json trend_json(const drift::Trend& trend) {
  return {{"fits", trend.fits}, {"mean_hz", number(trend.mean_hz)}, {"slope_hz_per_hour", number(trend.slope_hz_per_hour)},
          {"slope_sigma_hz_per_hour", number(trend.slope_sigma)}, {"slope_low_hz_per_hour", number(trend.slope_low)},
          {"slope_high_hz_per_hour", number(trend.slope_high)}, {"relative_per_hour", number(trend.relative_per_hour)},
          {"relative_low_per_hour", number(trend.relative_low)}, {"relative_high_per_hour", number(trend.relative_high)},
          {"scatter", number(trend.scatter)}};
}

Json drive_json(const DriveDrift& part) {
  Json days = Json::array();
  for (const auto& day : part.summary.days) days.push_back(day_json(day));
  return {{"drive_amplitude", number(part.drive_amplitude)}, {"at_other_amplitudes", part.at_other_amplitudes},
          {"days", std::move(days)}, {"trend", trend_json(part.summary.trend)}};
}

Json fit_json(const log::Event& fit) {
  Json json = {{"taken_at", time_text(fit.happened_at)}};
  for (const auto& [name, member] : kTexts) json[name] = fit.*member;
  for (const auto& [name, member] : kReals) json[name] = number(fit.*member);
  json["pulses_s"] = Json::object();
  for (const auto& [name, length] : fit.pulses_s) json["pulses_s"][name] = number(length);
  json["pulses_amplitude"] = Json::object();
  for (const auto& [name, amplitude] : fit.amplitudes) json["pulses_amplitude"][name] = number(amplitude);
  return json;
}

}  // namespace

std::string to_csv(const DriftReport& report) {
  std::string text = "taken_at";
  for (const auto& [name, member] : kTexts) text += std::string(",") + name;
  for (const auto& [name, member] : kReals) text += std::string(",") + name;
  text += "\r\n";
  for (const auto& fit : report.fits) {
    text += time_text(fit.happened_at);
    for (const auto& [name, member] : kTexts) text += "," + field(fit.*member);
    for (const auto& [name, member] : kReals) text += "," + field(fit.*member);
    text += "\r\n";
  }
  return text;
}

std::string to_json(const DriftReport& report) {
  Json json;
  json["since"] = report.since ? Json(time_text(*report.since)) : Json(nullptr);
  json["until"] = report.until ? Json(time_text(*report.until)) : Json(nullptr);
  json["drives"] = Json::object();
  for (const auto& part : report.drives) json["drives"][part.drive] = drive_json(part);
  json["fits"] = Json::array();
  for (const auto& fit : report.fits) json["fits"].push_back(fit_json(fit));
  return json.dump(-1, ' ', false, Json::error_handler_t::replace);
}

}  // namespace halfturn::cli
