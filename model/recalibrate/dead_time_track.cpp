// SPDX-License-Identifier: Apache-2.0
#include "model/recalibrate/dead_time_track.hpp"

#include <algorithm>
#include <cmath>

namespace halfturn::recalibrate {
namespace {

// What a scan's information counts for after the next one: ten scans are remembered by the one mean, two or three by the other. A
// jump of 2.5 of a scan's sigmas is then found within eight scans (dead_time_track_test).
constexpr double kKeepAll = 0.9, kKeepLast = 0.6;
// A scan this far off is doubted; two that are, and agree within the second, are a jump.
constexpr double kDoubted = 4.0, kAgree = 3.0;
// The last few are believed against the rest when they lie so many sigmas apart: in a few scans of a thousand by chance, which costs
// what the rest had taught.
constexpr double kParted = 3.0;
constexpr double kForget = 0.1;
constexpr int kEnough = 3;

double square(double x) { return x * x; }

}  // namespace

void DeadTimeTrack::Mean::add(double x, double v, double keep) {
  const double before = variance / keep, gain = before / (before + v);
  value += gain * (x - value);
  variance = (1.0 - gain) * before;
}

void DeadTimeTrack::restart(const infer::Known& a, const infer::Known& b) {
  all_ = {a.mean, square(a.sigma)};
  all_.add(b.mean, square(b.sigma), 1.0);
  last_ = all_;
  scans_ = kEnough;  // what replaced a history counts as one
  excess_ = 1.0;
  doubted_.reset();
}

void DeadTimeTrack::add(std::int64_t at, double value, double sigma) {
  if (!std::isfinite(value) || !(sigma > 0.0) || !std::isfinite(sigma)) return;
  const double variance = square(sigma);
  if (scans_ == 0) {
    all_ = last_ = {value, variance};
    scans_ = 1;
    at_ = at;
    return;
  }
  const double expected = all_.variance * excess_ / kKeepAll + variance, off = square(value - all_.value) / expected;
  if (off > square(kDoubted)) {
    const infer::Known seen{value, sigma};
    const bool again = doubted_ && square(value - doubted_->mean) < square(kAgree) * (variance + square(doubted_->sigma));
    if (again) {
      restart(*doubted_, seen);
      at_ = at;
    } else {
      doubted_ = seen;
    }
    return;
  }
  doubted_.reset();
  at_ = at;
  excess_ = std::max(1.0, (1.0 - kForget) * excess_ + kForget * off);
  all_.add(value, variance, kKeepAll);
  last_.add(value, variance, kKeepLast);
  ++scans_;
  const double apart = square(last_.value - all_.value), by_chance = std::max(0.0, last_.variance - all_.variance);
  if (scans_ > kEnough && apart > square(kParted) * by_chance * excess_) all_ = last_;
}

std::optional<infer::Known> DeadTimeTrack::known() const {
  if (scans_ < kEnough || doubted_) return std::nullopt;
  const double apart = square(last_.value - all_.value), by_chance = std::max(0.0, last_.variance - all_.variance);
  return infer::Known{all_.value, std::sqrt(all_.variance * excess_ + std::max(0.0, apart - by_chance * excess_))};
}

}  // namespace halfturn::recalibrate
