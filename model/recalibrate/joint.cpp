// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/joint.hpp"

#include <algorithm>
#include <iterator>
#include <utility>

#include "model/recalibrate/gates.hpp"

namespace halfturn::recalibrate {
namespace {

Reasons refusals(const Reasons& reasons) {
  Reasons found;
  std::copy_if(reasons.begin(), reasons.end(), std::back_inserter(found), [](const Reason& reason) { return reason.refuses; });
  return found;
}

/// Adds what is not said yet.
void say_once(const Reasons& more, Reasons& reasons) {
  for (const Reason& reason : more) {
    const auto same = [&reason](const Reason& said) { return said.code == reason.code && said.text == reason.text; };
    if (std::none_of(reasons.begin(), reasons.end(), same)) reasons.push_back(reason);
  }
}

Context after(const Context& context, const Reasons& found) {
  Context with = context;
  with.given = refusals(found);
  return with;
}

}  // namespace

JointDecision decide_joint(const State& state, const infer::JointFit& fit, const infer::Prior& prior, const Context& context) {
  if (!fit.line) return {decide(state, fit.fit, prior, context), std::nullopt};
  // Beside a line the flops' detuning is measured, not taken from how well the carrier is known.
  infer::Prior of_flops = prior;
  of_flops.detuning.reset();
  Decision line = decide(state, *fit.line, prior, context);
  JointDecision out{decide(state, fit.fit, of_flops, after(context, line.reasons)), std::nullopt};
  Decision& whole = out.whole;
  if (refused(whole.reasons) && !refused(line.reasons)) line = decide(state, *fit.line, prior, after(context, whole.reasons));
  whole.carrier_shift = line.carrier_shift;
  if (line.verdict == Verdict::apply) whole.verdict = Verdict::apply;
  out.line = line.event;
  const Reasons said = std::exchange(whole.reasons, {});
  say_once(said, whole.reasons);
  say_once(line.reasons, whole.reasons);
  std::stable_sort(whole.reasons.begin(), whole.reasons.end(), [](const Reason& a, const Reason& b) { return a.refuses && !b.refuses; });
  return out;
}

}  // namespace halfturn::recalibrate
