// SPDX-License-Identifier: Apache-2.0
#include "model/infer/scan_objective.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/clones.hpp"

namespace halfturn::infer {
namespace {

constexpr std::size_t kMostFree = 10;  // lead, offset or detuning, dead time, two signals, two of damping and breadth, drift, two of a second
// A coupling below this part of the generalised frequency moves less than 1e-3 of the population: no flop to be fitted.
constexpr double kLeastCoupling = 0.03;
// An ensemble's flop is followed no further, rad: 250 cycles. A profile of one that is hardly determined runs on for ever else, with
// thousands of members at each step.
constexpr double kMostPhase = 1571.0;
// Nor a spread of the detuning beyond this many couplings, where no oscillation is left.
constexpr double kMostDoppler = 3.0;

/// Lower triangle of the sums of w a b over the points, and of s a, for all pairs of `count` columns of `n` values: in four lanes, which
/// makes it vector instructions without leave to reorder sums. `weighted` has room for one column.
HALFTURN_CLONES void sum_products(const double* columns, int count, std::size_t n, const double* score, const double* weight, double* weighted,
                                  double* by_score, double* by_pair) {
  const auto sum = [n](const double* a, const double* b) HALFTURN_INLINE_LAMBDA {
    double lanes[4] = {0.0, 0.0, 0.0, 0.0};
    std::size_t i = 0;
    for (; i + 4 <= n; i += 4)
      for (std::size_t lane = 0; lane < 4; ++lane) lanes[lane] += a[i + lane] * b[i + lane];
    double total = (lanes[0] + lanes[1]) + (lanes[2] + lanes[3]);
    for (; i < n; ++i) total += a[i] * b[i];
    return total;
  };
  for (int a = 0; a < count; ++a) {
    const double* const own = columns + static_cast<std::size_t>(a) * n;
    by_score[a] = sum(score, own);
    for (std::size_t i = 0; i < n; ++i) weighted[i] = weight[i] * own[i];
    for (int b = 0; b <= a; ++b) *by_pair++ = sum(weighted, columns + static_cast<std::size_t>(b) * n);
  }
}

double square(double x) { return x * x; }

}  // namespace

void ObjectiveWorkspace::reserve(std::size_t points) {
  for (auto* array : {&population, &signal, &score, &information, &by_length, &by_parameter, &played, &second_over_first, &second_by_place})
    if (array->size() < points) array->resize(points);
  for (auto& array : by_rate)
    if (array.size() < points) array.resize(points);
  if (sets.size() < points) sets.resize(points);
  if (statuses.size() < points) statuses.resize(points);
  // One column a parameter, and one to spare for products.
  if (jacobian.size() < (kMostFree + 1) * points) jacobian.resize((kMostFree + 1) * points);
  dynamics.reserve(points);
}

/// The lengths as they act: a coupling that is off by a factor acts as a length that is. That scales detuning and dampings as well; a
/// drift of 4 % then misstates a damping by 2 % at the scan's ends, far inside what a scan tells of it.
std::span<const double> ScanObjective::played(const Physical& p) const {
  const auto n = scan_.points();
  if (p.drift == 0.0 || scan_.progress.size() != n) return scan_.axis;
  for (std::size_t i = 0; i < n; ++i) work_.played[i] = p.dead_time + (scan_.axis[i] - p.dead_time) * (1.0 + p.drift * scan_.progress[i]);
  return {work_.played.data(), n};
}

dynamics::Status ScanObjective::populate_ensemble(const Physical& p, const dynamics::Rates& rates, std::span<const double> axis,
                                                  const dynamics::Derivatives& out, bool derivatives) const {
  const auto of = ensemble(p);
  if (scan_.kind == Axis::duration && p.generalised * longest_of(axis) > kMostPhase) return dynamics::Status::too_many_members;
  if (scan_.kind == Axis::duration && of.kind == dynamics::Ensemble::Kind::doppler && of.parameter > kMostDoppler * p.generalised)
    return dynamics::Status::too_many_members;
  const std::span<double> by_parameter(work_.by_parameter.data(), derivatives ? axis.size() : 0);
  dynamics::Status status = dynamics::Status::ok;
  if (scan_.kind == Axis::duration)
    dynamics::ensemble_duration_scan(rates, of, prior_.start, axis, p.dead_time, out, by_parameter, status, work_.ensemble);
  else
    dynamics::ensemble_detuning_scan(rates, of, prior_.start, axis, scan_.pulse_length_s - p.dead_time, out, by_parameter, status,
                                     work_.ensemble);
  const double by_breadth = candidate_ == Dynamics::thermal ? 1.0 : 0.5 / of.parameter;
  for (double& value : by_parameter) value *= by_breadth;
  return status;
}

dynamics::Status ScanObjective::populate_one(const Physical& p, const dynamics::Rates& rates, const dynamics::Derivatives& out,
                                             bool derivatives) const {
  const auto axis = played(p);
  if (is_ensemble(candidate_)) return populate_ensemble(p, rates, axis, out, derivatives);
  dynamics::Status status = dynamics::Status::ok;
  const std::span<const dynamics::Rates> one(&rates, 1);
  if (scan_.kind == Axis::duration) {
    dynamics::duration_scan(one, prior_.start, axis, std::span<const double>(&p.dead_time, 1), out, {&status, 1}, work_.dynamics);
  } else {
    const double length = scan_.pulse_length_s - p.dead_time;
    dynamics::detuning_scan(one, prior_.start, axis, std::span<const double>(&length, 1), out, {&status, 1}, work_.dynamics);
  }
  return status;
}

/// Adds a second component to `out`, which holds the first: of a flop (1 - share) P1 + share P2; of a line P1 + share (1 - P1) P2, the same
/// atoms seen by another transition.
dynamics::Status ScanObjective::add_second(const Physical& p, const dynamics::Derivatives& out, bool derivatives) const {
  const auto n = scan_.points();
  const bool line = scan_.kind == Axis::detuning;
  dynamics::Rates other = rates(p);
  (line ? other.detuning : other.rabi) = line ? other.detuning + p.second_place : other.rabi * p.second_place;
  if (work_.second.size() < (dynamics::kRateCount + 3) * n) work_.second.resize((dynamics::kRateCount + 3) * n);
  double* at = work_.second.data();
  const auto like = [&at, n](std::span<double> of) {
    double* const begin = at;
    at += n;
    return std::span<double>(begin, of.empty() ? 0 : n);
  };
  const auto by_breadth = like({work_.by_parameter.data(), derivatives ? n : 0});
  std::copy_n(work_.by_parameter.begin(), by_breadth.size(), by_breadth.begin());
  dynamics::Derivatives second;
  second.population = like(out.population);
  for (std::size_t r = 0; r < out.by_rate.size(); ++r) second.by_rate[r] = like(out.by_rate[r]);
  second.by_length = like(out.by_length);
  const auto status = populate_one(p, other, second, derivatives);
  if (status != dynamics::Status::ok) return status;
  const auto mix = [&](std::span<double> first, std::span<const double> with, double factor) {
    for (std::size_t i = 0; i < first.size(); ++i) {
      const double kept = line ? 1.0 - p.second_share * second.population[i] : 1.0 - p.second_share;
      const double added = p.second_share * (line ? 1.0 - out.population[i] : 1.0);
      first[i] = kept * first[i] + added * factor * with[i];
    }
  };
  for (std::size_t r = 0; r < out.by_rate.size(); ++r) mix(out.by_rate[r], second.by_rate[r], r == 0 && !line ? p.second_place : 1.0);
  mix(out.by_length, second.by_length, 1.0);
  mix(by_breadth, work_.by_parameter, 1.0);
  std::copy_n(by_breadth.begin(), by_breadth.size(), work_.by_parameter.begin());
  const auto& by_place = second.by_rate[line ? 1 : 0];
  for (std::size_t i = 0; i < n; ++i) {
    const double first = out.population[i], with = second.population[i];
    work_.second_over_first[i] = line ? (1.0 - first) * with : with - first;
    if (derivatives) work_.second_by_place[i] = p.second_share * by_place[i] * (line ? 1.0 - first : other.rabi / p.second_place);
    out.population[i] = first + p.second_share * work_.second_over_first[i];
  }
  return status;
}

bool ScanObjective::populate(const Physical& p, bool derivatives) const {
  if (!(p.generalised > 0.0) || !std::isfinite(p.generalised)) return false;
  if (scan_.kind == Axis::duration && p.detuning_square > (1.0 - square(kLeastCoupling)) * square(p.generalised)) return false;
  const auto n = scan_.points();
  const bool by_amplitude = scan_.kind == Axis::amplitude;
  if (by_amplitude && !(effective_length(p) > 0.0)) return false;
  auto span = [n](std::vector<double>& v, bool wanted) { return std::span<double>(v.data(), wanted ? n : 0); };
  const bool by_decay = candidate_ == Dynamics::decay || candidate_ == Dynamics::decay_dephasing;
  const bool by_leak = candidate_ == Dynamics::leak || candidate_ == Dynamics::leak_dephasing;
  const bool by_dephasing = candidate_ == Dynamics::dephasing || has_two_rates(candidate_);
  dynamics::Derivatives out;
  out.population = span(work_.population, true);
  out.by_rate[0] = span(work_.by_rate[0], derivatives);
  out.by_rate[1] = span(work_.by_rate[1], derivatives && (layout_.line_offset >= 0 || layout_.detuning_square >= 0));
  out.by_rate[2] = span(work_.by_rate[2], derivatives && by_decay);
  out.by_rate[3] = span(work_.by_rate[3], derivatives && by_leak);
  out.by_rate[4] = span(work_.by_rate[4], derivatives && by_dephasing);
  out.by_length = span(work_.by_length, derivatives && (layout_.dead_time >= 0 || layout_.drift >= 0));
  dynamics::Status status = by_amplitude ? populate_amplitudes(p, out) : populate_one(p, rates(p), out, derivatives);
  if (status == dynamics::Status::ok && layout_.second_share >= 0) status = add_second(p, out, derivatives);
  if (status != dynamics::Status::ok) return false;
  for (std::size_t i = 0; i < n; ++i)
    work_.signal[i] = p.signal_ground + p.contrast() * work_.population[i];
  return true;
}

bool ScanObjective::data_part(const Physical& p, double& half_deviance, std::span<double> signal) const {
  if (!populate(p, false)) return false;
  const auto n = scan_.points();
  if (!signal.empty()) std::copy_n(work_.signal.begin(), n, signal.begin());
  return infer::evaluate(readout_, {work_.signal.data(), n}, half_deviance, {}, {});
}

std::span<double> ScanObjective::column(int parameter) const {
  return {work_.jacobian.data() + static_cast<std::size_t>(parameter) * scan_.points(), scan_.points()};
}

/// Derivatives of the signal by the free parameters, from those of the population by rates, length and the ensemble's parameter.
void ScanObjective::fill_columns(const Physical& p) const {
  if (scan_.kind == Axis::amplitude) return fill_amplitude_columns(p);
  const double contrast = p.contrast();
  const auto slopes = lead_slopes(p);
  double of_generalised = contrast;  // d signal/d generalised, at fixed Delta^2, is this times d P/d Omega
  double square_by_rabi = 0.0, square_by_detuning = 0.0;
  if (scan_.kind == Axis::duration) {
    const auto now = rates(p);
    of_generalised *= p.generalised / now.rabi;
    if (layout_.detuning_square >= 0) {
      square_by_rabi = -0.5 * contrast / now.rabi + of_generalised * slopes.by_square;
      square_by_detuning = 0.5 * contrast / now.detuning;
    }
  }
  auto scaled = [this](int slot, double a, const std::vector<double>& by) {
    if (slot < 0) return;
    const auto out = column(slot);
    for (std::size_t i = 0; i < out.size(); ++i) out[i] = a * by[i];
  };
  auto added = [this](int slot, double a, const std::vector<double>& by) {
    if (slot < 0 || a == 0.0) return;
    const auto out = column(slot);
    for (std::size_t i = 0; i < out.size(); ++i) out[i] += a * by[i];
  };
  scaled(layout_.lead, of_generalised * slopes.by_lead, work_.by_rate[0]);
  scaled(layout_.line_offset, contrast, work_.by_rate[1]);
  scaled(layout_.detuning_square, square_by_rabi, work_.by_rate[0]);
  added(layout_.detuning_square, square_by_detuning, work_.by_rate[1]);
  fill_lengths(p, of_generalised * slopes.by_dead_time);
  scaled(layout_.damping, contrast, work_.by_rate[damped_rate()]);
  scaled(layout_.dephasing, contrast, work_.by_rate[4]);
  scaled(layout_.breadth, contrast, work_.by_parameter);
  added(layout_.breadth, of_generalised * slopes.by_breadth, work_.by_rate[0]);
  scaled(layout_.second_share, contrast, work_.second_over_first);
  scaled(layout_.second_place, contrast, work_.second_by_place);
  const double* const population = work_.population.data();
  const auto ground = column(layout_.ground), excited = column(layout_.excited);
  for (std::size_t i = 0; i < ground.size(); ++i) {
    ground[i] = 1.0 - population[i];
    excited[i] = population[i];
  }
}

/// Which of the rates `damping` is.
std::size_t ScanObjective::damped_rate() const {
  switch (candidate_) {
    case Dynamics::leak:
    case Dynamics::leak_dephasing: return dynamics::kByLoss;
    case Dynamics::dephasing: return dynamics::kByDephasing;
    default: return dynamics::kByDecay;
  }
}

/// The columns of what changes the lengths that act: dead time and drift.
void ScanObjective::fill_lengths(const Physical& p, double dead_time_by_rabi) const {
  const auto n = scan_.points();
  const double contrast = p.contrast();
  const bool timed = scan_.progress.size() == n;
  const auto late = [&](std::size_t i) { return timed ? scan_.progress[i] : 0.0; };
  if (layout_.dead_time >= 0) {
    const auto out = column(layout_.dead_time);
    for (std::size_t i = 0; i < n; ++i) out[i] = -contrast * (1.0 + p.drift * late(i)) * work_.by_length[i];
    if (dead_time_by_rabi != 0.0)
      for (std::size_t i = 0; i < n; ++i) out[i] += dead_time_by_rabi * work_.by_rate[0][i];
  }
  if (layout_.drift < 0) return;
  const auto out = column(layout_.drift);
  for (std::size_t i = 0; i < n; ++i) out[i] = contrast * late(i) * (scan_.axis[i] - p.dead_time) * work_.by_length[i];
}

bool ScanObjective::evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const {
  const Physical p = unpack(x);
  const auto n = scan_.points();
  const bool derivatives = gradient != nullptr || information != nullptr;
  if (!populate(p, derivatives)) return false;
  auto span = [n, derivatives](std::vector<double>& v) { return std::span<double>(v.data(), derivatives ? n : 0); };
  if (!infer::evaluate(readout_, {work_.signal.data(), n}, value, span(work_.score), span(work_.information))) return false;
  if (gradient != nullptr) gradient->setZero(layout_.count);
  if (information != nullptr) information->setZero(layout_.count, layout_.count);
  if (derivatives) accumulate(p, gradient, information);
  return add_references(p, value, gradient, information) && add_priors(p, value, gradient, information) && std::isfinite(value);
}

void ScanObjective::accumulate(const Physical& p, Vector* gradient, Matrix* information) const {
  fill_columns(p);
  const int count = layout_.count;
  std::array<double, kMaxParameters> by_score;
  std::array<double, kMaxParameters*(kMaxParameters + 1) / 2> by_pair;
  sum_products(column(0).data(), count, scan_.points(), work_.score.data(), work_.information.data(), column(count).data(), by_score.data(),
               by_pair.data());
  std::size_t pair = 0;
  for (int a = 0; a < count; ++a) {
    if (gradient != nullptr) (*gradient)[a] += by_score[static_cast<std::size_t>(a)];
    for (int b = 0; b <= a; ++b, ++pair)
      if (information != nullptr) (*information)(a, b) = (*information)(b, a) = by_pair[pair];
  }
}

bool ScanObjective::data_information(const Vector& x, Matrix& information) const {
  const Physical p = unpack(x);
  const auto n = scan_.points();
  double half_deviance = 0.0;
  information.setZero(layout_.count, layout_.count);
  if (!populate(p, true)) return false;
  if (!infer::evaluate(readout_, {work_.signal.data(), n}, half_deviance, {work_.score.data(), n}, {work_.information.data(), n}))
    return false;
  accumulate(p, nullptr, &information);
  return true;
}

bool ScanObjective::draw(const Vector& x, const Matrix& covariance, double z, std::span<double> signal, std::span<double> low,
                         std::span<double> high) const {
  const Physical p = unpack(x);
  if (!populate(p, true)) return false;
  fill_columns(p);
  Vector row(layout_.count);
  for (std::size_t i = 0; i < scan_.points(); ++i) {
    for (int a = 0; a < layout_.count; ++a) row[a] = column(a)[i];
    const double half = z * std::sqrt(std::max(0.0, row.dot(covariance * row)));
    signal[i] = work_.signal[i];
    low[i] = signal[i] - half;
    high[i] = signal[i] + half;
  }
  return true;
}

}  // namespace halfturn::infer
