// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

#include "model/infer/starts.hpp"
#include "model/quantity/clones.hpp"
#include "model/quantity/constants.hpp"

/// Starting points of detuning scans.
namespace halfturn::infer {
namespace {

using constants::kPi;
using constants::kTwoPi;

// In units of 2 pi over the pulse length, of which the line of a pi pulse is 0.8 wide: the step of the profile's table, and how
// far beyond the window a line is looked for. Trial offsets lie so many table steps apart. Linear interpolation in the table is
// good to 4e-3 at areas to 4.5 pi, and a point's place between two entries is the same at every trial offset. In windows of more
// than 30 such units, whose points seldom tell the fringes apart, the steps grow with the window.
constexpr double kTableStep = 0.05, kMargin = 1.5, kMostTable = 600.0;
constexpr int kOffsetSteps = 3;
// Lines damped by this much over the pulse still have fringes, which move by one where the area changes by a turn: areas lie so far apart,
// over pi, and by no more than the ratio. More damping leaves none to tell neighbouring areas apart. At ratios of 1.5 and one
// damping the mode of the truth was missed in seven of the first 18 power-broadened lines whose interval did not hold it.
struct Damping {
  double over_pulse, area_ratio, area_step;
};
constexpr std::array<Damping, 3> kDampings = {{{0.0, 0.0, 0.0}, {1.5, 1.35, 0.7}, {4.0, 1.5, 4.0}}};
constexpr double kLeastDampedArea = 0.4, kMostDampedArea = 13.0;
// A signal nearer to 0 or 1 than this starts no binomial fit.
constexpr double kLeastSignal = 0.005;

/// The scan's points among the table's steps, counted from the first trial offset.
struct Places {
  const int* step;
  const double *part, *weight, *weighted;  // how far to the next step, and the points' weight and weight times value
  std::size_t count;
};

/// The population's profile on an even axis about the line's centre, `half` steps to either side.
struct Profile {
  const double* population;
  int half;
};

/// Sums over the points of weight times population, times population squared, and times population and value.
struct Sums {
  double p, pp, py;
};

HALFTURN_CLONES Sums sums_at(const Places& places, const Profile& profile, int shift) {
  constexpr std::size_t kLanes = 4;
  double p[kLanes] = {}, pp[kLanes] = {}, py[kLanes] = {};
  const auto one = [&](std::size_t i, std::size_t lane) HALFTURN_INLINE_LAMBDA {
    const int at = places.step[i] - shift + profile.half;
    const double left = profile.population[at];
    const double population = left + (profile.population[at + 1] - left) * places.part[i];
    const double weighted = places.weight[i] * population;
    p[lane] += weighted;
    pp[lane] += weighted * population;
    py[lane] += places.weighted[i] * population;
  };
  std::size_t i = 0;
  for (; i + kLanes <= places.count; i += kLanes)
    for (std::size_t lane = 0; lane < kLanes; ++lane) one(i + lane, lane);
  for (; i < places.count; ++i) one(i, 0);
  return {p[0] + p[1] + p[2] + p[3], pp[0] + pp[1] + pp[2] + pp[3], py[0] + py[1] + py[2] + py[3]};
}

std::vector<double> trial_areas(const Prior& prior, double length, const Damping& damping) {
  std::vector<double> areas;
  if (prior.log_rabi && prior.log_rabi->sigma < 0.3) {
    for (const double z : {-2.0, 0.0, 2.0}) areas.push_back(std::exp(prior.log_rabi->mean + z * prior.log_rabi->sigma) * length);
  } else if (damping.over_pulse > 0.0) {
    for (double area = kLeastDampedArea; area < kMostDampedArea; area = std::min(damping.area_ratio * area, area + damping.area_step))
      areas.push_back(area * kPi);
  } else {
    for (double area = 0.3; area < 4.6; area += 0.2) areas.push_back(area * kPi);
  }
  return areas;
}

/// Weighted least squares for floor and contrast at one offset after another, with what is known of both.
class LinearPart {
 public:
  LinearPart(const Prior& prior, Readout::Kind kind, double weight, double weighted, double flat)
      : weight_(weight), weighted_(weighted), flat_(flat), binomial_(kind == Readout::Kind::binomial) {
    if (prior.floor) take(*prior.floor, floor_, floor_mean_);
    if (prior.contrast) take(*prior.contrast, contrast_, contrast_mean_);
  }

