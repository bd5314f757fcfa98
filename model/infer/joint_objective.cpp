// SPDX-License-Identifier: Apache-2.0
#include "model/infer/joint_objective.hpp"

#include <algorithm>
#include <cmath>
#include <utility>

namespace halfturn::infer {
namespace {

// Sigmas of priors that say nothing: 1 s of dead time, 1e12 rad/s of detuning.
constexpr double kAnyDeadTime = 1.0, kAnyDetuning = 1e12;
// A prior of the line is normal; beyond this many sigmas the line is held back, as in scan_coordinates.cpp.
constexpr double kPriorReach = 8.0;

double square(double x) { return x * x; }

bool is_line(const JointScan& scan) { return scan.batch.kind == Axis::detuning; }
bool any_line(std::span<const JointScan> scans) { return std::any_of(scans.begin(), scans.end(), is_line); }
bool on_one_carrier(std::span<const JointScan> scans) {
  return std::all_of(scans.begin(), scans.end(), [&scans](const JointScan& s) { return s.carrier == scans.front().carrier; });
}

/// Whether the line's place is a coordinate: told by detuning scans, or by duration scans on several carriers.
bool has_offset(std::span<const JointScan> scans) { return any_line(scans) || !on_one_carrier(scans); }

/// Detuning of a duration scan: left to the line's coordinate, or known once.
void count_detuning(std::span<const JointScan> scans, bool first, Prior& prior) {
  if (has_offset(scans)) prior.detuning = Known{0.0, kAnyDetuning};
  else if (!first && prior.detuning && prior.detuning->sigma > 0.0) prior.detuning = Known{0.0, kAnyDetuning};
}

}  // namespace

std::vector<Prior> counted_once(std::span<const JointScan> scans) {
  const bool flops = !std::all_of(scans.begin(), scans.end(), is_line);
  bool first_flop = true, first_history = !flops;
  std::vector<Prior> priors;
  std::vector<std::size_t> of_dead_time;  // the scans that know of it, the first flop before all lines
  for (std::size_t i = 0; i < scans.size(); ++i) {
    Prior prior = scans[i].prior;
    prior.drift.reset();
    if (!is_line(scans[i])) count_detuning(scans, std::exchange(first_flop, false), prior);
    if (is_line(scans[i]) && !std::exchange(first_history, false)) prior.log_rabi.reset();
    ObjectiveWorkspace none;
    const Readout nothing{scans[i].batch.readout, {}, {}};
    const bool knows = ScanObjective(scans[i].batch, nothing, prior, Dynamics::undamped, {}, false, none).layout().dead_time >= 0;
    const bool before = !of_dead_time.empty() && is_line(scans[of_dead_time.front()]) && !is_line(scans[i]);
    if (knows) of_dead_time.insert(before ? of_dead_time.begin() : of_dead_time.end(), i);
    priors.push_back(std::move(prior));
  }
  for (std::size_t k = 1; k < of_dead_time.size(); ++k) priors[of_dead_time[k]].dead_time.sigma = kAnyDeadTime;
  return priors;
}

JointObjective::JointObjective(std::span<const JointScan> scans, std::span<const Readout> readouts, std::span<const Prior> priors,
                               Dynamics candidate, Lead lead, const std::array<bool, kMostJointScans>& negative_contrast,
                               ObjectiveWorkspace& workspace)
    : given_(scans), priors_(priors), candidate_(candidate), lead_(lead), lines_(any_line(scans)), work_(workspace) {
  parts_.reserve(scans.size());
  for (std::size_t i = 0; i < scans.size(); ++i)
    parts_.emplace_back(scans[i].batch, readouts[i], priors[i], candidate, Lead{Lead::Kind::bare}, negative_contrast[i], workspace);
  lay_out();
  const auto& known = scans.front().prior.detuning;  // the same for all, each from its own carrier
  if (!lines_ && layout_.offset >= 0 && known && known->sigma > 0.0) of_line_ = Known{-known->mean + scans.front().carrier, known->sigma};
}

void JointObjective::lay_out() {
  auto take = [this](int& slot, bool wanted) {
    if (wanted) slot = layout_.count++;
  };
  const auto any = [this](int Layout::* slot) {
    return std::any_of(parts_.begin(), parts_.end(), [slot](const ScanObjective& part) { return part.layout().*slot >= 0; });
  };
  take(layout_.offset, has_offset(given_));
  take(layout_.detuning_square, layout_.offset < 0 && any(&Layout::detuning_square));
  take(layout_.dead_time, any(&Layout::dead_time));
  take(layout_.damping, any(&Layout::damping));
  take(layout_.dephasing, any(&Layout::dephasing));
  take(layout_.breadth, any(&Layout::breadth));
  layout_.signals = layout_.count;
  layout_.count += 2 * static_cast<int>(parts_.size());
}

Bounds JointObjective::bounds() const {
  Bounds bounds = Bounds::none(layout_.count);
  auto take = [&bounds](int slot, const Bounds& from, int at) {
    if (slot < 0 || at < 0) return;
    bounds.lower[slot] = std::max(bounds.lower[slot], from.lower[at]);
    bounds.upper[slot] = std::min(bounds.upper[slot], from.upper[at]);
  };
  for (std::size_t i = 0; i < parts_.size(); ++i) {
    const Bounds part = parts_[i].bounds();
    const Layout& at = parts_[i].layout();
    take(layout_.detuning_square, part, at.detuning_square);
    take(layout_.dead_time, part, at.dead_time);
    take(layout_.damping, part, at.damping);
    take(layout_.dephasing, part, at.dephasing);
    take(layout_.breadth, part, at.breadth);
    take(layout_.signals + 2 * static_cast<int>(i), part, at.ground);
    take(layout_.signals + 2 * static_cast<int>(i) + 1, part, at.excited);
  }
  if (lead_.kind != Lead::Kind::pulse_length) bounds.lower[0] = 0.0;
  if (of_line_) {
    bounds.lower[layout_.offset] = of_line_->mean - kPriorReach * of_line_->sigma;
    bounds.upper[layout_.offset] = of_line_->mean + kPriorReach * of_line_->sigma;
  }
  return bounds;
}

/// As ScanObjective's: the phase of the best pulse, or the mean coupling over the peak one; 1 of leads without an ensemble.
double JointObjective::factor(const JointPhysical& p, double* by_breadth) const {
  if (by_breadth != nullptr) *by_breadth = 0.0;
  const bool pulse = lead_.kind == Lead::Kind::pulse_length;
  if (!is_ensemble(candidate_) || candidate_ == Dynamics::doppler || (!pulse && lead_.kind != Lead::Kind::mean)) return pulse ? lead_.angle_rad : 1.0;
  Physical of;
  of.generalised = p.rabi;
  of.breadth = p.breadth;
  const auto ensemble = parts_.front().ensemble(of);
  const auto found = pulse ? dynamics::best_pulse_phase(ensemble, lead_.angle_rad, work_.ensemble) : dynamics::mean_coupling(ensemble, work_.ensemble);
  if (by_breadth != nullptr) *by_breadth = found.by_parameter * (candidate_ == Dynamics::thermal ? 1.0 : 0.5 / ensemble.parameter);
  return found.value;
}

/// Delta^2 on the carrier that pulse lengths and the generalised frequency refer to.
double JointObjective::reference_square(const JointPhysical& p) const {
  if (lines_) return 0.0;
  return layout_.offset >= 0 ? square(p.offset) : p.detuning_square;
}

double JointObjective::rabi_of(double lead, const JointPhysical& p) const {
  if (lead_.kind == Lead::Kind::bare) return lead;
  double generalised = lead;
  if (lead_.kind == Lead::Kind::mean) generalised = lead / factor(p, nullptr);
  if (lead_.kind == Lead::Kind::pulse_length) generalised = factor(p, nullptr) / (lead_.area_factor * (lead - p.dead_time));
  return generalised > 0.0 ? std::sqrt(square(generalised) - reference_square(p)) : std::numeric_limits<double>::quiet_NaN();
}

double JointObjective::lead_of(const JointPhysical& p) const {
  if (lead_.kind == Lead::Kind::bare) return p.rabi;
  const double generalised = std::sqrt(square(p.rabi) + reference_square(p));
  if (lead_.kind == Lead::Kind::mean) return generalised * factor(p, nullptr);
  if (lead_.kind == Lead::Kind::pulse_length) return p.dead_time + factor(p, nullptr) / (lead_.area_factor * generalised);
  return generalised;
}

JointObjective::Slopes JointObjective::slopes(const JointPhysical& p) const {
  Slopes out;
  if (lead_.kind == Lead::Kind::bare) return out;
  const double generalised = std::sqrt(square(p.rabi) + reference_square(p)), tilt = generalised / p.rabi;
  double by_breadth = 0.0;
  const double value = factor(p, &by_breadth);
  out.by_lead = tilt;
  out.by_square = -0.5 / p.rabi;
  if (lead_.kind == Lead::Kind::mean) {
    out.by_lead = tilt / value;
    out.by_breadth = -tilt * generalised * by_breadth / value;
  } else if (lead_.kind == Lead::Kind::pulse_length) {
    out.by_dead_time = tilt * square(generalised) * lead_.area_factor / value;
    out.by_lead = -out.by_dead_time;
    out.by_breadth = tilt * generalised * by_breadth / value;
  }
  return out;
}

Vector JointObjective::pack(const JointPhysical& p) const {
  Vector x(layout_.count);
  auto put = [&x](int slot, double value) {
    if (slot >= 0) x[slot] = value;
  };
  put(layout_.lead, lead_of(p));
  put(layout_.offset, p.offset);
  put(layout_.detuning_square, p.detuning_square);
  put(layout_.dead_time, p.dead_time);
  put(layout_.damping, p.damping);
  put(layout_.dephasing, p.dephasing);
  put(layout_.breadth, p.breadth);
  for (std::size_t i = 0; i < parts_.size(); ++i) {
    x[layout_.signals + 2 * static_cast<int>(i)] = p.ground[i];
    x[layout_.signals + 2 * static_cast<int>(i) + 1] = p.excited[i];
  }
  return x;
}

JointPhysical JointObjective::unpack(const Vector& x) const {
  auto get = [&x](int slot, double held) { return slot >= 0 ? x[slot] : held; };
  const Prior& known = priors_.front();
  JointPhysical p;
  p.offset = get(layout_.offset, 0.0);
  p.detuning_square = get(layout_.detuning_square, layout_.offset < 0 && known.detuning ? square(known.detuning->mean) : 0.0);
  p.dead_time = get(layout_.dead_time, known.dead_time.mean);
  p.damping = get(layout_.damping, 0.0);
  p.dephasing = get(layout_.dephasing, 0.0);
  p.breadth = get(layout_.breadth, 0.0);
  for (std::size_t i = 0; i < parts_.size(); ++i) {
    p.ground[i] = x[layout_.signals + 2 * static_cast<int>(i)];
    p.excited[i] = x[layout_.signals + 2 * static_cast<int>(i) + 1];
  }
  p.rabi = rabi_of(x[layout_.lead], p);
  return p;
}

Physical JointObjective::of_scan(std::size_t i, const JointPhysical& joint) const {
  Physical p;
  p.dead_time = joint.dead_time;
  p.signal_ground = joint.ground[i];
  p.signal_excited = joint.excited[i];
  p.damping = joint.damping;
  p.dephasing = joint.dephasing;
  p.breadth = joint.breadth;
  p.generalised = joint.rabi;
  const double offset = joint.offset - given_[i].carrier;
  if (is_line(given_[i])) {
    p.line_offset = offset;
    return p;
  }
  p.detuning_square = layout_.offset >= 0 ? square(offset) : joint.detuning_square;
  p.generalised = std::sqrt(square(joint.rabi) + p.detuning_square);
  return p;
}

Matrix JointObjective::jacobian(std::size_t i, const JointPhysical& p) const {
  const Layout& at = parts_[i].layout();
  Matrix by = Matrix::Zero(at.count, layout_.count);
  auto set = [&by](int row, int column, double value) {
    if (row >= 0 && column >= 0) by(row, column) = value;
  };
  const Slopes rabi = slopes(p);
  set(at.lead, layout_.lead, rabi.by_lead);
  set(at.lead, layout_.dead_time, rabi.by_dead_time);
  set(at.lead, layout_.breadth, rabi.by_breadth);
  set(at.lead, layout_.detuning_square, lines_ ? 0.0 : rabi.by_square);
  set(at.lead, layout_.offset, lines_ ? 0.0 : rabi.by_square * 2.0 * p.offset);
  set(at.line_offset, layout_.offset, 1.0);
  set(at.detuning_square, layout_.offset, 2.0 * (p.offset - given_[i].carrier));
  set(at.detuning_square, layout_.detuning_square, 1.0);
  set(at.dead_time, layout_.dead_time, 1.0);
  set(at.damping, layout_.damping, 1.0);
  set(at.dephasing, layout_.dephasing, 1.0);
  set(at.breadth, layout_.breadth, 1.0);
  set(at.ground, layout_.signals + 2 * static_cast<int>(i), 1.0);
  set(at.excited, layout_.signals + 2 * static_cast<int>(i) + 1, 1.0);
  return by;
}

void JointObjective::add_line_prior(const JointPhysical& p, double& value, Vector* gradient, Matrix* information) const {
  if (!of_line_) return;
  const double z = (p.offset - of_line_->mean) / of_line_->sigma;
  value += 0.5 * z * z;
  if (gradient != nullptr) (*gradient)[layout_.offset] += z / of_line_->sigma;
  if (information != nullptr) (*information)(layout_.offset, layout_.offset) += 1.0 / square(of_line_->sigma);
}

bool JointObjective::evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const {
  const JointPhysical p = unpack(x);
  if (!(p.rabi > 0.0)) return false;
  value = 0.0;
  if (gradient != nullptr) gradient->setZero(layout_.count);
  if (information != nullptr) information->setZero(layout_.count, layout_.count);
  for (std::size_t i = 0; i < parts_.size(); ++i) {
    double part = 0.0;
    Vector slope;
    Matrix curvature;
    if (!parts_[i].evaluate(parts_[i].pack(of_scan(i, p)), part, gradient != nullptr ? &slope : nullptr, information != nullptr ? &curvature : nullptr))
      return false;
    value += part;
    if (gradient == nullptr && information == nullptr) continue;
    const Matrix by = jacobian(i, p);
    if (gradient != nullptr) *gradient += by.transpose() * slope;
    if (information != nullptr) *information += by.transpose() * curvature * by;
  }
  add_line_prior(p, value, gradient, information);
  return std::isfinite(value);
}

}  // namespace halfturn::infer
