// SPDX-License-Identifier: Apache-2.0
#include "model/infer/profile.hpp"

#include <algorithm>
#include <cmath>
#include <optional>

#include "model/infer/box.hpp"

namespace halfturn::infer {
namespace {

using Index = Eigen::Index;
using Kind = ProfileEnd::Kind;
constexpr double kInfinity = std::numeric_limits<double>::infinity();

/// The search for one end: `side` is -1 for the low one, +1 for the high one; distances count outward from the minimum.
class Search {
 public:
  Search(const Objective& objective, const Minimum& minimum, Index index, double deviance, const Bounds& bounds,
         const ProfileOptions& options, int side)
      : objective_(objective), minimum_(minimum), bounds_(bounds), options_(options), index_(index), side_(side),
        target_(std::sqrt(deviance)),
        room_(side > 0 ? bounds.upper[index] - minimum.x[index] : minimum.x[index] - bounds.lower[index]) {}

  ProfileEnd run() {
    if (room_ <= 0.0) return end(Kind::bound, 0.0, minimum_.x);
    if (const auto found = newton()) return *found;
    return bracketed();
  }
  bool lower_found() const { return lowest_ < minimum_.value - 1e-3; }

 private:
  /// What the quadratic model at a point says of the profile there.
  struct Local {
    double root = 0.0;       // sqrt of twice the rise, the nuisance parameters at their best
    double slope = 0.0;      // of the rise, outward
    double curvature = 0.0;  // of the rise
    double promised = 0.0;   // decrease that the nuisance parameters still promise
    Matrix hessian;
  };

  /// The parameter at a distance, exactly on its bound from there on.
  double position(double distance) const {
    if (distance >= room_) return side_ > 0 ? bounds_.upper[index_] : bounds_.lower[index_];
    return minimum_.x[index_] + side_ * distance;
  }
  double width(const Vector& x) const { return side_ * (x[index_] - minimum_.x[index_]); }

  ProfileEnd end(Kind kind, double distance, const Vector& x) const {
    ProfileEnd out;
    out.kind = kind;
    out.evaluations = evaluations_;
    if (kind == Kind::open || kind == Kind::failed) return out;
    out.x = x;
    out.at = out.x[index_] = position(distance);
    return out;
  }

  bool evaluate(Minimum& at) {
    ++evaluations_;
    const bool good = objective_.evaluate(at.x, at.value, &at.gradient, &at.information) && std::isfinite(at.value) &&
                      at.gradient.allFinite() && at.information.allFinite();
    if (good) lowest_ = std::min(lowest_, at.value);
    return good;
  }

  /// The best move of the nuisance parameters when the parameter of interest moves by `shift`.
  bool follow(const Minimum& at, const Matrix& hessian, double shift, BoxStep& box) const {
    Vector lower = bounds_.lower - at.x, upper = bounds_.upper - at.x;
    lower[index_] = upper[index_] = 0.0;
    const Vector gradient = at.gradient + shift * hessian.col(index_);
    return minimise_in_box(gradient, hessian, lower.cwiseMin(0.0), upper.cwiseMax(0.0), box);
  }

  /// `last` is the point before, where there is one: its gradient tells of the curvature between.
  bool look(const Minimum& at, Local& local, const Minimum* last = nullptr) const {
    local.hessian = at.information;
    for (Index i = 0; i < at.x.size(); ++i) {
      double& h = local.hessian(i, i);
      h = h > 0.0 ? h * (1.0 + 4.0 * std::numeric_limits<double>::epsilon()) : 1.0;
    }
    if (last != nullptr) learn_curvature(at.x - last->x, at.gradient - last->gradient, local.hessian);
    BoxStep box;
    if (!follow(at, local.hessian, 0.0, box)) return false;
    const Vector slope = at.gradient + local.hessian * box.step;
    local.promised = -0.5 * box.step.dot(at.gradient + slope);
    local.slope = side_ * slope[index_];
    local.root = std::sqrt(2.0 * std::max(at.value - local.promised - minimum_.value, 0.0));
    Vector carried;
    if (!solve_free(local.hessian, box.free, local.hessian.col(index_), carried)) return false;
    local.curvature = local.hessian(index_, index_) - carried.dot(local.hessian.col(index_));
    return true;
  }

  /// How much further out the threshold should lie: by the parabola at the minimum, by the chord of the root where it is
  /// still far from its target (the information may promise far less room than there is, as for no counts of n), and then
  /// by Newton.
  double advance(const Local& local, double distance) const {
    if (local.root > 0.3 * target_) return local.root * (target_ - local.root) / local.slope;
    if (distance > 0.0) return distance * std::min(target_ / local.root - 1.0, 30.0);
    const double bend = 2.0 * local.curvature * 0.5 * target_ * target_;
    return (std::sqrt(local.slope * local.slope + bend) - local.slope) / local.curvature;
  }

