// SPDX-License-Identifier: Apache-2.0
// The drift report as people read it.
#include <algorithm>
#include <array>
#include <cmath>

#include "model/quantity/format.hpp"
#include "plugin/cli/calendar.hpp"
#include "plugin/cli/drift_report.hpp"

namespace halfturn::cli {
namespace {

constexpr double kFall = -0.05;  // a relative change from here on is set off; a pi pulse that is 5 % short is off by 157 mrad

enum class Tint { none, warn, bad, faint };

struct Cell {
  std::string text;
  Tint tint = Tint::none;
};
using Line = std::array<Cell, 7>;

/// Characters as a terminal shows them: bytes that begin one in UTF-8.
std::size_t width(const std::string& text) {
  const auto begins = [](char c) { return (static_cast<unsigned char>(c) & 0xC0) != 0x80; };
  return static_cast<std::size_t>(std::count_if(text.begin(), text.end(), begins));
}

std::string tinted(const std::string& text, Tint tint, bool colour) {
  if (!colour || tint == Tint::none || text.empty()) return text;
  const char* code = tint == Tint::bad ? "31" : tint == Tint::warn ? "33" : "2";
  return std::string("\x1b[") + code + "m" + text + "\x1b[0m";
}

/// A change in percent with its sign, to a hundredth: `+0.12 %`.
std::string percent(double change) {
  if (!std::isfinite(change)) return "-";
  const double hundredths = std::round(change * 1e4);
  const auto whole = static_cast<long long>(std::abs(hundredths));
  const std::string tail = std::to_string(100 + whole % 100).substr(1);
  return std::string(hundredths < 0 ? "-" : "+") + std::to_string(whole / 100) + "." + tail + " %";
}

Cell change(double value) { return {percent(value), value <= kFall ? Tint::warn : Tint::none}; }

std::string known_or_dash(const std::string& text) { return text == "unknown" ? "-" : text; }

Line line_of(const drift::Day& day) {
  return {{{date_text(day.day), Tint::none},
           {std::to_string(day.scans), Tint::none},
           {std::to_string(day.refused), day.refused > 0 ? Tint::bad : Tint::none},
           {known_or_dash(with_uncertainty(day.rabi_hz, day.rabi_sigma_hz, "Hz")), Tint::none},
           {known_or_dash(engineering(day.intensity_w_m2, "W/m\u00b2", 4)), Tint::none},
           change(day.since_first),
           change(day.since_previous)}};
}

/// Columns as wide as their widest cell, two spaces apart; the first to the left, numbers to the right.
std::string laid_out(const std::vector<Line>& lines, bool colour) {
  std::array<std::size_t, 7> widths{};
  for (const auto& line : lines) {
    for (std::size_t i = 0; i < line.size(); ++i) widths[i] = std::max(widths[i], width(line[i].text));
  }
  std::string text;
  for (const auto& line : lines) {
    for (std::size_t i = 0; i < line.size(); ++i) {
      const std::string pad(widths[i] - width(line[i].text), ' ');
      const auto cell = tinted(line[i].text, line[i].tint, colour);
      text += (i == 0 ? "  " + cell + pad : "  " + pad + cell);
    }
    text += '\n';
  }
  return text;
}

std::string per_hour(double value) { return plain(100.0 * value, 3) + " %"; }

std::string trend_text(const drift::Trend& trend) {
  if (!std::isfinite(trend.relative_per_hour)) {
    return "  Trend: none yet; it takes three fits at different times that were not refused, here are " +
           std::to_string(trend.fits) + ".\n";
  }
  const bool resolved = trend.slope_low > 0.0 || trend.slope_high < 0.0;
  std::string text = "  Trend: " + per_hour(trend.relative_per_hour) + " per hour, 95 % interval ";
  text += per_hour(trend.relative_low) + " to " + per_hour(trend.relative_high) + " (" + std::to_string(trend.fits) + " fits)";
  text += resolved ? ".\n" : ": none to be seen.\n";
  if (trend.scatter > 1.5) {
    text += "  The fits scatter about it " + plain(trend.scatter, 2) + " times as much as their own uncertainties say.\n";
  }
  return text;
}

std::string block(const DriveDrift& part, bool colour) {
  std::vector<Line> lines;
  const std::array<const char*, 7> titles = {"day (UTC)", "scans", "refused", "Rabi frequency", "intensity",
                                            "since first", "since last day"};
  Line head;
  for (std::size_t i = 0; i < head.size(); ++i) head[i] = {titles[i], Tint::faint};
  lines.push_back(head);
  for (const auto& day : part.summary.days) lines.push_back(line_of(day));
  std::string text = "Drive " + part.drive;
  if (std::isfinite(part.drive_amplitude)) text += " at amplitude " + plain(part.drive_amplitude, 4);
  text += "\n" + laid_out(lines, colour) + trend_text(part.summary.trend);
  const auto aside = part.at_other_amplitudes;
  if (aside > 0) text += "  Left aside: " + std::to_string(aside) + (aside == 1 ? " scan" : " scans") + " at other drive amplitudes.\n";
  return text;
}

std::string range_text(const DriftReport& report) {
  std::string text;
  if (report.since) text += " from " + time_text(*report.since);
  if (report.until) text += " until " + time_text(*report.until);
  return text;
}

}  // namespace

std::string to_table(const DriftReport& report, bool colour) {
  if (report.drives.empty()) {
    const auto whose = report.drive.empty() ? std::string() : " of drive " + report.drive;
    return "No scans" + whose + range_text(report) + " in this log.\n";
  }
  std::string text;
  for (const auto& part : report.drives) text += (text.empty() ? "" : "\n") + block(part, colour);
  return text;
}

}  // namespace halfturn::cli