  /// Fills the mode's signals and gain; the gain is minus infinite where they cannot be had.
  void solve(const Sums& sums, Mode& mode) const {
    mode.gain = -std::numeric_limits<double>::infinity();
    const double a = weight_ + floor_, c = sums.pp + contrast_, determinant = a * c - sums.p * sums.p;
    if (!(determinant > 1e-12 * a * c)) return;
    const double u = weighted_ + floor_ * floor_mean_, v = sums.py + contrast_ * contrast_mean_;
    double contrast = (a * v - sums.p * u) / determinant, ground = (u - contrast * sums.p) / a;
    if (binomial_ && outside(ground, ground + contrast)) hold_inside(sums, ground, contrast);
    mode.start.signal_ground = ground;
    mode.start.signal_excited = ground + contrast;
    mode.gain = gain(sums, ground, contrast);
  }

 private:
  static void take(const Known& known, double& precision, double& mean) {
    const double sigma = std::max(known.sigma, 1e-6);
    precision = 1.0 / (sigma * sigma);
    mean = known.mean;
  }
  static bool outside(double ground, double excited) {
    return std::min(ground, excited) < kLeastSignal || std::max(ground, excited) > 1.0 - kLeastSignal;
  }
  static double inside(double signal) { return std::clamp(signal, kLeastSignal, 1.0 - kLeastSignal); }

  double gain(const Sums& s, double ground, double contrast) const {
    const double linear = 2.0 * (ground * weighted_ + contrast * s.py);
    const double points = linear - ground * ground * weight_ - 2.0 * ground * contrast * s.p - contrast * contrast * s.pp;
    const double off = ground - floor_mean_, off_contrast = contrast - contrast_mean_;
    return points - flat_ - floor_ * off * off - contrast_ * off_contrast * off_contrast;
  }

  /// The better of either signal held at its bound with the other one solved for (and then held as well).
  void hold_inside(const Sums& s, double& ground, double& contrast) const {
    const double held_ground = inside(ground), held_excited = inside(ground + contrast);
    const double v = s.py + contrast_ * contrast_mean_, u = weighted_ + floor_ * floor_mean_;
    // Ground held: contrast from its own equation. Excited held: in (ground, excited) the population of the ground is 1 - P.
    const double first = inside(held_ground + (v - held_ground * s.p) / (s.pp + contrast_)) - held_ground;
    const double qq = weight_ - 2.0 * s.p + s.pp, qp = s.p - s.pp;
    const double right = u - v - held_excited * qp + contrast_ * held_excited;
    const double other = inside(right / (qq + floor_ + contrast_));
    if (gain(s, held_ground, first) >= gain(s, other, held_excited - other)) {
      ground = held_ground;
      contrast = first;
    } else {
      ground = other;
      contrast = held_excited - other;
    }
  }