  std::optional<ProfileEnd> newton() {
    Minimum at = minimum_, trial = minimum_;
    Local local;
    if (!look(at, local)) return std::nullopt;
    // A minimum with a slope outward, or with nuisance parameters not at their best, promises something lower.
    const double downhill = std::max(-local.slope, 0.0), reach = std::min(downhill / local.curvature, room_);
    const double promised = downhill > 0.0 ? reach * (downhill - 0.5 * local.curvature * reach) : 0.0;
    lowest_ = std::min(lowest_, at.value - local.promised - promised);
    while (true) {
      const double distance = width(at.x);
      if (local.root > 0.3 * target_ && !(local.slope > 0.0)) return std::nullopt;
      double step = advance(local, distance);
      if (!std::isfinite(step)) return std::nullopt;
      const bool settled = local.promised <= 0.3 * options_.accuracy * target_ * target_;
      const bool outside = distance + step >= room_;
      if (settled && outside && distance >= room_) return end(Kind::bound, room_, at.x);
      if (settled && distance > 0.0 && !outside && close(local, step, distance)) {
        BoxStep box;
        if (!follow(at, local.hessian, side_ * step, box)) return std::nullopt;
        return end(Kind::reached, distance + step, (at.x + box.step).cwiseMax(bounds_.lower).cwiseMin(bounds_.upper));
      }
      if (distance > 0.0) step = std::clamp(step, -0.7 * distance, (settled ? 30.0 : 2.0) * distance);
      step = std::min(step, room_ - distance);
      if (step > 0.7 * (ceiling_ - distance)) step = 0.6 * (ceiling_ - distance);
      if (!advance_to(at, local, distance, step, trial)) return std::nullopt;
      at = trial;
    }
  }

  /// Whether one more step of Newton's needs no check: its error is about the square of the step. Beside an edge of the
  /// domain a steep slope makes steps short far from the target, so the root must be near as well.
  bool close(const Local& local, double step, double distance) const {
    const double small = 0.2 * std::sqrt(options_.accuracy);
    return std::abs(step) <= small * distance && std::abs(local.root - target_) <= 3.0 * small * target_;
  }

  /// Evaluates the point `step` further out, or nearer where the objective cannot be computed or the target is far
  /// overshot.
  bool advance_to(const Minimum& at, Local& local, double distance, double step, Minimum& trial) {
    BoxStep box;
    Local there;
    while (trials_++ < options_.newton_steps) {
      if (!follow(at, local.hessian, side_ * step, box)) return false;
      trial.x = (at.x + box.step).cwiseMax(bounds_.lower).cwiseMin(bounds_.upper);
      trial.x[index_] = position(distance + step);
      double fraction = 0.5;
      if (evaluate(trial) && look(trial, there, &at) && settle(local, trial, there)) {
        if (step <= 0.0 || there.root <= 1.5 * target_) {
          local = there;
          return true;
        }
        fraction = std::clamp((target_ - local.root) / (there.root - local.root), 0.2, 0.7);
      }
      if (step > 0.0 && distance + step > 0.0) ceiling_ = std::min(ceiling_, distance + step);
      step *= fraction;
    }
    return false;
  }

  /// Where the nuisance parameters have strayed (the promise is no small part of the threshold, or does not shrink), they
  /// are minimised in earnest at the trial's distance.
  bool settle(const Local& before, Minimum& trial, Local& there) {
    const double threshold = 0.5 * target_ * target_;
    const bool shrinks = there.promised < 0.5 * before.promised || there.promised < 0.02 * threshold;
    if (there.promised < 0.3 * threshold && shrinks) return true;
    Bounds held = bounds_;
    held.lower[index_] = held.upper[index_] = trial.x[index_];
    SolverOptions solver;
    solver.decrease_tolerance = 0.1 * options_.accuracy * threshold;
    solver.max_evaluations = 30;
    const int before_it = evaluations_;
    trial = minimise(objective_, trial.x, held, solver);
    evaluations_ = before_it + trial.evaluations;
    lowest_ = std::min(lowest_, trial.value);
    return trial.outcome == Outcome::converged && look(trial, there);
  }

