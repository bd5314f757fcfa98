// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <cstdio>
#include <nlohmann/json.hpp>

#include "tests/campaign/limits.hpp"

namespace halfturn::campaign {
namespace {

using Json = nlohmann::ordered_json;

constexpr std::size_t kNamed = 12;

bool of_used(const Limit& limit) { return limit.figure == Figure::low_95 && family_named(limit.family)->kind == Kind::misfit; }

std::string figure_name(const Limit& limit) {
  if (limit.figure == Figure::wrong) return "wrong";
  if (of_used(limit)) return "used in 95";
  return limit.figure == Figure::low_68 ? "in 68" : "in 95";
}

std::string figure(double value) {
  if (!std::isfinite(value)) return "-";
  char text[32];
  std::snprintf(text, sizeof text, "%.2f", value);
  return text;
}

Json number(double value) { return std::isfinite(value) ? Json(value) : Json(nullptr); }

std::string imposters_in_words(const Limit& limit) {
  std::string text;
  for (const auto& [name, count] : limit.imposters) text += (text.empty() ? "" : ", ") + name + " " + std::to_string(count);
  return text;
}

void print_losses(std::ostream& out, const Limit& limit) {
  if (limit.losses.empty()) return;
  out << limit.family << ", " << figure_name(limit) << ": " << limit.losses.size() << " scans lost that nothing in the data excuses";
  for (std::size_t i = 0; i < std::min(kNamed, limit.losses.size()); ++i)
    out << (i == 0 ? ": " : ", ") << "--seed " << limit.losses[i].seed << " --index " << limit.losses[i].index;
  out << (limit.losses.size() > kNamed ? ", ...\n" : "\n");
}

}  // namespace

void print_limits(std::ostream& out, const std::vector<Limit>& limits) {
  char line[200];
  std::snprintf(line, sizeof line, "%-21s %-10s %7s %9s %9s %9s %9s %7s %7s  %s\n", "family", "figure", "scans", "target", "nobody", "reachable",
                "Halfturn", "length", "taken", "imposters");
  out << line;
  for (const auto& limit : limits) {
    std::snprintf(line, sizeof line, "%-21s %-10s %7lld %9.3g %9.3g %9.3g %9.3g %7s %7s  ", limit.family.c_str(), figure_name(limit).c_str(),
                  static_cast<long long>(limit.scans), limit.target, limit.nobody, limit.reachable, limit.measured,
                  figure(limit.stretch).c_str(), figure(limit.taken).c_str());
    out << line << imposters_in_words(limit) << '\n';
  }
  for (const auto& limit : limits) print_losses(out, limit);
}

void print_limits_json(std::ostream& out, const std::vector<Limit>& limits) {
  Json json = Json::array();
  for (const auto& limit : limits) {
    Json one{{"family", limit.family}, {"figure", figure_name(limit)}, {"scans", limit.scans}, {"target", limit.target},
             {"nobody", number(limit.nobody)}, {"reachable", number(limit.reachable)}, {"measured", number(limit.measured)}};
    one["length"] = number(limit.stretch);
    one["taken"] = number(limit.taken);
    one["imposters"] = limit.imposters;
    one["losses"] = Json::array();
    for (const auto& loss : limit.losses) one["losses"].push_back(Json{{"seed", loss.seed}, {"index", loss.index}});
    json.push_back(one);
  }
  out << json.dump() << std::endl;
}

}  // namespace halfturn::campaign
