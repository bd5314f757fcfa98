// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/report.hpp"

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <nlohmann/json.hpp>

#include "model/quantity/constants.hpp"
#include "plugin/wire/encode.hpp"
#include "tests/campaign/answer.hpp"
#include "tests/campaign/bound.hpp"
#include "tests/campaign/undecidable.hpp"

namespace halfturn::campaign {
namespace {

using Json = nlohmann::ordered_json;

double share(std::int64_t part, std::int64_t whole) { return whole > 0 ? static_cast<double>(part) / static_cast<double>(whole) : std::nan(""); }

std::string figure(double value, const char* format) {
  if (!std::isfinite(value)) return "-";
  char text[32];
  std::snprintf(text, sizeof text, format, value);
  return text;
}

std::string refusals_in_words(const Row& row) {
  std::vector<std::pair<std::int64_t, std::string>> sorted;
  for (const auto& [code, count] : row.refusals) sorted.emplace_back(count, code);
  std::sort(sorted.rbegin(), sorted.rend());
  std::string text;
  for (const auto& [count, code] : sorted) text += (text.empty() ? "" : ", ") + code + " " + std::to_string(count);
  return text;
}

/// A number, or null where there is none.
Json number(double value) { return std::isfinite(value) ? Json(value) : Json(nullptr); }

}  // namespace

void print_table(std::ostream& out, const Result& result) {
  char line[260];
  std::snprintf(line, sizeof line, "%-21s %7s %8s %7s %6s %6s %6s %6s %6s %6s %6s %6s %7s %7s  %s\n", "family", "scans", "healthy", "used %", "decid%", "used %", "wrong", "conv.",
                "in 68", "in 95", "u. 68", "u. 95", "rms/CR", "rabi", "refused for");
  out << line;
  for (const auto& row : result.rows) {
    std::snprintf(line, sizeof line, "%-21s %7lld %8lld %7s %6s %6s %6lld %6lld %6s %6s %6s %6s %7s %7s  ", row.family.c_str(), static_cast<long long>(row.scans),
                  static_cast<long long>(row.healthy), figure(100 * share(row.healthy_used, row.healthy), "%.1f").c_str(),
                  figure(100 * share(row.decidable, row.examined), "%.1f").c_str(),
                  figure(100 * share(row.decidable_used, row.decidable), "%.1f").c_str(), static_cast<long long>(row.wrong), static_cast<long long>(row.converged), figure(share(row.in_68, row.converged), "%.3f").c_str(),
                  figure(share(row.in_95, row.converged), "%.3f").c_str(),
                  figure(share(row.used_in_68, row.used_converged), "%.3f").c_str(), figure(share(row.used_in_95, row.used_converged), "%.3f").c_str(),
                  figure(row.measured > 0 ? row.rms_over_bound : NAN, "%.3f").c_str(),
                  figure(row.rabi_measured > 0 ? row.rabi_rms_over_bound : NAN, "%.3f").c_str());
    out << line << refusals_in_words(row) << '\n';
  }
  out << result.scans << " scans, " << result.wrong << " wrong, " << figure(result.seconds, "%.1f") << " s on " << result.threads << " threads, seed";
  for (const auto seed : result.seeds) out << ' ' << seed;
  out << '\n';
  for (const auto& wrong : result.wrong_scans)
    out << "wrong: --seed " << wrong.seed << " --family " << wrong.family << " --index " << wrong.index << "  (deviance against the truth "
        << figure(wrong.held_against, "%.1f") << ")\n";
}

void print_json(std::ostream& out, const Result& result) {
  Json json;
  json["scans"] = result.scans;
  json["wrong"] = result.wrong;
  json["seeds"] = result.seeds;
  json["seconds"] = result.seconds;
  json["threads"] = result.threads;
  json["families"] = Json::array();
  for (const auto& row : result.rows) {
    Json one;
    one["family"] = row.family;
    one["scans"] = row.scans;
    one["healthy"] = row.healthy;
    one["used"] = row.used;
    one["healthy_used"] = row.healthy_used;
    one["examined"] = row.examined;
    one["decidable"] = row.decidable;
    one["decidable_used"] = row.decidable_used;
    one["wrong"] = row.wrong;
    one["converged"] = row.converged;
    one["coverage_68"] = number(share(row.in_68, row.converged));
    one["coverage_95"] = number(share(row.in_95, row.converged));
    one["used_converged"] = row.used_converged;
    one["used_coverage_68"] = number(share(row.used_in_68, row.used_converged));
    one["used_coverage_95"] = number(share(row.used_in_95, row.used_converged));
    one["rms_over_bound"] = number(row.measured > 0 ? row.rms_over_bound : NAN);
    one["rabi_rms_over_bound"] = number(row.rabi_measured > 0 ? row.rabi_rms_over_bound : NAN);
    one["rightly_refused"] = row.rightly_refused;
    one["refusals"] = row.refusals;
    json["families"].push_back(one);
  }
  json["wrong_scans"] = Json::array();
  for (const auto& wrong : result.wrong_scans)
    json["wrong_scans"].push_back(Json{{"seed", wrong.seed}, {"family", wrong.family}, {"index", wrong.index}, {"held_against", number(wrong.held_against)}});
  out << json.dump() << std::endl;
}

void print_case(std::ostream& out, const Case& of, const Family& family) {
  const auto answered = answer(of);
  const auto scored = score(of, family, answered);
  const auto at_best = bound(of);
  const auto gap = gaps(of);
  const auto& t = of.truth;
  Json json;
  json["family"] = of.family;
  json["seed"] = of.seed;
  json["index"] = of.index;
  json["truth"] = Json{{"rabi_hz", t.rabi / constants::kTwoPi}, {"detuning_hz", t.detuning / constants::kTwoPi}, {"decay", t.decay},
                       {"loss", t.loss}, {"dephasing", t.dephasing}, {"dead_time_s", t.dead_time}, {"floor", t.ground},
                       {"contrast", t.excited - t.ground}, {"second_weight", t.second_weight}, {"second_ratio", t.second_ratio},
                       {"second_detuning_hz", t.second_detuning / constants::kTwoPi}, {"rabi_spread", t.ensemble.rabi_spread},
                       {"detuning_spread_hz", t.ensemble.detuning_spread_hz}, {"cloud_ratio", t.ensemble.cloud_ratio},
                       {"mean_phonons", t.ensemble.mean_phonons}, {"lamb_dicke", t.ensemble.lamb_dicke}};
  if (t.line) json["truth"]["width_hz"] = of.width / constants::kTwoPi;
  else
    for (const auto& pulse : of.drive.pulses) json["truth"][pulse.name + "_s"] = best_pulse(t, pulse.angle_rad);
  if (of.drive.expect) json["expect_hz"] = {of.drive.expect->low / constants::kTwoPi, of.drive.expect->high / constants::kTwoPi};
  if (of.drive.contrast) json["known_contrast"] = {of.drive.contrast->mean, of.drive.contrast->sigma};
  if (of.drive.floor) json["known_floor"] = {of.drive.floor->mean, of.drive.floor->sigma};
  if (of.drive.dead_time) json["known_dead_time_s"] = {of.drive.dead_time->mean, of.drive.dead_time->sigma};
  json["bound"] = Json{{"pulse_s", at_best.pulse_s}, {"rabi_hz", number(at_best.rabi / constants::kTwoPi)},
                       {"offset_hz", number(at_best.offset / constants::kTwoPi)}, {"gain", at_best.gain}};
  json["score"] = Json{{"healthy", scored.healthy}, {"used", scored.used}, {"wrong", scored.wrong}, {"in_68", scored.in_68},
                       {"in_95", scored.in_95}, {"off_over_bound", number(scored.off)}, {"held_against", number(scored.held_against)},
                       {"decidable", decidable(of, gap, bound(of).offset)}, {"gap_to_rival", number(gap.rival)}, {"gap_to_monotone", number(gap.monotone)},
                       {"gap_to_flat", number(gap.flat)}};
  json["axis"] = of.scan.axis;
  json["counts"] = of.scan.observed.front();
  json["shots"] = of.scan.weight.front().front();
  if (of.scan.pulse_s) json["pulse_s"] = *of.scan.pulse_s;
  json["reply"] = Json::parse(wire::encode(wire::Reply(answered.fitted), wire::Encoding::json));
  out << json.dump(1) << '\n';
}

}  // namespace halfturn::campaign
