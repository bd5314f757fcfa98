// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <map>
#include <nlohmann/json.hpp>
#include <set>
#include <sstream>

#include "model/quantity/constants.hpp"
#include "tests/campaign/compare.hpp"
#include "tests/campaign/held.hpp"
#include "tests/campaign/progress.hpp"
#include "tests/campaign/run.hpp"
#include "tests/campaign/undecidable.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::campaign;

namespace {

/// The answer of who knows the truth, moved by a factor.
std::string answer_for(const Case& c, double factor) {
  nlohmann::json json = {{"family", c.family}, {"seed", c.seed}, {"index", c.index}, {"used", true}};
  if (c.truth.line) json["offset_hz"] = c.truth.detuning / constants::kTwoPi + (factor - 1) * c.width;
  else {
    json["pi_s"] = factor * best_pulse(c.truth, constants::kPi);
    json["pi_sigma_s"] = 1e-3 * json["pi_s"].get<double>();
  }
  return json.dump() + "\n";
}

}  // namespace

TEST_CASE("seeds share a campaign's scans, and every scan is drawn once") {
  const std::vector<std::uint64_t> seeds = {1, 2, 3};
  std::set<std::tuple<std::size_t, std::uint64_t, std::uint64_t>> seen;
  std::map<std::uint64_t, int> by_seed;
  std::map<std::size_t, std::size_t> by_family;
  for (std::int64_t i = 0; i < 100; ++i) {
    const auto at = place_of(i, 7, seeds);
    CHECK(seen.insert({at.family, at.seed, at.index}).second);
    ++by_seed[at.seed];
    ++by_family[at.family];
  }
  for (const auto& [seed, count] : by_seed) CHECK(std::abs(count - 33) <= 7);
  for (const auto& [family, count] : by_family) CHECK(count == scans_of(family, 7, 100));
}

TEST_CASE("a campaign of one seed has the scans of that seed from the first on") {
  for (std::int64_t i = 0; i < 50; ++i) {
    const auto at = place_of(i, 5, {9});
    CHECK(at.seed == 9);
    CHECK(at.index == static_cast<std::uint64_t>(i / 5));
  }
}

TEST_CASE("what a campaign finds does not depend on its threads, and its counts add up") {
  std::vector<const Family*> wanted;
  for (const auto name : {"clean", "flat", "line_clean", "alias_history"}) wanted.push_back(family_named(name));
  const auto one = run({48, {1, 2}, 1}, wanted), two = run({48, {1, 2}, 2}, wanted);
  REQUIRE(one.rows.size() == wanted.size());
  for (std::size_t i = 0; i < one.rows.size(); ++i) {
    const auto &a = one.rows[i], &b = two.rows[i];
    CHECK(a.scans == 12);
    CHECK(a.used == b.used);
    CHECK(a.in_68 == b.in_68);
    CHECK(a.rms_over_bound == b.rms_over_bound);
    CHECK(a.in_68 <= a.in_95);
    CHECK(a.healthy_used <= a.healthy);
    CHECK(a.decidable_used <= a.decidable);
    CHECK(a.examined <= a.healthy);
    std::int64_t refused = 0;
    for (const auto& [code, count] : a.refusals) refused += count;
    CHECK(a.used + refused == a.scans);
  }
}

TEST_CASE("another pipeline's true answers are right, and far ones are wrong") {
  // 30 % of a pi pulse is 0.94 rad: nobody mistakes that in healthy scans.
  for (const auto name : {"clean", "line_clean"}) {
    std::stringstream right, far, none;
    for (std::uint64_t index = 0; index < 12; ++index) {
      const Case c = draw(*family_named(name), 21, index);
      right << answer_for(c, 1);
      far << answer_for(c, 1.3);
      none << nlohmann::json{{"family", name}, {"seed", 21}, {"index", index}, {"used", false}}.dump() << '\n';
    }
    const auto told = compare(right, 1), off = compare(far, 1), silent = compare(none, 1);
    CHECK(told.theirs.front().used == 12);
    CHECK(told.theirs.front().wrong == 0);
    CHECK(off.theirs.front().wrong > 0);
    CHECK(silent.theirs.front().used == 0);
    CHECK(silent.theirs.front().wrong == 0);
    CHECK(silent.theirs.front().healthy == told.theirs.front().healthy);
    CHECK(silent.ours.front().used == told.ours.front().used);
  }
}

TEST_CASE("answers that cannot be scored are refused with their line") {
  const auto told = [](const std::string& text) {
    std::stringstream in(text);
    try {
      compare(in, 1);
    } catch (const BadAnswers& bad) {
      return std::string(bad.what());
    }
    return std::string();
  };
  const std::string good = R"({"family":"clean","seed":1,"index":0,"used":false})";
  CHECK(told("").find("none") != std::string::npos);
  CHECK(told(good + "\n{").find("line 2") != std::string::npos);
  CHECK(told(good + "\n" + good + "\n").find("answered before") != std::string::npos);
  CHECK(told(R"({"family":"nosuch","seed":1,"index":0,"used":false})").find("nosuch") != std::string::npos);
  CHECK(told(R"({"family":"clean","seed":1,"index":0,"used":true})").find("pi_s") != std::string::npos);
}

TEST_CASE("dumped scans are those that the campaign draws") {
  std::stringstream out;
  std::vector<const Family*> wanted = {family_named("references"), family_named("line_power")};
  dump(out, {6, {4}, 1}, wanted);
  std::string text;
  int lines = 0;
  while (std::getline(out, text)) {
    const auto json = nlohmann::json::parse(text);
    const Case c = draw(*family_named(json["family"].get<std::string>()), json["seed"], json["index"]);
    CHECK(json["counts"].get<std::vector<double>>() == c.scan.observed[0]);
    CHECK(json[c.truth.line ? "detuning_hz" : "duration_s"].get<std::vector<double>>() == c.scan.axis);
    CHECK(json.contains("references") == c.scan.references.has_value());
    ++lines;
  }
  CHECK(lines == 6);
}

TEST_CASE("time left is said in words") {
  CHECK(in_words(40) == "40 s");
  CHECK(in_words(720) == "12 min");
  CHECK(in_words(3900) == "1 h 05 min");
}

TEST_CASE("an alias that fits alike is not decidable, a plain flop with many shots is") {
  // On an even grid f and the sampling rate less f fit alike (Nyquist, Trans. AIEE 47, 617 (1928)).
  const auto told = [](const Case& c) { return decidable(c, gaps(c), 0.0); };
  for (std::uint64_t index = 0; index < 8; ++index) CHECK_FALSE(told(draw(*family_named("alias_inside"), 5, index)));
  int plain = 0, asked = 0;
  for (std::uint64_t index = 0; asked < 8; ++index) {
    const Case c = draw(*family_named("clean"), 5, index);
    const double n = c.scan.weight[0][0], contrast = std::abs(c.truth.excited - c.truth.ground);
    const double cycles = c.scan.axis.back() * c.truth.rabi / constants::kTwoPi;
    if (n < 300 || contrast < 0.6 || cycles < 3 || static_cast<double>(c.scan.axis.size()) < 8 * cycles) continue;
    ++asked;
    plain += told(c);
  }
  CHECK(plain == asked);
}
