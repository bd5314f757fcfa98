// SPDX-License-Identifier: Apache-2.0
#include "model/infer/scan_objective.hpp"

#include <algorithm>
#include <cmath>

namespace halfturn::infer {
namespace {

constexpr std::size_t kMostFree = 7;  // lead, offset, detuning, dead time, two signals, damping
// A signal at exactly 0 or 1 makes the information of a binomial point infinite. 1e-7 costs at most 2e-7 of deviance a shot.
constexpr double kSignalMargin = 1e-7;
// |Delta| is taken as at least this part of the generalised frequency while Delta^2 is fitted, so that dP/d(Delta^2) =
// P_Delta / (2 Delta) + ... stays a number; the population changes by less than 1e-8.
constexpr double kLeastDetuning = 1e-4;
// A coupling below this part of the generalised frequency moves less than 1e-3 of the population: no flop to be fitted.
constexpr double kLeastCoupling = 0.03;
// Priors are normal; beyond this many sigmas a parameter is held back.
constexpr double kPriorReach = 8.0;
// A dead time uncertain by less than this part of the pulse does not change a line by more than 1e-5 of the population.
constexpr double kLineDeadTime = 1e-3;

// Of an amplitude scan's pulse, whose length is fixed, at least a tenth must act.
constexpr double kMostDead = 0.9;

// At this the gain is doubled at the largest amplitude.
constexpr double kMostExpanded = 0.75;

double held_sigma(const Known& known) { return std::max(known.sigma, 1e-6); }

/// Sum of products in four lanes, which makes it vector instructions without leave to reorder sums.
double dot(const double* a, const double* b, std::size_t n) {
  double lanes[4] = {0.0, 0.0, 0.0, 0.0};
  std::size_t i = 0;
  for (; i + 4 <= n; i += 4)
    for (std::size_t lane = 0; lane < 4; ++lane) lanes[lane] += a[i + lane] * b[i + lane];
  double sum = (lanes[0] + lanes[1]) + (lanes[2] + lanes[3]);
  for (; i < n; ++i) sum += a[i] * b[i];
  return sum;
}

double square(double x) { return x * x; }

/// log cosh(x) without overflow.
double log_cosh(double x) {
  const double a = std::abs(x);
  return a + std::log1p(std::exp(-2.0 * a)) - std::log(2.0);
}

struct Penalty {
  double value, slope, curvature;  // of -log density by z; the curvature at least that of the wide part
};

/// A normal prior that may be wrong: -log of 0.95 N(0, 1) + 0.05 N(0, 5^2), 0 at z = 0 (contaminated normal, J. W. Tukey 1960). As
/// the normal within 2.5 sigma; a value 5 sigma out costs a deviance of 10 instead of 25.
Penalty contaminated(double z) {
  constexpr double kWide = 5.0, kShare = 0.05 / 0.95 / kWide;
  const double narrow = -0.5 * z * z, wide = -0.5 * z * z / (kWide * kWide);
  // Ratio of the wide part to the narrow one; beyond exp(60) the narrow one is nothing.
  const double ratio = kShare * std::exp(std::min(60.0, wide - narrow));
  const double share = ratio / (1.0 + ratio), slope_per_z = (1.0 - share) + share / (kWide * kWide);
  const double value = -narrow - std::log1p(ratio) + std::log1p(kShare);
  return {ratio > 1e20 ? -wide - std::log(kShare) + std::log1p(kShare) : value, z * slope_per_z, slope_per_z};
}

}  // namespace

double Physical::rabi() const { return std::sqrt(std::max(0.0, generalised * generalised - detuning_square)); }

void ObjectiveWorkspace::reserve(std::size_t points) {
  for (auto* array : {&population, &signal, &score, &information, &by_length})
    if (array->size() < points) array->resize(points);
  for (auto& array : by_rate)
    if (array.size() < points) array.resize(points);
  if (sets.size() < points) sets.resize(points);
  if (statuses.size() < points) statuses.resize(points);
  // One column a parameter, and one to spare for products.
  if (jacobian.size() < (kMostFree + 1) * points) jacobian.resize((kMostFree + 1) * points);
  dynamics.reserve(points);
}

ScanObjective::ScanObjective(const ScanBatch& scan, const Readout& readout, const Prior& prior, Dynamics candidate, Lead lead,
                             bool negative_contrast, ObjectiveWorkspace& workspace)
    : scan_(scan), readout_(readout), prior_(prior), candidate_(candidate), lead_(lead),
      negative_contrast_(negative_contrast), work_(workspace) {
  const bool line = scan.kind == Axis::detuning;
  auto take = [this](int& slot) { slot = layout_.count++; };
  take(layout_.lead);
  if (line) take(layout_.line_offset);
  if (!line && prior.detuning && prior.detuning->sigma > 0.0) take(layout_.detuning_square);
  if (prior.dead_time.sigma > (line ? kLineDeadTime * scan.pulse_length_s : 0.0)) take(layout_.dead_time);
  take(layout_.ground);
  take(layout_.excited);
  if (candidate != Dynamics::undamped) take(layout_.damping);
  if (scan.kind == Axis::amplitude) take(layout_.compression);
}

Bounds ScanObjective::bounds() const {
  Bounds bounds = Bounds::none(layout_.count);
  auto limit = [&bounds](int slot, double low, double high) {
    if (slot < 0) return;
    bounds.lower[slot] = low;
    bounds.upper[slot] = high;
  };
  const double infinite = std::numeric_limits<double>::infinity();
  const auto& dead = prior_.dead_time;
  // A pulse cannot be shorter than the dead time: its length as the lead coordinate is kept away by `evaluate`.
  if (lead_.kind != Lead::Kind::pulse_length) limit(layout_.lead, 0.0, infinite);
  if (prior_.detuning)
    limit(layout_.detuning_square, 0.0, square(std::abs(prior_.detuning->mean) + kPriorReach * prior_.detuning->sigma));
  limit(layout_.dead_time, dead.mean - kPriorReach * dead.sigma, dead.mean + kPriorReach * dead.sigma);
  if (scan_.kind == Axis::amplitude && layout_.dead_time >= 0)
    bounds.upper[layout_.dead_time] = std::min(bounds.upper[layout_.dead_time], kMostDead * scan_.pulse_length_s);
  limit(layout_.damping, 0.0, infinite);
  if (layout_.compression >= 0) limit(layout_.compression, -kMostExpanded / square(*std::max_element(scan_.axis.begin(), scan_.axis.end())), infinite);
  for (const int slot : {layout_.ground, layout_.excited}) {
    if (readout_.kind == Readout::Kind::binomial) limit(slot, kSignalMargin, 1.0 - kSignalMargin);
    if (readout_.kind == Readout::Kind::poisson) limit(slot, 1e-12, infinite);
  }
  return bounds;
}

Vector ScanObjective::pack(const Physical& physical) const {
  Vector x(layout_.count);
  auto put = [&x](int slot, double value) {
    if (slot >= 0) x[slot] = value;
  };
  double lead = physical.generalised;
  if (lead_.kind == Lead::Kind::bare) lead = physical.rabi();
  if (lead_.kind == Lead::Kind::pulse_length)
    lead = physical.dead_time + lead_.angle_rad / (lead_.area_factor * physical.generalised);
  if (scan_.kind == Axis::amplitude) lead = amplitude_lead(physical);
  put(layout_.lead, lead);
  put(layout_.line_offset, physical.line_offset);
  put(layout_.detuning_square, physical.detuning_square);
  put(layout_.dead_time, physical.dead_time);
  put(layout_.ground, physical.signal_ground);
  put(layout_.excited, physical.signal_excited);
  put(layout_.damping, physical.damping);
  put(layout_.compression, physical.compression);
  return x;
}

Physical ScanObjective::unpack(const Vector& x) const {
  auto get = [&x](int slot, double held) { return slot >= 0 ? x[slot] : held; };
  Physical p;
  p.line_offset = get(layout_.line_offset, 0.0);
  const bool line = scan_.kind == Axis::detuning;
  p.detuning_square = get(layout_.detuning_square, !line && prior_.detuning ? square(prior_.detuning->mean) : 0.0);
  p.dead_time = get(layout_.dead_time, prior_.dead_time.mean);
  p.signal_ground = x[layout_.ground];
  p.signal_excited = x[layout_.excited];
  p.damping = get(layout_.damping, 0.0);
  p.generalised = x[layout_.lead];
  if (lead_.kind == Lead::Kind::bare) p.generalised = std::sqrt(square(x[layout_.lead]) + p.detuning_square);
  if (lead_.kind == Lead::Kind::pulse_length)
    p.generalised = lead_.angle_rad / (lead_.area_factor * (x[layout_.lead] - p.dead_time));
  p.compression = get(layout_.compression, 0.0);
  if (scan_.kind == Axis::amplitude) p.generalised = from_amplitude_lead(x[layout_.lead], p);
  return p;
}

dynamics::Rates ScanObjective::rates(const Physical& p) const {
  dynamics::Rates rates;
  rates.decay = prior_.decay;
  rates.loss = prior_.loss;
  if (candidate_ == Dynamics::dephasing) rates.dephasing = p.damping;
  if (candidate_ == Dynamics::decay) rates.decay += p.damping;
  if (candidate_ == Dynamics::leak) rates.loss += p.damping;
  if (scan_.kind == Axis::detuning) {
    rates.rabi = p.generalised;
    rates.detuning = p.line_offset;
    return rates;
  }
  if (scan_.kind == Axis::amplitude) return rates_at(p, *std::max_element(scan_.axis.begin(), scan_.axis.end()));
  double square_of_detuning = p.detuning_square;
  if (layout_.detuning_square >= 0) square_of_detuning = std::max(square_of_detuning, square(kLeastDetuning * p.generalised));
  rates.detuning = std::sqrt(square_of_detuning);
  rates.rabi = std::sqrt(square(p.generalised) - square_of_detuning);
  return rates;
}

bool ScanObjective::populate(const Physical& p, bool derivatives) const {
  if (!(p.generalised > 0.0) || !std::isfinite(p.generalised)) return false;
  if (scan_.kind == Axis::duration && p.detuning_square > (1.0 - square(kLeastCoupling)) * square(p.generalised)) return false;
  const auto n = scan_.points();
  const bool by_amplitude = scan_.kind == Axis::amplitude;
  if (by_amplitude && !(effective_length(p) > 0.0)) return false;
  const dynamics::Rates rates_now = by_amplitude ? dynamics::Rates{} : rates(p);
  auto span = [n](std::vector<double>& v, bool wanted) { return std::span<double>(v.data(), wanted ? n : 0); };
  dynamics::Derivatives out;
  out.population = span(work_.population, true);
  out.by_rate[0] = span(work_.by_rate[0], derivatives);
  out.by_rate[1] = span(work_.by_rate[1], derivatives && (layout_.line_offset >= 0 || layout_.detuning_square >= 0));
  out.by_rate[2] = span(work_.by_rate[2], derivatives && candidate_ == Dynamics::decay);
  out.by_rate[3] = span(work_.by_rate[3], derivatives && candidate_ == Dynamics::leak);
  out.by_rate[4] = span(work_.by_rate[4], derivatives && candidate_ == Dynamics::dephasing);
  out.by_length = span(work_.by_length, derivatives && layout_.dead_time >= 0);
  dynamics::Status status = dynamics::Status::ok;
  const std::span<const dynamics::Rates> one(&rates_now, 1);
  if (by_amplitude) {
    status = populate_amplitudes(p, out);
  } else if (scan_.kind == Axis::duration) {
    dynamics::duration_scan(one, prior_.start, scan_.axis, std::span<const double>(&p.dead_time, 1), out, {&status, 1}, work_.dynamics);
  } else {
    const double length = scan_.pulse_length_s - p.dead_time;
    dynamics::detuning_scan(one, prior_.start, scan_.axis, std::span<const double>(&length, 1), out, {&status, 1}, work_.dynamics);
  }
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

/// Derivatives of the signal by the free parameters, from those of the population by rates and length.
void ScanObjective::fill_columns(const Physical& p) const {
  if (scan_.kind == Axis::amplitude) return fill_amplitude_columns(p);
  const double contrast = p.contrast();
  const double* const population = work_.population.data();
  // d signal / d parameter = a * d P/d Omega + b * d P/d Delta + c * d P/d length, with one (a, b, c) a parameter.
  double of_generalised = contrast;  // d P/d generalised, at fixed Delta^2, is this times d P/d Omega
  double square_by_rabi = 0.0, square_by_detuning = 0.0, dead_by_rabi = 0.0, lead_factor = 1.0;
  if (scan_.kind == Axis::duration) {
    const auto now = rates(p);
    of_generalised *= p.generalised / now.rabi;
    if (layout_.detuning_square >= 0) {
      square_by_rabi = -0.5 * contrast / now.rabi;
      square_by_detuning = 0.5 * contrast / now.detuning;
    }
    if (lead_.kind == Lead::Kind::bare) {
      lead_factor = p.rabi() / p.generalised;
      square_by_rabi += of_generalised * 0.5 / p.generalised;
    } else if (lead_.kind == Lead::Kind::pulse_length) {
      const double slope = square(p.generalised) * lead_.area_factor / lead_.angle_rad;  // generalised / (length - dead time)
      lead_factor = -slope;
      dead_by_rabi = of_generalised * slope;
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
  scaled(layout_.lead, of_generalised * lead_factor, work_.by_rate[0]);
  scaled(layout_.line_offset, contrast, work_.by_rate[1]);
  scaled(layout_.detuning_square, square_by_rabi, work_.by_rate[0]);
  added(layout_.detuning_square, square_by_detuning, work_.by_rate[1]);
  scaled(layout_.dead_time, -contrast, work_.by_length);
  added(layout_.dead_time, dead_by_rabi, work_.by_rate[0]);
  scaled(layout_.damping, contrast, work_.by_rate[candidate_ == Dynamics::decay ? 2 : candidate_ == Dynamics::leak ? 3 : 4]);
  const auto ground = column(layout_.ground), excited = column(layout_.excited);
  for (std::size_t i = 0; i < ground.size(); ++i) {
    ground[i] = 1.0 - population[i];
    excited[i] = population[i];
  }
}

bool ScanObjective::evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const {
  if (lead_.kind == Lead::Kind::pulse_length && !(x[layout_.lead] > unpack(x).dead_time)) return false;
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
  const auto n = scan_.points();
  const int count = layout_.count;
  double* const weighted = column(count).data();
  for (int a = 0; a < count; ++a) {
    const double* const column_a = column(a).data();
    if (gradient != nullptr) (*gradient)[a] += dot(work_.score.data(), column_a, n);
    if (information == nullptr) continue;
    for (std::size_t i = 0; i < n; ++i) weighted[i] = work_.information[i] * column_a[i];
    for (int b = 0; b <= a; ++b) (*information)(a, b) = (*information)(b, a) = dot(weighted, column(b).data(), n);
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

bool ScanObjective::add_references(const Physical& p, double& value, Vector* gradient, Matrix* information) const {
  if (!scan_.references || readout_.kind == Readout::Kind::gaussian) return true;
  const auto& r = *scan_.references;
  const int bright_slot = negative_contrast_ ? layout_.ground : layout_.excited;
  const int dark_slot = negative_contrast_ ? layout_.excited : layout_.ground;
  const double bright = negative_contrast_ ? p.signal_ground : p.signal_excited;
  const double dark = negative_contrast_ ? p.signal_excited : p.signal_ground;
  auto add = [&](double observed, double weight, double mean, int slot) {
    double half_deviance = 0.0, score = 0.0, info = 0.0;
    const Readout one{readout_.kind, {&observed, 1}, {&weight, 1}};
    if (!infer::evaluate(one, {&mean, 1}, half_deviance, {&score, 1}, {&info, 1})) return false;
    value += half_deviance;
    if (gradient != nullptr) (*gradient)[slot] += score;
    if (information != nullptr) (*information)(slot, slot) += info;
    return true;
  };
  return add(r.bright, r.bright_of, bright, bright_slot) && add(r.dark, r.dark_of, dark, dark_slot);
}

bool ScanObjective::add_priors(const Physical& p, double& value, Vector* gradient, Matrix* information) const {
  auto add = [&](int slot, double excess, double slope, double curvature) {
    value += excess;
    if (slot < 0) return;
    if (gradient != nullptr) (*gradient)[slot] += slope;
    if (information != nullptr) (*information)(slot, slot) += curvature;
  };
  auto normal = [&](int slot, double x, double mean, double sigma) {
    const double z = (x - mean) / sigma;
    add(slot, 0.5 * z * z, z / sigma, 1.0 / square(sigma));
  };
  if (layout_.dead_time >= 0) {
    const auto tail = contaminated((p.dead_time - prior_.dead_time.mean) / prior_.dead_time.sigma);
    const double sigma = prior_.dead_time.sigma;
    add(layout_.dead_time, tail.value, tail.slope / sigma, tail.curvature / square(sigma));
  }
  if (prior_.floor) normal(layout_.ground, p.signal_ground, prior_.floor->mean, held_sigma(*prior_.floor));
  if (prior_.contrast) {
    const double sigma = held_sigma(*prior_.contrast);
    const double z = (p.contrast() - prior_.contrast->mean) / sigma;
    add(layout_.excited, 0.5 * z * z, z / sigma, 1.0 / square(sigma));
    add(layout_.ground, 0.0, -z / sigma, 1.0 / square(sigma));
    if (information != nullptr) {
      (*information)(layout_.ground, layout_.excited) -= 1.0 / square(sigma);
      (*information)(layout_.excited, layout_.ground) -= 1.0 / square(sigma);
    }
  }
  if (layout_.detuning_square >= 0) {
    // Delta of either sign with a normal prior, seen through q = Delta^2 alone: -ln(N(sqrt q) + N(-sqrt q)) up to a constant.
    const double sigma = prior_.detuning->sigma, mean = std::abs(prior_.detuning->mean);
    const double root = std::sqrt(std::max(p.detuning_square, 1e-12 * square(sigma))), a = mean / square(sigma);
    const double tangent = std::tanh(a * root);
    const double curvature = -(square(a) * (1.0 - square(tangent)) / (4.0 * square(root)) - a * tangent / (4.0 * root * square(root)));
    add(layout_.detuning_square, 0.5 * (p.detuning_square + square(mean)) / square(sigma) - log_cosh(a * root),
        0.5 / square(sigma) - 0.5 * a * tangent / root, std::max(0.0, curvature));
  }
  if (scan_.kind == Axis::detuning && prior_.log_rabi) {
    const double sigma = held_sigma(*prior_.log_rabi), z = (std::log(p.generalised) - prior_.log_rabi->mean) / sigma;
    add(layout_.lead, 0.5 * z * z, z / (sigma * p.generalised), 1.0 / square(sigma * p.generalised));
  }
  return true;
}

}  // namespace halfturn::infer
