// SPDX-License-Identifier: Apache-2.0
#include "model/infer/frequency_search.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/clones.hpp"

namespace halfturn::infer {
namespace {

constexpr std::size_t kLanes = 4;
constexpr double kRidge = 1e-9;  // relative, on the diagonal: only collinear terms feel it

/// Weighted sums over the points that depend on the frequency, for one trial.
struct TrialSums {
  double c = 0, s = 0;              // w e cos, w e sin
  double cc = 0, cs = 0;            // w e^2 cos^2, w e^2 cos sin
  double ec = 0, es = 0;            // w e^2 cos, w e^2 sin
  double yc = 0, ys = 0;            // w y e cos, w y e sin
};

/// And those that do not.
struct FixedSums {
  double w = 0, y = 0;              // w, w y
  double e = 0, ee = 0, ye = 0;     // w e, w e^2, w y e
};

/// Solves the normal equations by Cholesky; gain below 0 where they are not positive definite.
LinearFit solve(const TrialSums& t, const FixedSums& f, bool damped) {
  const double m[4][4] = {{f.w, 0, 0, 0}, {t.c, t.cc, 0, 0}, {t.s, t.cs, f.ee - t.cc, 0}, {f.e, t.ec, t.es, f.ee}};
  const double right[4] = {f.y, t.yc, t.ys, f.ye};
  const int size = damped ? 4 : 3;
  double l[4][4], z[4];
  LinearFit fit;
  for (int i = 0; i < size; ++i) {
    for (int j = 0; j <= i; ++j) {
      double sum = i == j ? m[i][i] * (1.0 + kRidge) : m[i][j];
      for (int k = 0; k < j; ++k) sum -= l[i][k] * l[j][k];
      if (i == j && !(sum > 0.0)) return fit;
      l[i][j] = i == j ? std::sqrt(sum) : sum / l[j][j];
    }
    z[i] = right[i];
    for (int k = 0; k < i; ++k) z[i] -= l[i][k] * z[k];
    z[i] /= l[i][i];
  }
  // The sum of squares explained is |z|^2, of which the constant alone would have z[0]^2.
  fit.gain = 0.0;
  for (int i = 1; i < size; ++i) fit.gain += z[i] * z[i];
  for (int i = size - 1; i >= 0; --i) {
    fit.coefficients[static_cast<std::size_t>(i)] = z[i];
    for (int k = i + 1; k < size; ++k) fit.coefficients[static_cast<std::size_t>(i)] -= l[k][i] * fit.coefficients[static_cast<std::size_t>(k)];
    fit.coefficients[static_cast<std::size_t>(i)] /= l[i][i];
  }
  return fit;
}

struct LaneSums {
  double c[kLanes], s[kLanes], cc[kLanes], cs[kLanes], ec[kLanes], es[kLanes], yc[kLanes], ys[kLanes];
};

HALFTURN_CLONES void sum_lanes(std::size_t n, const double* cosine, const double* sine, const double* we, const double* wee, const double* wye,
                               LaneSums& out) {
  double c[kLanes] = {}, s[kLanes] = {}, cc[kLanes] = {}, cs[kLanes] = {}, ec[kLanes] = {}, es[kLanes] = {}, yc[kLanes] = {}, ys[kLanes] = {};
  for (std::size_t i = 0; i < n; ++i)
    for (std::size_t lane = 0; lane < kLanes; ++lane) {
      const double co = cosine[i * kLanes + lane], si = sine[i * kLanes + lane];
      const double squared = wee[i] * co;
      c[lane] += we[i] * co;
      s[lane] += we[i] * si;
      ec[lane] += squared;
      es[lane] += wee[i] * si;
      cc[lane] += squared * co;
      cs[lane] += squared * si;
      yc[lane] += wye[i] * co;
      ys[lane] += wye[i] * si;
    }
  for (std::size_t lane = 0; lane < kLanes; ++lane) {
    out.c[lane] = c[lane];
    out.s[lane] = s[lane];
    out.cc[lane] = cc[lane];
    out.cs[lane] = cs[lane];
    out.ec[lane] = ec[lane];
    out.es[lane] = es[lane];
    out.yc[lane] = yc[lane];
    out.ys[lane] = ys[lane];
  }
}

HALFTURN_CLONES void turn(std::size_t n, double* cosine, double* sine, const double* turn_cosine, const double* turn_sine) {
  for (std::size_t i = 0; i < n; ++i)
    for (std::size_t lane = 0; lane < kLanes; ++lane) {
      const std::size_t at = i * kLanes + lane;
      const double c = cosine[at] * turn_cosine[i] - sine[at] * turn_sine[i];
      sine[at] = cosine[at] * turn_sine[i] + sine[at] * turn_cosine[i];
      cosine[at] = c;
    }
}

FixedSums fixed_sums(const LinearPoints& points, const double* envelope) {
  FixedSums f;
  for (std::size_t i = 0; i < points.time.size(); ++i) {
    const double w = points.weight[i], e = envelope[i];
    f.w += w;
    f.y += w * points.value[i];
    f.e += w * e;
    f.ee += w * e * e;
    f.ye += w * points.value[i] * e;
  }
  return f;
}

/// Phasors of the first four trials, and how far they turn from four trials to the next four.
void begin_phasors(const LinearPoints& points, const TrialGrid& grid, FrequencySearch& search) {
  const std::size_t n = points.time.size();
  for (auto* array : {&search.cosine, &search.sine}) array->resize(n * kLanes);
  for (auto* array : {&search.turn_cosine, &search.turn_sine}) array->resize(n);
  for (std::size_t i = 0; i < n; ++i) {
    const double step_c = std::cos(grid.step * points.time[i]), step_s = std::sin(grid.step * points.time[i]);
    double c = std::cos(grid.bottom * points.time[i]), s = std::sin(grid.bottom * points.time[i]);
    double tc = 1.0, ts = 0.0;
    for (std::size_t lane = 0; lane < kLanes; ++lane) {
      search.cosine[i * kLanes + lane] = c;
      search.sine[i * kLanes + lane] = s;
      const double next_c = c * step_c - s * step_s, next_t = tc * step_c - ts * step_s;
      s = c * step_s + s * step_c;
      ts = tc * step_s + ts * step_c;
      c = next_c;
      tc = next_t;
    }
    search.turn_cosine[i] = tc;
    search.turn_sine[i] = ts;
  }
}

void begin_envelopes(const LinearPoints& points, std::span<const double> dampings, FrequencySearch& search) {
  const std::size_t n = points.time.size();
  for (auto* array : {&search.envelope, &search.weighted, &search.squared, &search.with_value}) array->resize(n * dampings.size());
  for (std::size_t d = 0; d < dampings.size(); ++d)
    for (std::size_t i = 0; i < n; ++i) {
      const std::size_t at = d * n + i;
      search.envelope[at] = std::exp(-dampings[d] * (points.time[i] - points.origin));
      search.weighted[at] = points.weight[i] * search.envelope[at];
      search.squared[at] = search.weighted[at] * search.envelope[at];
      search.with_value[at] = search.weighted[at] * points.value[i];
    }
}

}  // namespace

LinearFit solve_linear(const LinearPoints& points, double frequency, double damping) {
  TrialSums t;
  FixedSums f;
  for (std::size_t i = 0; i < points.time.size(); ++i) {
    const double time = points.time[i], w = points.weight[i], wy = w * points.value[i];
    const double e = std::exp(-damping * (time - points.origin)), c = std::cos(frequency * time) * e, s = std::sin(frequency * time) * e;
    f.w += w;
    f.y += wy;
    f.e += w * e;
    f.ee += w * e * e;
    f.ye += wy * e;
    t.c += w * c;
    t.s += w * s;
    t.cc += w * c * c;
    t.cs += w * c * s;
    t.ec += w * e * c;
    t.es += w * e * s;
    t.yc += wy * c;
    t.ys += wy * s;
  }
  return solve(t, f, damping > 0.0);
}

void search_frequencies(const LinearPoints& points, const TrialGrid& grid, std::span<const double> dampings, FrequencySearch& search,
                        std::span<const char> wanted) {
  const std::size_t n = points.time.size(), count = static_cast<std::size_t>(grid.count);
  begin_phasors(points, grid, search);
  begin_envelopes(points, dampings, search);
  search.gain.assign(dampings.size() * count, -1.0);
  std::vector<FixedSums> fixed;
  for (std::size_t d = 0; d < dampings.size(); ++d) fixed.push_back(fixed_sums(points, search.envelope.data() + d * n));
  const auto left_out = [&](std::size_t first) {
    if (wanted.empty()) return false;
    const auto block = wanted.subspan(first, std::min(kLanes, count - first));
    return std::none_of(block.begin(), block.end(), [](char want) { return want != 0; });
  };
  for (std::size_t first = 0; first < count; first += kLanes) {
    for (std::size_t d = 0; d < dampings.size() && !left_out(first); ++d) {
      LaneSums sums;
      const std::size_t row = d * n;
      sum_lanes(n, search.cosine.data(), search.sine.data(), search.weighted.data() + row, search.squared.data() + row,
                search.with_value.data() + row, sums);
      for (std::size_t lane = 0; lane < kLanes && first + lane < count; ++lane) {
        const TrialSums t{sums.c[lane], sums.s[lane], sums.cc[lane], sums.cs[lane], sums.ec[lane], sums.es[lane], sums.yc[lane], sums.ys[lane]};
        search.gain[d * count + first + lane] = solve(t, fixed[d], dampings[d] > 0.0).gain;
      }
    }
    turn(n, search.cosine.data(), search.sine.data(), search.turn_cosine.data(), search.turn_sine.data());
  }
}

}  // namespace halfturn::infer
