// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/compare.hpp"

#include <cstdio>
#include <map>
#include <nlohmann/json.hpp>
#include <set>

#include "model/quantity/constants.hpp"
#include "tests/campaign/answer.hpp"

namespace halfturn::campaign {
namespace {

using constants::kTwoPi;
using Json = nlohmann::ordered_json;

Json known(const infer::Known& value) { return {value.mean, value.sigma}; }

Json known_beforehand(const Case& of) {
  Json json = Json::object();
  const auto& d = of.drive;
  if (d.contrast) json["contrast"] = known(*d.contrast);
  if (d.floor) json["floor"] = known(*d.floor);
  if (d.dead_time) json["dead_time_s"] = known(*d.dead_time);
  if (d.carrier_uncertainty) json["carrier_sigma_hz"] = *d.carrier_uncertainty / kTwoPi;
  if (d.expect) json["expect_hz"] = {d.expect->low / kTwoPi, d.expect->high / kTwoPi};
  if (of.scan.references) {
    const auto& r = *of.scan.references;
    json["references"] = {{"bright", {r.bright, r.bright_of}}, {"dark", {r.dark, r.dark_of}}};
  }
  json["max_angle_error_rad"] = d.accept.max_angle_error_rad;
  json["max_carrier_error"] = d.accept.max_carrier_error;
  return json;
}

Json line_of(const Case& of) {
  Json json = {{"family", of.family}, {"seed", of.seed}, {"index", of.index}};
  json[of.truth.line ? "detuning_hz" : "duration_s"] = of.scan.axis;
  if (of.truth.line) json["pulse_s"] = *of.scan.pulse_s;
  json["counts"] = of.scan.observed.front();
  json["shots"] = of.scan.weight.front().front();
  json.update(known_beforehand(of));
  Json& truth = json["truth"] = {{"rabi_hz", of.truth.rabi / kTwoPi}, {"to_be_refused", of.to_be_refused}};
  if (of.truth.line) truth["offset_hz"] = of.truth.detuning / kTwoPi;
  else truth["pi_s"] = best_pulse(of.truth, constants::kPi);
  return json;
}

/// One of their answers, as the reply that it would have been.
struct Theirs {
  const Family* family = nullptr;
  std::uint64_t seed = 0, index = 0;
  wire::Fitted fitted;
};

Theirs read_answer(const std::string& text, std::size_t number) {
  const auto bad = [&](const std::string& why) { return BadAnswers("answers, line " + std::to_string(number) + ": " + why); };
  try {
    const Json json = Json::parse(text);
    Theirs theirs;
    const auto name = json.at("family").get<std::string>();
    theirs.family = family_named(name);
    if (theirs.family == nullptr) throw bad("found the family `" + name + "`, which the campaign does not have");
    theirs.seed = json.at("seed").get<std::uint64_t>();
    theirs.index = json.at("index").get<std::uint64_t>();
    const bool used = json.at("used").get<bool>();
    theirs.fitted.verdict = used ? "apply" : "refuse";
    if (!used) return theirs;
    if (json.contains("offset_hz")) {
      wire::Estimate offset;
      offset.value = json["offset_hz"].get<double>();
      theirs.fitted.estimates.emplace_back("line_offset_hz", offset);
    } else {
      wire::Pulse pi;
      pi.verdict = "apply";
      pi.angle_rad = constants::kPi;
      pi.exact_s = json.at("pi_s").get<double>();
      pi.sigma_s = json.at("pi_sigma_s").get<double>();
      theirs.fitted.pulses.emplace_back("pi", pi);
    }
    return theirs;
  } catch (const Json::exception& error) {
    throw bad(error.what());
  }
}

std::vector<Theirs> read_answers(std::istream& in) {
  std::vector<Theirs> all;
  std::set<std::tuple<std::string_view, std::uint64_t, std::uint64_t>> seen;
  std::string text;
  for (std::size_t number = 1; std::getline(in, text); ++number) {
    all.push_back(read_answer(text, number));
    const auto& last = all.back();
    if (!seen.insert({last.family->name, last.seed, last.index}).second)
      throw BadAnswers("answers, line " + std::to_string(number) + ": a scan that was answered before");
  }
  if (all.empty()) throw BadAnswers("answers: found none");
  return all;
}

Row total(const std::vector<Row>& rows) {
  Row all;
  all.family = "all";
  for (const auto& row : rows) {
    all.scans += row.scans;
    all.healthy += row.healthy;
    all.healthy_used += row.healthy_used;
    all.used += row.used;
    all.wrong += row.wrong;
  }
  return all;
}

void print_pair(std::ostream& out, const Row& ours, const Row& theirs) {
  char line[200];
  const auto percent = [](const Row& row) {
    char text[16] = "-";
    if (row.healthy > 0) std::snprintf(text, sizeof text, "%.1f", 100 * static_cast<double>(row.healthy_used) / static_cast<double>(row.healthy));
    return std::string(text);
  };
  const auto n = [](std::int64_t count) { return static_cast<long long>(count); };
  std::snprintf(line, sizeof line, "%-21s %7lld %7lld | %7lld %7lld %7s %6lld | %7lld %7lld %7s %6lld\n", ours.family.c_str(), n(ours.scans),
                n(ours.healthy), n(ours.used), n(ours.scans - ours.used), percent(ours).c_str(), n(ours.wrong), n(theirs.used),
                n(theirs.scans - theirs.used), percent(theirs).c_str(), n(theirs.wrong));
  out << line;
}

}  // namespace

void dump(std::ostream& out, const Order& order, const std::vector<const Family*>& wanted) {
  for (std::int64_t i = 0; i < order.scans; ++i) {
    const auto at = place_of(i, wanted.size(), order.seeds);
    out << line_of(draw(*wanted[at.family], at.seed, at.index)).dump() << '\n';
  }
  out.flush();
}

Comparison compare(std::istream& in, int threads) {
  const auto answers = read_answers(in);
  std::vector<Scored> ours(answers.size()), theirs(answers.size());
  for_all(static_cast<std::int64_t>(answers.size()), threads, "compared", [&](std::int64_t number) {
    const auto i = static_cast<std::size_t>(number);
    const auto& other = answers[i];
    const Case drawn = draw(*other.family, other.seed, other.index);
    const auto answered = answer(drawn);
    ours[i] = score(drawn, *other.family, answered);
    theirs[i] = score_other(drawn, *other.family, other.fitted, answered.fit);
  });
  std::vector<const Family*> order;
  std::map<const Family*, std::pair<std::vector<Scored>, std::vector<Scored>>> by_family;
  for (std::size_t i = 0; i < answers.size(); ++i) {
    auto& [own, other] = by_family[answers[i].family];
    if (own.empty()) order.push_back(answers[i].family);
    own.push_back(ours[i]);
    other.push_back(theirs[i]);
  }
  Comparison comparison;
  for (const auto* family : order) {
    comparison.ours.push_back(gather(*family, by_family[family].first));
    comparison.theirs.push_back(gather(*family, by_family[family].second));
  }
  return comparison;
}

void print_comparison(std::ostream& out, const Comparison& comparison) {
  char line[200];
  std::snprintf(line, sizeof line, "%-21s %7s %7s | %7s %7s %7s %6s | %7s %7s %7s %6s\n", "", "", "", "halfturn", "", "healthy", "", "other", "",
                "healthy", "");
  out << line;
  std::snprintf(line, sizeof line, "%-21s %7s %7s | %7s %7s %7s %6s | %7s %7s %7s %6s\n", "family", "scans", "healthy", "used", "refused", "used %",
                "wrong", "used", "refused", "used %", "wrong");
  out << line;
  for (std::size_t i = 0; i < comparison.ours.size(); ++i) print_pair(out, comparison.ours[i], comparison.theirs[i]);
  print_pair(out, total(comparison.ours), total(comparison.theirs));
  out.flush();
}

}  // namespace halfturn::campaign
