// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/apparatus.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"

namespace halfturn::rehearse {
namespace {

using constants::kTwoPi;

constexpr double kStepS = 60;
constexpr double kThermometerNoiseC = 0.02;

enum Purpose : std::uint32_t { kDrift = 1, kShots = 2, kMishaps = 3, kThermometer = 4 };

/// The points that have no light: [first, last).
struct Darkness {
  std::size_t first = 0;
  std::size_t last = 0;
  bool holds(std::size_t point) const { return point >= first && point < last; }
};

Mishap draw_mishap(double probability, Random& random) {
  if (std::uniform_real_distribution<double>()(random) >= probability) return Mishap::none;
  return static_cast<Mishap>(std::uniform_int_distribution<int>(1, 3)(random));
}

Darkness draw_darkness(Mishap mishap, std::size_t points, Random& random) {
  const auto anywhere = [&](std::size_t low, std::size_t high) {
    return std::uniform_int_distribution<std::size_t>(low, std::max(low, high))(random);
  };
  if (mishap == Mishap::dark) return {0, points};
  if (mishap == Mishap::unlocked) return {anywhere(points / 10, points * 9 / 10), points};
  if (mishap == Mishap::none) return {};
  const auto first = anywhere(0, points - 1);
  return {first, first + anywhere(2, points / 6)};
}

}  // namespace

Apparatus::Apparatus(const ApparatusSettings& settings, std::uint64_t seed, double night_s)
    : settings_(settings), shots_(seeded(seed, kShots)), mishaps_(seeded(seed, kMishaps)), thermometer_(seeded(seed, kThermometer)) {
  walk(seed, night_s);
}

void Apparatus::walk(std::uint64_t seed, double night_s) {
  Random random = seeded(seed, kDrift);
  std::normal_distribution<double> normal;
  std::poisson_distribution<int> jumps(std::max(settings_.jumps_per_hour, 1e-12) * kStepS / 3600);
  const double root = std::sqrt(kStepS / 3600);
  const auto steps = static_cast<std::size_t>(std::ceil(std::max(night_s, 0.0) / kStepS));
  double logarithm = 0;
  double line = settings_.line_hz;
  for (std::size_t step = 0; step <= steps; ++step) {
    const double warm = 1 - std::exp(-static_cast<double>(step) * kStepS / settings_.warm_up_s);
    path_.push_back({settings_.rabi_hz * std::exp(logarithm + std::log1p(settings_.warm_up) * warm), line,
                     settings_.temperature_c + settings_.temperature_rise_c * warm});
    logarithm += settings_.rabi_walk * root * normal(random);
    line += settings_.line_walk_hz * root * normal(random);
    for (int jump = jumps(random); jump > 0; --jump) logarithm += settings_.jump_size * normal(random);
  }
}

Truth Apparatus::truth(double time_s) const {
  const double place = std::clamp(time_s / kStepS, 0.0, static_cast<double>(path_.size() - 1));
  const auto before = static_cast<std::size_t>(place);
  const Truth& a = path_[before];
  const Truth& b = path_[std::min(before + 1, path_.size() - 1)];
  const double part = place - static_cast<double>(before);
  return {std::lerp(a.rabi_hz, b.rabi_hz, part), std::lerp(a.line_hz, b.line_hz, part),
          std::lerp(a.temperature_c, b.temperature_c, part)};
}

double Apparatus::readout(const Populations& populations) const {
  const double lost = settings_.lost_reads_bright ? 1 - populations.excited - populations.ground : 0;
  return std::clamp(settings_.floor + settings_.contrast * (populations.excited + lost), 0.0, 1.0);
}

double Apparatus::bright_probability(double time_s, double pulse_s, double drive_hz, const Member& member) const {
  const Truth now = truth(time_s);
  const Rates rates{kTwoPi * now.rabi_hz * member.rabi_scale, kTwoPi * (drive_hz - now.line_hz + member.detuning_hz),
                    settings_.decay_per_s, settings_.loss_per_s, settings_.dephasing_per_s};
  return readout(after_square_pulse(rates, pulse_s - settings_.dead_time_s, settings_.start_excited));
}

std::int64_t Apparatus::count_bright(double time_s, const Setting& point, std::int64_t shots, bool light) {
  if (!light || settings_.ensemble.none()) {
    const double bright = light ? bright_probability(time_s, point.pulse_s, point.drive_hz)
                                : readout({settings_.start_excited, 1 - settings_.start_excited});
    return std::binomial_distribution<std::int64_t>(shots, bright)(shots_);
  }
  std::int64_t count = 0;
  for (std::int64_t shot = 0; shot < shots; ++shot) {
    const Member member = draw_member(settings_.ensemble, shots_);
    const double bright = bright_probability(time_s, point.pulse_s, point.drive_hz, member);
    count += std::bernoulli_distribution(bright)(shots_) ? 1 : 0;
  }
  return count;
}

TakenScan Apparatus::take(double time_s, const std::vector<double>& axis, const std::vector<Setting>& points, std::int64_t shots) {
  TakenScan scan{axis, {}, shots, draw_mishap(settings_.mishap_probability, mishaps_)};
  const Darkness darkness = draw_darkness(scan.mishap, points.size(), mishaps_);
  for (std::size_t point = 0; point < points.size(); ++point) {
    scan.counts.push_back(count_bright(time_s, points[point], shots, !darkness.holds(point)));
  }
  return scan;
}

TakenScan Apparatus::take_flop(double time_s, const std::vector<double>& lengths_s, std::int64_t shots, double carrier_hz) {
  std::vector<Setting> points;
  for (const double length_s : lengths_s) points.push_back({length_s, carrier_hz});
  return take(time_s, lengths_s, points, shots);
}

TakenScan Apparatus::take_line(double time_s, const std::vector<double>& detunings_hz, double pulse_s, std::int64_t shots,
                               double carrier_hz) {
  std::vector<Setting> points;
  for (const double detuning_hz : detunings_hz) points.push_back({pulse_s, carrier_hz + detuning_hz});
  return take(time_s, detunings_hz, points, shots);
}

double Apparatus::rotation(double time_s, double pulse_s, double carrier_hz) const {
  const Truth now = truth(time_s);
  return kTwoPi * std::hypot(now.rabi_hz, carrier_hz - now.line_hz) * (pulse_s - settings_.dead_time_s);
}

double Apparatus::read_temperature(double time_s) {
  return truth(time_s).temperature_c + kThermometerNoiseC * std::normal_distribution<double>()(thermometer_);
}

}  // namespace halfturn::rehearse
