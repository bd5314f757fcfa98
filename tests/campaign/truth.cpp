// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/truth.hpp"

#include <algorithm>
#include <cmath>
#include <utility>

#include "model/quantity/constants.hpp"
#include "plugin/rehearse/integrator.hpp"
#include "tests/campaign/members.hpp"

namespace halfturn::campaign {
namespace {

double excited_after(const Apparatus& a, double rabi, double detuning, double length_s) {
  if (!a.damped()) return rehearse::undamped_population(rabi, detuning, length_s);
  return rehearse::after_square_pulse({rabi, detuning, a.decay, a.loss, a.dephasing}, length_s).excited;
}

/// Highest point of a smooth function between two lengths: a scan, then the root of its slope by Newton's method, held between
/// the neighbours of the highest. `look` gives value, slope and curvature.
template <class F>
double maximiser(const F& look, double low, double high) {
  constexpr int kSteps = 24;
  const double step = (high - low) / kSteps;
  double best = low, most = look(low).value;
  for (int i = 1; i <= kSteps; ++i) {
    const double value = look(low + i * step).value;
    if (value > most) {
      most = value;
      best = low + i * step;
    }
  }
  double a = best - step, b = best + step, at = best;
  for (int i = 0; i < 60 && b - a > 1e-13 * high; ++i) {
    const auto here = look(at);
    (here.slope > 0 ? a : b) = at;
    const double newton = at - here.slope / here.curvature;
    const bool inside = here.curvature < 0 && newton > a && newton < b;
    const double next = inside ? newton : (a + b) / 2;
    if (std::abs(next - at) <= 1e-13 * high) return next;
    at = next;
  }
  return at;
}

/// The mean of undamped flops, all turned on from point to point; on an even grid by one rotation a step instead of a cosine.
class Turning {
 public:
  Turning(const Apparatus& a, const std::vector<Share>& members) {
    for (const auto& share : members) {
      const double rabi = a.rabi * share.member.rabi_scale, detuning = a.detuning + constants::kTwoPi * share.member.detuning_hz;
      const double rate = std::hypot(rabi, detuning);
      rate_.push_back(rate);
      weight_.push_back(0.5 * share.weight * (rabi / rate) * (rabi / rate));
    }
    for (auto* array : {&cos_, &sin_, &step_cos_, &step_sin_}) array->resize(rate_.size());
  }

  /// Excited fraction after `length_s` > 0; lengths that follow one another in even steps are quick.
  double after(double length_s) {
    const double step = length_s - length_;
    if (std::abs(step - step_) > 1e-9 * step_) {
      set(length_s, cos_, sin_);
      step_ = step;
      step_known_ = false;
    } else {
      if (!step_known_) set(step, step_cos_, step_sin_);
      step_known_ = true;
      rotate();
    }
    length_ = length_s;
    double sum = 0;
    for (std::size_t i = 0; i < rate_.size(); ++i) sum += weight_[i] * (1 - cos_[i]);
    return sum;
  }