  /// The square root of twice the profile's rise at a distance, minus its target. `near` is an optimum at another distance,
  /// and then the one here. Where the way from there leads out of the objective's domain, it is walked in halves.
  double excess(double distance, Minimum& near, int halvings = 6) {
    const double from = width(near.x);
    Bounds held = bounds_;
    Vector x = near.x;
    BoxStep box;
    Local local;
    if (look(near, local) && follow(near, local.hessian, side_ * (distance - from), box)) x += box.step;
    x[index_] = position(distance);
    held.lower[index_] = held.upper[index_] = x[index_];
    SolverOptions solver;
    solver.decrease_tolerance = 0.02 * options_.accuracy * target_ * target_;
    const Minimum found = minimise(objective_, x, held, solver);
    evaluations_ += found.evaluations;
    if (found.outcome == Outcome::not_finite) {
      Minimum middle = near;
      if (halvings == 0 || std::isinf(excess(0.5 * (from + distance), middle, halvings - 1))) return kInfinity;
      const double here = excess(distance, middle, halvings - 1);
      if (std::isfinite(here)) near = middle;
      return here;
    }
    near = found;
    lowest_ = std::min(lowest_, found.value);
    return std::sqrt(2.0 * std::max(found.value - minimum_.value, 0.0)) - target_;
  }

  /// A first guess of the half-width, from the information at the minimum.
  double guess() const {
    Local local;
    double distance = look(minimum_, local) ? advance(local, 0.0) : 0.0;
    if (!(distance > 0.0 && std::isfinite(distance))) distance = target_ / std::sqrt(minimum_.information(index_, index_));
    if (!(distance > 0.0 && std::isfinite(distance))) distance = std::max(std::abs(minimum_.x[index_]), 1.0);
    return std::min(distance, room_);
  }

  /// Steps outward until the threshold is passed, then closes in by false position (the Illinois rule: M. Dowell, P.
  /// Jarratt, BIT 11, 168 (1971)).
  ProfileEnd bracketed() {
    Minimum inside = minimum_, at = minimum_;
    double low = 0.0, low_excess = -target_, high = guess();
    const double farthest = 1e6 * high;
    double high_excess = excess(high, at);
    while (!(high_excess > 0.0)) {
      if (high >= room_) return end(Kind::bound, room_, at.x);
      if (high > farthest) return end(Kind::open, high, at.x);
      if (evaluations_ > options_.max_evaluations) return end(Kind::failed, high, at.x);
      inside = at, low = high, low_excess = high_excess;
      high = std::min(1.7 * high, room_);
      high_excess = excess(high, at);
    }
    return close_in(low, low_excess, high, high_excess, inside);
  }

  ProfileEnd close_in(double low, double low_weight, double high, double high_weight, Minimum& inside) {
    int last = 0;
    while (evaluations_ <= options_.max_evaluations) {
      const bool finite = std::isfinite(high_weight);
      const double middle = finite ? low + (high - low) * low_weight / (low_weight - high_weight) : 0.5 * (low + high);
      Minimum at = inside;
      const double found = excess(middle, at);
      if (std::abs(found) <= 0.3 * options_.accuracy * target_) return end(Kind::reached, middle, at.x);
      if (high - low <= 0.3 * options_.accuracy * high) return end(Kind::reached, low, inside.x);
      if (found > 0.0) {
        high = middle, high_weight = found;
        if (last == 1) low_weight *= 0.5;
        last = 1;
      } else {
        low = middle, low_weight = found, inside = at;
        if (last == -1) high_weight *= 0.5;
        last = -1;
      }
    }
    return end(Kind::failed, high, inside.x);
  }

  const Objective& objective_;
  const Minimum& minimum_;
  const Bounds& bounds_;
  const ProfileOptions& options_;
  Index index_;
  int side_;
  double target_;
  double room_;
  double lowest_ = kInfinity;
  int evaluations_ = 0;
  int trials_ = 0;
  double ceiling_ = kInfinity;  // nearest distance known to lie beyond the threshold or the objective's domain
};

}  // namespace

ProfileInterval profile_interval(const Objective& objective, const Minimum& minimum, int index, double deviance,
                                 const Bounds& bounds, const ProfileOptions& options) {
  ProfileInterval out;
  const bool valid = index >= 0 && index < minimum.x.size() && bounds.lower.size() == minimum.x.size() &&
                     bounds.upper.size() == minimum.x.size() && std::isfinite(minimum.value) && deviance > 0.0;
  if (!valid) return out;
  for (const int side : {-1, 1}) {
    Search search(objective, minimum, index, deviance, bounds, options, side);
    (side < 0 ? out.low : out.high) = search.run();
    out.lower_found = out.lower_found || search.lower_found();
  }
  return out;
}

}  // namespace halfturn::infer
