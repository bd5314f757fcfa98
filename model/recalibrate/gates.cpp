// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/gates.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"
#include "model/recalibrate/gate_words.hpp"

namespace halfturn::recalibrate {
namespace {

using constants::kTwoPi;

// Excess scatter up to three times the readout's own sigma is taken as noise of the apparatus where the residuals show no order;
// above, the model is wrong or the scan was disturbed.
constexpr double kMostScatter = 9.0;
// The more scatter, the more order it could hide: above so much, the residuals' p-value must be so many times min_p_value. Of 108 simulated
// flops with beta-binomial counts and a scatter of 3.5 to 9 (campaign, "scatter") all stayed above 0.01, of 37 with two components 28 fell
// below it, 5 of those above 1e-4.
constexpr double kHidingScatter = 2.0, kStricter = 100.0, kStrictest = 0.1;
// So many of the points may be set aside as outliers.
constexpr double kMostDistrusted = 0.3;
// They must not stand closer together than this probable by chance: what failed for a while may have failed beside it as well.
constexpr double kTogether = 1e-3;
// So many of them are named.
constexpr std::size_t kNamed = 4;
// What is known of one quantity from two sides disagrees where it is so many sigmas apart.
constexpr double kFarApart = 3.0;
// A coupling that gains more than this over proportion, at the largest amplitude of a scan, is of another kind than the response
// that is fitted: couplings that go as the square of the amplitude end at the bound of 1.0 (recalibrate's amplitude_test).
constexpr double kMostGained = -0.8;
// Of min_evidence, what a line must gain over the best monotone curve where its centre is bounded inside the window: monotone curves with
// noise let a line gain no 10 in 600 scans (line_test, "a curve that only rises").
constexpr double kPartOfEvidence = 1.0 / 3.0;

/// What a flop is stepped in, and how its frequencies read: of a scan of amplitudes per unit of amplitude.
struct Stepped {
  const char* what;    // of what finer or uneven steps are asked for
  const char* further;
};

Stepped stepped(const infer::Fit& fit) {
  if (fit.axis == infer::Axis::amplitude) return {"amplitude", "larger amplitudes"};
  return {"pulse length", "longer pulses"};
}

std::string frequency(const infer::Fit& fit, double found) {
  return fit.axis == infer::Axis::amplitude ? hertz(found / fit.effective_length_s()) + " per unit of amplitude" : hertz(found);
}

std::string frequency(const infer::Fit& fit) {
  return fit.axis == infer::Axis::amplitude ? hertz(fit.rabi_per_amplitude) + " per unit of amplitude" : hertz(fit.generalised);
}

bool too_many_outliers(const infer::FitQuality& quality) {
  const int points = quality.distrusted_of ? quality.distrusted_points : quality.points;
  return static_cast<double>(quality.distrusted.size()) > kMostDistrusted * points;
}

/// Outliers that are no accidents, one by one.
bool spoilt(const infer::FitQuality& quality) { return too_many_outliers(quality) || quality.p_together < kTogether; }

/// Of a joint fit, which of its scans: " `flop-17`"; else nothing.
std::string which(std::optional<std::size_t> scan, const Context& context) {
  if (!scan) return {};
  const bool named = *scan < context.scan_names.size() && !context.scan_names[*scan].empty();
  return named ? " `" + context.scan_names[*scan] + "`" : " number " + std::to_string(*scan + 1) + " of those fitted together";
}

/// " of the scan `flop-17`" of a joint fit that failed on one scan alone.
std::string of_joint(const infer::Fit& fit, const Context& context) {
  return fit.quality.of_scan ? " of the scan" + which(fit.quality.of_scan, context) : std::string();
}

/// "3 of 40 points, at 4.2 us, 8.1 us and 9 us," and of a joint fit the scan that they stand in.
std::string points_set_aside(const infer::Fit& fit, const Context& context) {
  const auto& at = fit.quality.distrusted_at;
  const bool joint = fit.quality.distrusted_of.has_value();
  const auto axis = joint ? fit.quality.distrusted_axis : fit.axis;
  std::string text = std::to_string(at.size()) + " of " + std::to_string(joint ? fit.quality.distrusted_points : fit.quality.points) + " points" +
                     (joint ? " of the scan" + which(fit.quality.distrusted_of, context) : std::string()) + ", at ";
  const std::size_t named = at.size() > kNamed + 1 ? kNamed : at.size();
  for (std::size_t i = 0; i < named; ++i) {
    if (i > 0) text += i + 1 == at.size() ? " and " : ", ";
    text += axis == infer::Axis::duration ? engineering(at[i], "s", 4) : engineering(at[i] / kTwoPi, "Hz", 4);
  }
  return text + (named < at.size() ? " and " + std::to_string(at.size() - named) + " more places," : ",");
}

double least_order(const infer::FitQuality& quality, const Accept& accept) {
  const double stricter = std::max(accept.min_p_value, std::min(kStricter * accept.min_p_value, kStrictest));
  return quality.scatter > kHidingScatter ? stricter : accept.min_p_value;
}

bool poor(const infer::FitQuality& quality, const Accept& accept) {
  if (!(quality.p_value < accept.min_p_value)) return false;
  if (quality.scatter > kMostScatter) return true;
  return quality.p_after_scatter < least_order(quality, accept);
}

bool far_apart(const infer::Known& a, const infer::Known& b) {
  return std::abs(a.mean - b.mean) > kFarApart * std::hypot(a.sigma, b.sigma);
}

/// What a fit must gain over the best monotone curve. One of any shape fits the noise of a flank as well, so that a line is ahead of it by
/// less than of a flat one; where the whole interval of its centre lies inside the window, both sides of the centre were seen. Only of a
/// fit that sets nothing aside and leaves no scatter: two lines passed for one with outliers.
double asked_over_monotone(const infer::Fit& fit, const Accept& accept) {
  const bool inside = fit.axis == infer::Axis::detuning && fit.line_offset.low > fit.lowest && fit.line_offset.high < fit.longest;
  const auto& quality = fit.quality;
  const bool clean = quality.distrusted.empty() && !quality.readout_released && !quality.dead_time_released && !(quality.scatter > 1.0);
  return inside && clean ? kPartOfEvidence * accept.min_evidence : accept.min_evidence;
}

void evidence_gates(const infer::Fit& fit, const Context& context, Reasons& reasons) {
  const bool line = fit.axis == infer::Axis::detuning;
  const auto& quality = fit.quality;
  const double least = context.accept.min_evidence;
  if (!(quality.over_flat >= least)) {
    refuse(reasons, line ? "no_line" : "no_oscillation",
           "The scan is hardly better described by " + std::string(line ? "a line" : "an oscillation") + " than by a flat one (deviance gained " +
               plain(quality.over_flat, 3) + ", asked for " + plain(least, 3) +
               "). Look whether the light reaches the atoms, whether atoms are there, and whether the carrier is on the line; "
               "then scan again with more shots.");
  } else if (const double over_monotone = asked_over_monotone(fit, context.accept); !(quality.over_monotone >= over_monotone)) {
    refuse(reasons, "monotone",
           std::string("A curve that only rises or only falls describes the scan nearly as well as ") + (line ? "a line" : "an oscillation") +
               " (deviance gained " + plain(quality.over_monotone, 3) + ", asked for " + plain(over_monotone, 3) + "). " +
               (line ? std::string("Widen the window so that both sides of the line are in it.")
                     : std::string("Scan to ") + stepped(fit).further + " so that a whole cycle is seen."));
  }
}

/// From every starting point the fit ran away: there is nothing to be fitted, flat or monotone.
void nothing_fitted(const infer::Fit& fit, const Context& context, Reasons& reasons) {
  const bool line = fit.axis == infer::Axis::detuning;
  const std::string what = (line ? "line" : "oscillation") + of_joint(fit, context);
  if (fit.quality.monotone_gain >= context.accept.min_evidence)
    return refuse(reasons, "monotone",
                  "No " + what + " could be fitted; a curve that only rises or only falls describes the scan. " +
                      (line ? std::string("Widen the window so that both sides of the line are in it.")
                            : std::string("Scan to ") + stepped(fit).further + " so that a whole cycle is seen."));
  refuse(reasons, line ? "no_line" : "no_oscillation",
         "No " + what + " could be fitted: from every starting point the fit ran away. Look whether the light reaches the atoms, whether atoms are "
         "there, and whether the carrier is on the line; then scan again with more shots.");
}

void rival_gate(const infer::Fit& fit, const Context& context, Reasons& reasons) {
  const auto& quality = fit.quality;
  if (!quality.rival || quality.rival->deviance_above >= context.accept.rival_margin) return;
  const auto& rival = *quality.rival;
  const std::string margin = " fits worse by a deviance of only " + plain(rival.deviance_above, 3) + " (asked for " +
                             plain(context.accept.rival_margin, 3) + "). ";
  if (fit.axis == infer::Axis::detuning) {
    refuse(reasons, "rival",
           "A line at " + hertz(rival.frequency) + " instead of " + hertz(fit.line_offset.value) + margin +
               "There may be two lines, or a side lobe was caught: scan a wider window with a shorter, weaker pulse.");
  } else if (rival.opposite_contrast) {
    refuse(reasons, "rival",
           "Contrast of the opposite sign, at " + frequency(fit, rival.frequency) + ", with a dead time half a cycle away," + margin +
               "State readout.contrast (its sign is enough) or a tighter switching.uncertainty in the configuration.");
  } else {
    refuse(reasons, "rival",
           "The scan cannot tell " + frequency(fit, fit.generalised.value) + " from " + frequency(fit, rival.frequency) + ": the latter" +
               margin + "Step the " + stepped(fit).what + " unevenly or more finely" +
               (fit.axis == infer::Axis::duration ? ", or narrow expect.rabi if you know which it is." : "."));
  }
}

void second_gate(const infer::Fit& fit, Reasons& reasons) {
  if (!fit.quality.second) return;
  const auto& seen = *fit.quality.second;
  const std::string better = ", describe the scan better than one (deviance gained " + plain(seen.gain, 3) + "). ";
  if (fit.axis == infer::Axis::detuning)
    return refuse(reasons, "second_line",
                  "Two lines, at " + hertz(seen.first) + " and, " + percent(seen.share) + " as deep, at " + hertz(seen.second) + better +
                      "That may be another Zeeman component, isotope or motional sideband beside the one that is meant. Scan a window that "
                      "holds one of them alone, or split them by the field or a longer, weaker pulse.");
  refuse(reasons, "second_component",
         "Two oscillations, at " + hertz(seen.first) + " and, with " + percent(seen.share) + " of the atoms, at " + hertz(seen.second) + better +
             "Two Zeeman states, two isotopes, or two sites lit unequally would do this, and no one length is right for both. Prepare one "
             "state, address one site, or centre the beam; then scan again.");
}

void line_gates(const infer::Fit& fit, const Context& context, Reasons& reasons) {
  if (!(fit.quality.over_flat >= context.accept.min_evidence)) return;  // there is no line to have a centre
  const auto& offset = fit.line_offset;
  const double width = fit.quality.line_width;
  if (offset.value < fit.lowest || offset.value > fit.longest)
    return refuse(reasons, "edge",
           "The line's centre, " + hertz(offset) + ", lies outside the window, " + hertz(fit.lowest) + " to " + hertz(fit.longest) +
               ": it is a guess from one flank. Scan around that centre, so that both sides of the line are seen.");
  if (!std::isfinite(offset.sigma) || !std::isfinite(offset.low) || !std::isfinite(offset.high)) {
    refuse(reasons, "uncertain", "The scan does not bound the line's centre. Widen the window so that both sides of the line are in it.");
    return;
  }
  if (offset.sigma > context.accept.max_carrier_error * width)
    refuse(reasons, "uncertain",
           "The line's centre, " + hertz(offset) + ", is uncertain by " + percent(offset.sigma / width) + " of its width (allowed: " +
               percent(context.accept.max_carrier_error) + "). Take more shots, or points on the line's flanks.");
}

/// Scans of a joint fit that cannot be had with one set of shared values.
void agreement_gate(const infer::Fit& fit, const Context& context, Reasons& reasons) {
  const auto& found = fit.quality.disagreement;
  if (!found || !(found->p_value < context.accept.min_p_value)) return;
  refuse(reasons, "scans_disagree",
         "The scans fitted together do not agree: with values of their own they would fit better by a deviance of " + plain(found->deviance, 3) + " (" +
             std::to_string(found->dof) + " expected), most of all the scan" + which(found->scan, context) + ", by " + plain(found->of_scan, 3) +
             ". Power, carrier or alignment may have changed between them, or they were not taken with the same pulse. Fit each alone to see "
             "which moved, and take them again close together.");
}

/// Where dead times disagree: the scan's with the configured one, with that of the scans before, or theirs with the configured one.
void dead_time_caution(const infer::Fit& fit, const infer::Prior& prior, Reasons& reasons) {
  const auto told = [](const infer::Known& known) { return with_uncertainty(known.mean, known.sigma, "s"); };
  const infer::Known configured = prior.dead_time_otherwise.value_or(prior.dead_time);
  const std::string found = with_uncertainty(fit.dead_time_s.value, fit.dead_time_s.sigma, "s");
  if (fit.quality.dead_time_released)
    return caution(reasons, "dead_time",
                   "The dead time found, " + found + ", is far from what is configured, " + told(configured) +
                       ", so the latter was set aside. If the former is right, state it under switching.");
  if (fit.quality.dead_time_doubted)
    return caution(reasons, "dead_time",
                   "The dead time found, " + found + ", is far from that of the scans before, " + told(prior.dead_time) +
                       ", so theirs was set aside. If the switch, its driver or the delays were changed, the next scans will follow.");
  if (!prior.dead_time_otherwise || !far_apart(prior.dead_time, configured)) return;
  caution(reasons, "dead_time",
          "The scans of this drive show a dead time of " + told(prior.dead_time) + ", far from what is configured, " + told(configured) +
              ", so the latter was set aside. If the former is right, state it under switching.");
}

}  // namespace

bool same_amplitude(double tracked, double taken) {
  constexpr double kSame = 1e-3;
  if (!std::isfinite(tracked) || !std::isfinite(taken)) return true;
  return std::abs(taken / tracked - 1.0) <= kSame;
}

bool refused(const Reasons& reasons) {
  return std::any_of(reasons.begin(), reasons.end(), [](const Reason& reason) { return reason.refuses; });
}

void fit_gates(const infer::Fit& fit, const Context& context, Reasons& reasons) {
  const auto& quality = fit.quality;
  if (fit.outcome == infer::FitOutcome::too_few_points)
    return refuse(reasons, "too_few_points",
                  "Only " + std::to_string(quality.points) + " measured points" + of_joint(fit, context) + " at " + std::to_string(fit.sampling.distinct) +
                      " different places: at least 7 at 5 are needed. Scan more points.");
  if (fit.outcome == infer::FitOutcome::not_converged) return nothing_fitted(fit, context, reasons);
  evidence_gates(fit, context, reasons);
  if (fit.axis == infer::Axis::amplitude && fit.compression.value < kMostGained)
    refuse(reasons, "poor_fit",
           "The coupling rises much faster than the drive amplitude, by " + percent(-fit.compression.value) +
               " more at the largest one than in proportion. That is how two-photon drives look, whose coupling goes as the square, and "
               "drives with a threshold: give amplitudes in the unit in which the field goes.");
  else if (poor(quality, context.accept))
    refuse(reasons, "poor_fit",
           "The model does not describe the scan" + which(quality.of_scan, context) + ": the residuals' variance is " + plain(quality.scatter, 3) +
               " times what the readout's own noise allows" +
               (quality.p_after_scatter < least_order(quality, context.accept) ? ", and they follow one another or one stands far out" : "") +
               ". Look for a laser that dropped out, atoms lost, a readout that drifted, or more than two levels taking part.");
  else if (spoilt(quality))
    refuse(reasons, "poor_fit",
           "The model describes the scan only without " + points_set_aside(fit, context) + " which are far from it: " +
               (too_many_outliers(quality) ? "too many to be set aside (allowed: " + percent(kMostDistrusted) + ")"
                                           : std::string("too close together to be single accidents")) +
               ". Look for a laser that dropped out, atoms lost, or a readout that failed for a while; then scan again.");
  second_gate(fit, reasons);
  agreement_gate(fit, context, reasons);
  rival_gate(fit, context, reasons);
  if (quality.outside_expect && !context.expect)
    refuse(reasons, "rival",
           "The only frequency that fits, " + frequency(fit) + ", lies above the scan's sampling limit, " + frequency(fit, quality.range_high) +
               ". Step the " + stepped(fit).what + " more finely" + (fit.axis == infer::Axis::duration ? ", or state expect.rabi." : "."));
  else if (quality.outside_expect)
    refuse(reasons, "outside_expect",
           "The best fit, " + hertz(fit.generalised) + ", lies outside expect.rabi, " + hertz(quality.range_low) + " to " +
               hertz(quality.range_high) + ". If the light has really changed so much, widen expect; else look for the wrong attenuation, "
               "polarisation or transition.");
  if (fit.axis == infer::Axis::detuning) return line_gates(fit, context, reasons);
  if (!(quality.cycles >= context.accept.min_cycles))
    refuse(reasons, "too_few_cycles",
           "The scan holds " + (std::isfinite(quality.cycles) ? "as few as " + plain(std::max(0.0, quality.cycles), 2) : std::string("an unknown number of")) +
               " cycles (lower end of the interval; asked for " + plain(context.accept.min_cycles, 2) + "). Scan to " + stepped(fit).further + ".");
}

void cautions(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, Reasons& reasons) {
  const auto& quality = fit.quality;
  if (fit.outcome != infer::FitOutcome::fitted) return;
  if (quality.by_history)
    caution(reasons, "by_history",
            "The scan alone cannot tell this frequency from another; the drive's history decided. Step the " + std::string(stepped(fit).what) +
                " unevenly to have the scan tell it.");
  if (quality.scatter > 1.0 && !poor(quality, context.accept))
    caution(reasons, "scatter",
            "The points scatter with " + plain(quality.scatter, 3) + " times the variance of the readout's own noise; all errors were widened "
            "for it. Something fluctuates from shot to shot or point to point.");
  if (!quality.distrusted.empty() && !spoilt(quality))
    caution(reasons, "outliers",
            points_set_aside(fit, context) + " are far from what the others say, and were set aside. An ion or atom lost, a laser that dropped out, or a "
            "readout that failed would do this. If it happens often, find out which before trusting the points that are left.");
  if (std::isfinite(fit.drift.value))
    caution(reasons, "drifting",
            "The Rabi frequency changed by " + percent(fit.drift.value) + " (sigma " + percent(fit.drift.sigma) +
                ") along the scan; lengths hold for its middle. Look for a beam that warms up or moves, and scan in less time or in random order.");
  dead_time_caution(fit, prior, reasons);
  if (quality.readout_released)
    caution(reasons, "readout",
            "Floor " + with_uncertainty(fit.floor.value, fit.floor.sigma, "") + " and contrast " +
                with_uncertainty(fit.contrast.value, fit.contrast.sigma, "") + " are far from what is configured under readout, which was set aside. "
                "Look for a readout that drifted, or atoms prepared in the other state.");
  if (fit.axis == infer::Axis::duration && prior.detuning) {
    const double reach = std::abs(prior.detuning->mean) + 2.0 * prior.detuning->sigma;
    const double effect = 0.5 * reach * reach / std::max(fit.generalised.value, 1e-300);
    if (effect > fit.generalised.sigma)
      caution(reasons, "detuning",
              "The carrier is known to " + hertz(prior.detuning->sigma) + ", which leaves the bare Rabi frequency less certain than the "
              "oscillation itself, " + hertz(fit.generalised) + ". Pulse lengths rest on the oscillation; for the intensity, scan the line.");
  }
  if (fit.axis != infer::Axis::amplitude && std::isfinite(context.transition_frequency) && fit.rabi.value > 0.0) {
    const double shift = fit.rabi.value * fit.rabi.value / (4.0 * context.transition_frequency);
    const double sigma = fit.axis == infer::Axis::detuning ? fit.line_offset.sigma : fit.rabi.sigma;
    if (shift > sigma)
      caution(reasons, "rotating_wave",
              "The Bloch-Siegert shift, " + hertz(shift) + ", is as large as the fit's own uncertainty: the rotating-wave approximation is "
              "no longer good enough for this drive.");
  }
  if (state.proposals_unanswered >= kUnansweredSaid)
    caution(reasons, "applied_missing",
            std::to_string(state.proposals_unanswered) + " proposals went by without an `applied` message, so lengths are compared with ones "
            "that may no longer be in use. Send `applied` after loading pulses.");
}

}  // namespace halfturn::recalibrate