 private:
  void set(double length_s, std::vector<double>& cosines, std::vector<double>& sines) const {
    for (std::size_t i = 0; i < rate_.size(); ++i) {
      cosines[i] = std::cos(rate_[i] * length_s);
      sines[i] = std::sin(rate_[i] * length_s);
    }
  }
  void rotate() {
    for (std::size_t i = 0; i < rate_.size(); ++i) {
      const double c = cos_[i], s = sin_[i];
      cos_[i] = c * step_cos_[i] - s * step_sin_[i];
      sin_[i] = s * step_cos_[i] + c * step_sin_[i];
    }
  }
  std::vector<double> rate_, weight_, cos_, sin_, step_cos_, step_sin_;
  double length_ = 0, step_ = 0;
  bool step_known_ = false;
};

/// How many points from `first` on follow one another in even steps, to 1e-9 of a step.
std::size_t even_run(std::span<const double> axis, std::size_t first) {
  if (first + 1 >= axis.size()) return axis.size() - first;
  const double step = axis[first + 1] - axis[first];
  std::size_t i = first + 1;
  while (i < axis.size() && std::abs(axis[i] - axis[i - 1] - step) <= 1e-9 * step) ++i;
  return i - first;
}

void damped_flop(const Apparatus& a, std::span<const double> axis, std::span<double> mean) {
  const rehearse::Rates rates{a.rabi, a.detuning, a.decay, a.loss, a.dephasing};
  for (std::size_t i = 0; i < axis.size();) {
    const std::size_t run = axis[i] <= a.dead_time ? 1 : even_run(axis, i);
    const double step = run > 1 ? axis[i + 1] - axis[i] : 0;
    rehearse::after_square_pulses(rates, axis[i] - a.dead_time, step, mean.subspan(i, run));
    i += run;
  }
}

}  // namespace

double Apparatus::generalised() const { return std::hypot(rabi, detuning); }

double population(const Apparatus& a, const rehearse::Member& member, double at) {
  const double member_detuning = constants::kTwoPi * member.detuning_hz;
  const double rabi = a.rabi * member.rabi_scale;
  if (a.line) {
    const double length = a.pulse_s - a.dead_time;
    double sum = excited_after(a, rabi, at - a.detuning + member_detuning, length);
    if (a.second_weight > 0) sum += a.second_weight * (1 - sum) * excited_after(a, rabi, at - a.second_detuning + member_detuning, length);
    return sum;
  }
  const double length = at - a.dead_time;
  const double first = excited_after(a, rabi, a.detuning + member_detuning, length);
  if (!(a.second_weight > 0)) return first;
  return (1 - a.second_weight) * first + a.second_weight * excited_after(a, rabi * a.second_ratio, a.detuning, length);
}

void mean_population(const Apparatus& apparatus, std::span<const double> axis, std::vector<double>& mean) {
  mean.assign(axis.size(), 0.0);
  const auto& a = apparatus;
  const bool plain_flop = !a.line && !(a.second_weight > 0);
  if (plain_flop && a.damped() && a.ensemble.none()) return damped_flop(a, axis, mean);
  const double longest = a.line ? a.pulse_s : *std::max_element(axis.begin(), axis.end());
  const auto members = members_of(a.ensemble, a.rabi * longest, longest);
  if (plain_flop && !a.damped() && !a.ensemble.none()) {
    Turning turning(a, members);
    for (std::size_t i = 0; i < axis.size(); ++i) mean[i] = axis[i] > a.dead_time ? turning.after(axis[i] - a.dead_time) : 0;
    return;
  }
  for (const auto& share : members)
    for (std::size_t i = 0; i < axis.size(); ++i) mean[i] += share.weight * population(a, share.member, axis[i]);
}

double best_pulse(const Apparatus& a, double angle_rad) {
  const double plain = angle_rad / a.generalised();
  if (a.ensemble.none() && !(a.second_weight > 0)) return a.dead_time + plain;
  if (a.ensemble.detuning_spread_hz > 0) return a.dead_time + plain;  // every member has the same coupling
  // The best length lies near the plain one; in a cloud of 0.5 w it is half as long again.
  const double shortest = 0.5 * plain, longest = 2.0 * plain;
  auto members = members_of(a.ensemble, a.generalised() * longest, longest);
  if (a.second_weight > 0) {
    members.front().weight = 1 - a.second_weight;
    members.push_back({{a.second_ratio, 0}, a.second_weight});
  }
  struct Turned {
    double value = 0, slope = 0, curvature = 0;
  };
  const auto turned = [&](double length) {
    Turned sum;
    for (const auto& [member, weight] : members) {
      const double rate = member.rabi_scale * a.generalised(), angle = rate * length - angle_rad;
      sum.value += weight * std::cos(angle);
      sum.slope -= weight * rate * std::sin(angle);
      sum.curvature -= weight * rate * rate * std::cos(angle);
    }
    return sum;
  };
  return a.dead_time + maximiser(turned, shortest, longest);
}

double line_width(const Apparatus& apparatus) {
  Apparatus a = apparatus;
  a.second_weight = 0;
  const double damping = a.decay + a.loss + a.dephasing;
  const double reach = 4 * (a.rabi + damping + constants::kTwoPi * a.ensemble.detuning_spread_hz) + 4 * constants::kPi / a.pulse_s;
  constexpr int kSteps = 400;
  std::vector<double> axis, moved;
  for (int i = 0; i <= kSteps; ++i) axis.push_back(a.detuning + reach * i / kSteps);
  mean_population(a, axis, moved);
  const double half = 0.5 * *std::max_element(moved.begin(), moved.end());
  int outside = kSteps;
  while (outside > 0 && moved[static_cast<std::size_t>(outside - 1)] < half) --outside;
  const auto i = static_cast<std::size_t>(std::max(1, outside));
  const double part = (moved[i - 1] - half) / std::max(moved[i - 1] - moved[i], 1e-300);
  return 2 * reach / kSteps * (static_cast<double>(i - 1) + std::clamp(part, 0.0, 1.0));
}

}  // namespace halfturn::campaign
