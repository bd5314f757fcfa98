// SPDX-License-Identifier: Apache-2.0
#include <algorithm>

#include "plugin/wire/write_reply.hpp"

namespace halfturn::wire {
namespace {

template <class T>
using Named = std::vector<std::pair<std::string, T>>;

template <class T>
const T* find(const Named<T>& entries, const std::string& name) {
  const auto at = std::find_if(entries.begin(), entries.end(), [&](const auto& entry) { return entry.first == name; });
  return at == entries.end() ? nullptr : &at->second;
}

/// The names that any site has, in the order in which they first come.
template <class T>
std::vector<std::string> names_of(const std::vector<SiteFit>& sites, Named<T> SiteFit::* member) {
  std::vector<std::string> names;
  for (const SiteFit& site : sites)
    for (const auto& entry : site.*member)
      if (std::find(names.begin(), names.end(), entry.first) == names.end()) names.push_back(entry.first);
  return names;
}

/// One column: what `write` writes of each row, null where the row is absent.
template <class Row, class Write>
void column(Writer& to, const std::string& name, const std::vector<const Row*>& rows, Write write) {
  to.key(name);
  to.open_list();
  for (const Row* row : rows) {
    if (row == nullptr) to.null();
    else write(*row);
  }
  to.close_list();
}

template <class T>
std::vector<const T*> rows_of(const std::vector<SiteFit>& sites, Named<T> SiteFit::* member, const std::string& name) {
  std::vector<const T*> rows;
  for (const SiteFit& site : sites) rows.push_back(find(site.*member, name));
  return rows;
}

void write_estimates(Writer& to, const std::vector<SiteFit>& sites) {
  for (const std::string& name : names_of(sites, &SiteFit::estimates)) {
    const auto rows = rows_of(sites, &SiteFit::estimates, name);
    to.key(name);
    to.open_map();
    column(to, "value", rows, [&](const Estimate& e) { to.number(e.value); });
    column(to, "sigma", rows, [&](const Estimate& e) { to.number(e.sigma); });
    column(to, "low", rows, [&](const Estimate& e) { to.number(e.low); });
    column(to, "high", rows, [&](const Estimate& e) { to.number(e.high); });
    column(to, "why", rows, [&](const Estimate& e) { e.why.empty() ? to.null() : to.text(e.why); });
    to.close_map();
  }
}

void write_pulse_columns(Writer& to, const std::vector<const Pulse*>& rows) {
  const bool in_amplitude =
      std::any_of(rows.begin(), rows.end(), [](const Pulse* p) { return p != nullptr && p->in_amplitude; });
  const std::string unit = in_amplitude ? "_amplitude" : "_s";
  to.open_map();
  column(to, "verdict", rows, [&](const Pulse& p) { to.text(p.verdict); });
  column(to, "angle_rad", rows, [&](const Pulse& p) { to.number(p.angle_rad); });
  column(to, "length" + unit, rows, [&](const Pulse& p) { to.number(p.length_s); });
  column(to, "exact" + unit, rows, [&](const Pulse& p) { to.number(p.exact_s); });
  column(to, "sigma" + unit, rows, [&](const Pulse& p) { to.number(p.sigma_s); });
  column(to, "low" + unit, rows, [&](const Pulse& p) { to.number(p.low_s); });
  column(to, "high" + unit, rows, [&](const Pulse& p) { to.number(p.high_s); });
  column(to, "ticks", rows, [&](const Pulse& p) { to.integer(p.ticks); });
  column(to, "previous" + unit, rows, [&](const Pulse& p) { to.number(p.previous_s); });
  column(to, "change", rows, [&](const Pulse& p) { to.number(p.change); });
  column(to, "rotation_error_rad", rows, [&](const Pulse& p) { to.number(p.rotation_error_rad); });
  column(to, "tick_error_rad", rows, [&](const Pulse& p) { to.number(p.tick_error_rad); });
  column(to, "transfer", rows, [&](const Pulse& p) { to.number(p.transfer); });
  to.close_map();
}

void write_quality_columns(Writer& to, const std::vector<const SiteFit*>& rows) {
  to.key("quality");
  to.open_map();
  column(to, "deviance", rows, [&](const SiteFit& s) { to.number(s.quality.deviance); });
  column(to, "dof", rows, [&](const SiteFit& s) { to.number(s.quality.dof); });
  column(to, "p_value", rows, [&](const SiteFit& s) { to.number(s.quality.p_value); });
  column(to, "cycles", rows, [&](const SiteFit& s) { to.number(s.quality.cycles); });
  column(to, "points", rows, [&](const SiteFit& s) { to.integer(s.quality.points); });
  column(to, "scatter", rows, [&](const SiteFit& s) { to.number(s.quality.scatter); });
  column(to, "distrusted", rows, [&](const SiteFit& s) {
    to.open_list();
    for (const auto index : s.quality.distrusted) to.integer(index);
    to.close_list();
  });
  column(to, "condition", rows, [&](const SiteFit& s) { to.number(s.quality.condition); });
  column(to, "at_bound", rows, [&](const SiteFit& s) {
    to.open_list();
    for (const auto& name : s.quality.at_bound) to.text(name);
    to.close_list();
  });
  to.close_map();
}

}  // namespace

void write_sites(Writer& to, const std::vector<SiteFit>& sites) {
  std::vector<const SiteFit*> rows;
  for (const SiteFit& site : sites) rows.push_back(&site);
  to.open_map();
  column(to, "name", rows, [&](const SiteFit& s) { to.text(s.name); });
  column(to, "verdict", rows, [&](const SiteFit& s) { to.text(s.verdict); });
  column(to, "reasons", rows, [&](const SiteFit& s) {
    to.open_list();
    for (const Reason& reason : s.reasons) to.text(reason.code);
    to.close_list();
  });
  write_estimates(to, sites);
  to.key("pulses");
  to.open_map();
  for (const std::string& name : names_of(sites, &SiteFit::pulses)) {
    to.key(name);
    write_pulse_columns(to, rows_of(sites, &SiteFit::pulses, name));
  }
  to.close_map();
  column(to, "dynamics", rows, [&](const SiteFit& s) { to.text(s.dynamics); });
  write_quality_columns(to, rows);
  to.close_map();
}

}  // namespace halfturn::wire
