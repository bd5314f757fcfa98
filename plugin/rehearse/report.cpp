// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <iomanip>
#include <ostream>
#include <sstream>

#include "model/quantity/format.hpp"
#include "plugin/rehearse/night.hpp"

namespace halfturn::rehearse {
namespace {

using nlohmann::json;

std::string fixed(double value, int decimals) {
  if (!std::isfinite(value)) return "-";
  std::ostringstream text;
  // What a fit of a flat scan asks for can be any number; past this the digits would burst the column.
  if (std::abs(value) >= 1e7) text << std::scientific << std::setprecision(1) << value;
  else text << std::fixed << std::setprecision(decimals) << value;
  return text.str();
}

std::string count_of(int count, const std::string& what) { return std::to_string(count) + " " + what + (count == 1 ? "" : "s"); }

void write_row(std::ostream& out, const std::string& name, const std::vector<std::string>& cells) {
  out << "  " << std::left << std::setw(26) << name << std::right;
  for (const auto& cell : cells) out << std::setw(12) << cell;
  out << '\n';
}

void write_scores(const RehearsedDrive& drive, std::ostream& out) {
  write_row(out, "", {"rms", "99 %", "worst", "in 50 mrad", "carrier"});
  write_row(out, "", {"mrad", "mrad", "mrad", "% of time", "rms Hz"});
  for (const auto& strategy : drive.strategies()) {
    const Score s = score(strategy);
    write_row(out, strategy.name(), {fixed(s.rms_rad * 1e3, 1), fixed(s.percentile_99_rad * 1e3, 1), fixed(s.worst_rad * 1e3, 1),
                                     fixed(s.good_fraction * 100, 1), fixed(s.carrier_rms_hz, 0)});
  }
}

void write_tally(const Tally& tally, std::ostream& out) {
  out << "  " << count_of(tally.flops + tally.lines, "scan") << ": " << count_of(tally.flops, "flop") << ", "
      << count_of(tally.lines, "line scan") << "; " << tally.applied << " applied, " << tally.kept << " kept, " << tally.refused
      << " refused\n";
  for (const auto& [reason, times] : tally.refused_for) out << "  refused for " << reason << ": " << times << '\n';
  out << "  spoilt on purpose: " << tally.spoilt << ", of these refused: " << tally.spoilt_refused << '\n';
  out << "  95 % intervals of the Rabi frequency that hold the truth: " << tally.intervals_true << " of " << tally.intervals << '\n';
}

void write_drive(const RehearsedDrive& drive, const Night& night, std::ostream& out) {
  out << "drive " << drive.name() << ", pulse " << drive.pulse() << " of " << plain(drive.angle_rad(), 5)
      << " rad: rotation error over the night\n";
  write_scores(drive, out);
  write_tally(drive.tally(), out);
  out << "  true Rabi frequency: " << engineering(drive.apparatus().truth(0).rabi_hz, "Hz") << " at the start, "
      << engineering(drive.apparatus().truth(night.minutes * 60).rabi_hz, "Hz") << " at the end\n";
}

json to_json(const Score& score) {
  const auto number = [](double value) { return std::isfinite(value) ? json(value) : json(); };
  return {{"rms_rad", number(score.rms_rad)}, {"percentile_99_rad", number(score.percentile_99_rad)},
          {"worst_rad", number(score.worst_rad)}, {"within_50_mrad", number(score.good_fraction)},
          {"carrier_rms_hz", number(score.carrier_rms_hz)}};
}

json to_json(const Tally& tally) {
  return {{"flops", tally.flops}, {"lines", tally.lines}, {"applied", tally.applied}, {"kept", tally.kept},
          {"refused", tally.refused}, {"refused_for", tally.refused_for}, {"spoilt", tally.spoilt},
          {"spoilt_refused", tally.spoilt_refused}, {"intervals", tally.intervals}, {"intervals_true", tally.intervals_true}};
}

json to_json(const RehearsedDrive& drive, double end_s) {
  json scores = json::object();
  const char* const keys[] = {"halfturn", "blind", "untouched"};
  const auto strategies = drive.strategies();
  for (std::size_t i = 0; i < strategies.size(); ++i) scores[keys[i]] = to_json(score(strategies[i]));
  return {{"drive", drive.name()},
          {"pulse", drive.pulse()},
          {"angle_rad", drive.angle_rad()},
          {"rotation_error", scores},
          {"scans", to_json(drive.tally())},
          {"truth", {{"rabi_start_hz", drive.apparatus().truth(0).rabi_hz},
                     {"rabi_end_hz", drive.apparatus().truth(end_s).rabi_hz},
                     {"dead_time_s", drive.apparatus().settings().dead_time_s}}}};
}

}  // namespace

void write_table(const Night& night, std::ostream& out) {
  out << fixed(night.minutes / 60, 2) << " h rehearsed from " << night.starts_at << ", seed " << night.seed << ", in "
      << fixed(night.wall_s, 1) << " s" << (night.interrupted ? " (interrupted)" : night.ended_by ? " (ended early)" : "") << "\n\n";
  for (const auto& drive : night.drives) write_drive(drive, night, out);
}

json to_json(const Night& night) {
  json drives = json::array();
  for (const auto& drive : night.drives) drives.push_back(to_json(drive, night.minutes * 60));
  json object = {{"starts_at", night.starts_at}, {"hours", night.minutes / 60}, {"wall_s", night.wall_s}, {"seed", night.seed},
                 {"interrupted", night.interrupted}, {"drives", drives}};
  if (night.ended_by) object["ended_by"] = {{"code", night.ended_by->code}, {"where", night.ended_by->where}, {"message", night.ended_by->message}};
  return object;
}

}  // namespace halfturn::rehearse