  double weight_, weighted_, flat_;
  double floor_ = 0.0, floor_mean_ = 0.0, contrast_ = 0.0, contrast_mean_ = 0.0;
  bool binomial_;
};

/// Trial offsets in table steps from the first.
struct Offsets {
  int last = 0;
  double first = 0.0, unit = 0.0;  // rad/s: the first offset, a table step
};

/// Appends the local maxima of the gain over the offset.
void search_offsets(const Places& places, const Profile& profile, const LinearPart& linear, const Prior& prior, const Offsets& offsets,
                    const Mode& what, std::vector<Mode>& found) {
  constexpr double kNone = -std::numeric_limits<double>::infinity();
  Mode current, next = what;
  double before = kNone;
  current.gain = kNone;
  for (int shift = 0; shift <= offsets.last + kOffsetSteps; shift += kOffsetSteps) {
    next.gain = kNone;
    if (shift <= offsets.last) {
      next.start.line_offset = offsets.first + shift * offsets.unit;
      linear.solve(sums_at(places, profile, shift), next);
      if (!sign_admitted(prior, next.start.contrast())) next.gain = kNone;
    }
    if (current.gain > before && current.gain >= next.gain) found.push_back(current);
    before = current.gain;
    current = next;
  }
}

/// Whether two starts lead to one mode: neighbours on the grid of trials.
bool neighbours(const Mode& a, const Mode& b, double length) {
  const double rabi = std::abs(a.start.generalised - b.start.generalised);
  const double alike = a.damped ? 0.3 * std::max(a.start.generalised, b.start.generalised) : 0.25 * kPi / length;
  return a.damped == b.damped && rabi < alike && std::abs(a.start.line_offset - b.start.line_offset) < kTwoPi * 0.3 / length;
}

std::size_t keep_distinct(std::vector<Mode>& found, std::span<Mode> modes, double length, Readout::Kind kind) {
  std::sort(found.begin(), found.end(), [](const Mode& a, const Mode& b) { return a.gain > b.gain; });
  std::size_t kept = 0;
  for (const Mode& mode : found) {
    if (kept == modes.size() || mode.gain < kept_above(found.front().gain)) break;
    const auto near = [&](const Mode& other) { return neighbours(mode, other, length); };
    if (std::any_of(modes.begin(), modes.begin() + static_cast<std::ptrdiff_t>(kept), near)) continue;
    modes[kept] = mode;
    keep_signals_possible(kind, modes[kept++].start);
  }
  return kept;
}

/// The points' places, weights and sums for trial offsets over the window and a margin.
class LinePoints {
 public:
  LinePoints(const ScanBatch& scan, const Readout& readout, const Sampling& sampling, double unit, SearchWorkspace& work) : work_(work) {
    const auto n = scan.points();
    work.reserve(n);
    linear_points(readout, {work.value.data(), n}, {work.weight.data(), n});
    const double searched = sampling.span + 2.0 * kMargin * unit;
    offsets_.unit = std::max(kTableStep * unit, searched / kMostTable);
    offsets_.first = *std::min_element(scan.axis.begin(), scan.axis.end()) - kMargin * unit;
    offsets_.last = static_cast<int>(searched / offsets_.unit);
    half_ = offsets_.last + 2;
    for (std::size_t i = 0; i < n; ++i) {
      const double place = (scan.axis[i] - offsets_.first) / offsets_.unit;
      work.place[i] = static_cast<int>(place);
      work.part[i] = place - work.place[i];
      weight_ += work.weight[i];
      weighted_ += work.weighted[i] = work.weight[i] * work.value[i];
    }
    points_ = n;
  }

  Places places() const { return {work_.place.data(), work_.part.data(), work_.weight.data(), work_.weighted.data(), points_}; }
  const Offsets& offsets() const { return offsets_; }
  double weight() const { return weight_; }
  double weighted() const { return weighted_; }
  double flat() const { return weighted_ * weighted_ / weight_; }

  /// The profile of a line of these rates; false where it cannot be computed. The line is even about its centre.
  bool profile(const dynamics::Rates& rates, const dynamics::Start& start, double length, Profile& out) const {
    const auto half = static_cast<std::size_t>(half_);
    work_.table.resize(2 * half + 1);
    work_.table_axis.resize(half + 1);
    for (std::size_t i = 0; i <= half; ++i) work_.table_axis[i] = static_cast<double>(i) * offsets_.unit;
    dynamics::Derivatives into;
    into.population = {work_.table.data() + half, half + 1};
    dynamics::Status status = dynamics::Status::ok;
    dynamics::detuning_scan({&rates, 1}, start, work_.table_axis, {&length, 1}, into, {&status, 1}, work_.dynamics);
    for (std::size_t i = 1; i <= half; ++i) work_.table[half - i] = work_.table[half + i];
    out = {work_.table.data(), half_};
    return status == dynamics::Status::ok;
  }

 private:
  SearchWorkspace& work_;
  Offsets offsets_;
  std::size_t points_ = 0;
  int half_ = 0;
  double weight_ = 0.0, weighted_ = 0.0;
};

}  // namespace

std::size_t line_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling, std::span<Mode> modes,
                        SearchWorkspace& work) {
  const double length = scan.pulse_length_s - prior.dead_time.mean;
  if (sampling.distinct < 4 || modes.empty() || !(length > 0.0)) return 0;
  const LinePoints points(scan, readout, sampling, kTwoPi / length, work);
  const LinearPart linear(prior, readout.kind, points.weight(), points.weighted(), points.flat());
  work.found.clear();
  for (const Damping& trial : kDampings)
    for (const double area : trial_areas(prior, length, trial)) {
      const double damping = trial.over_pulse / length;
      Mode what;
      what.damped = damping > 0.0;
      what.start.generalised = area / length;
      what.start.dead_time = prior.dead_time.mean;
      what.start.damping = damping;
      Profile profile{};
      if (!points.profile({what.start.generalised, 0.0, prior.decay, prior.loss, damping}, prior.start, length, profile)) continue;
      search_offsets(points.places(), profile, linear, prior, points.offsets(), what, work.found);
    }
  return keep_distinct(work.found, modes, length, readout.kind);
}

}  // namespace halfturn::infer
