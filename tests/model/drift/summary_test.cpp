// SPDX-License-Identifier: Apache-2.0
// Numbers by NumPy 1.24.2 and SciPy 1.10.1; the calls stand beside them.
#include "model/drift/summary.hpp"

#include <cmath>
#include <numeric>
#include <random>

#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::drift;

namespace {

constexpr std::int64_t kHour = 3'600'000'000'000;
constexpr std::int64_t kDay = 24 * kHour;

struct Data {
  std::vector<std::int64_t> time_ns;
  std::vector<double> rabi_hz, sigma_hz, intensity;
  std::vector<Verdict> verdict;

  void add(std::int64_t time, double rabi, double sigma, Verdict kind = Verdict::apply, double light = kNone) {
    time_ns.push_back(time);
    rabi_hz.push_back(rabi);
    sigma_hz.push_back(sigma);
    verdict.push_back(kind);
    intensity.push_back(light);
  }
  Fits fits() const { return {time_ns, rabi_hz, sigma_hz, verdict, intensity}; }
};

/// x, y, s of the calls below.
Data eight(double divide_sigma) {
  const double hours[] = {0.0, 0.5, 3.0, 7.25, 12.0, 26.0, 30.5, 49.0};
  const double value[] = {125340, 125310, 125355, 125120, 125010, 124700, 124810, 124100};
  const double sigma[] = {120, 90, 150, 100, 80, 110, 200, 95};
  Data data;
  for (int i = 0; i < 8; ++i) {
    data.add(20'000 * kDay + static_cast<std::int64_t>(hours[i] * static_cast<double>(kHour)), value[i], sigma[i] / divide_sigma);
  }
  return data;
}

}  // namespace

TEST_CASE("Student's t against mpmath") {
  // mpmath 1.2.1, 30 digits: findroot of 1 - betainc(nu/2, 1/2, 0, nu/(nu + t*t), regularized=True)/2 - p at p = 0.975 and
  // 0.995. (scipy.stats.t.ppf agrees to 1e-10 at 95 % and to 2e-9 at 99 %.)
  const struct {
    int degrees;
    double at_95, at_99;
  } kTable[] = {{1, 12.7062047361747, 63.6567411628716},   {2, 4.30265272974946, 9.92484320091829},
                {3, 3.18244630528371, 5.84090930973336},   {4, 2.77644510519779, 4.60409487134999},
                {5, 2.57058183563632, 4.03214298355523},   {10, 2.22813885198627, 3.16927267261695},
                {29, 2.0452296421327, 2.75638590367061},   {30, 2.04227245630124, 2.74999565356723},
                {100, 1.98397151852355, 2.62589052143802}, {399, 1.96592729592088, 2.58820716403098},
                {400, 1.96591234322946, 2.58817608003474}, {401, 1.96589746533652, 2.58814515176654},
                {1000, 1.96233908082641, 2.58075469806595}, {100000, 1.95998770753461, 2.57587846990838}};
  for (const auto& row : kTable) {
    INFO(row.degrees << " degrees");
    CHECK(student_t(0.95, row.degrees) == Approx(row.at_95).epsilon(1e-9));
    CHECK(student_t(0.99, row.degrees) == Approx(row.at_99).epsilon(1e-9));
  }
  CHECK(std::isnan(student_t(1.0, 3)));
  CHECK(std::isnan(student_t(0.95, 0)));
}

TEST_CASE("the trend against NumPy's weighted line") {
  // p, c = np.polyfit(x, y, 1, w=1/s, cov='unscaled'); r = y - np.polyval(p, x)
  // scatter = sqrt(((r/s)**2).sum() / 6); p[0]; sqrt(c[0, 0]) * max(1, scatter); +- scipy.stats.t.ppf(0.975, 6) times that
  SECTION("fits that scatter less than their sigmas are not believed to be better") {
    const auto trend = summarise(eight(1.0).fits()).value().trend;
    CHECK(trend.fits == 8);
    CHECK(trend.scatter == Approx(0.5835883162640264).epsilon(1e-9));
    CHECK(trend.slope_hz_per_hour == Approx(-24.642508590833305).epsilon(1e-10));
    CHECK(trend.slope_sigma == Approx(2.2405625943409633).epsilon(1e-10));
    CHECK(trend.slope_low == Approx(-30.124967750885638).epsilon(1e-9));
    CHECK(trend.slope_high == Approx(-19.160049430780973).epsilon(1e-9));
    CHECK(trend.mean_hz == Approx(124946.57155176344).epsilon(1e-12));  // np.average(y, weights=1/s**2)
    CHECK(trend.relative_per_hour == Approx(-24.642508590833305 / 124946.57155176344).epsilon(1e-10));
  }
  SECTION("fits that scatter more widen the interval") {  // s / 3
    const auto trend = summarise(eight(3.0).fits()).value().trend;
    CHECK(trend.scatter == Approx(1.7507649487920791).epsilon(1e-9));
    CHECK(trend.slope_hz_per_hour == Approx(-24.642508590833298).epsilon(1e-10));
    CHECK(trend.slope_sigma == Approx(1.3075661519156012).epsilon(1e-9));
    CHECK(trend.slope_low == Approx(-27.842007701034525).epsilon(1e-9));
    CHECK(trend.slope_high == Approx(-21.44300948063207).epsilon(1e-9));
  }
}

TEST_CASE("the trend is the same at any order and any date") {
  auto data = eight(1.0);
  const auto slope = summarise(data.fits()).value().trend.slope_hz_per_hour;
  for (auto& time : data.time_ns) time -= 35'000 * kDay;  // before 1970
  CHECK(summarise(data.fits()).value().trend.slope_hz_per_hour == Approx(slope).epsilon(1e-12));
  std::swap(data.time_ns[0], data.time_ns[7]);
  std::swap(data.rabi_hz[0], data.rabi_hz[7]);
  std::swap(data.sigma_hz[0], data.sigma_hz[7]);
  CHECK(summarise(data.fits()).value().trend.slope_hz_per_hour == Approx(slope).epsilon(1e-11));
}

TEST_CASE("no trend without three fits at two times") {
  Data data;
  data.add(0, 1e5, 100);
  data.add(kHour, 1e5, 100);
  auto trend = summarise(data.fits()).value().trend;
  CHECK(trend.fits == 2);
  CHECK(trend.mean_hz == Approx(1e5));
  CHECK(std::isnan(trend.slope_hz_per_hour));
  data.add(2 * kHour, 5e5, 10, Verdict::refuse);
  data.add(2 * kHour, kNone, kNone);
  data.add(2 * kHour, 5e5, 0.0);
  CHECK(summarise(data.fits()).value().trend.fits == 2);
  data.time_ns.assign(data.time_ns.size(), kHour);
  data.add(kHour, 1e5, 100);
  trend = summarise(data.fits()).value().trend;
  CHECK(trend.fits == 3);
  CHECK(std::isnan(trend.slope_hz_per_hour));
  CHECK(std::isnan(trend.slope_low));
}

TEST_CASE("days are UTC days, with medians of what was not refused") {
  Data data;
  data.add(kDay - 1, 100.0, 3.0, Verdict::keep, 5.0);   // 1970-01-01, its last nanosecond
  data.add(kDay, 90.0, 2.0, Verdict::apply, 4.0);       // 1970-01-02
  data.add(kDay + 1, 96.0, 2.0, Verdict::apply, kNone);
  data.add(kDay + 2, 500.0, 2.0, Verdict::refuse, 99.0);
  data.add(-1, 80.0, 2.0);                              // 1969-12-31
  data.add(3 * kDay, kNone, kNone, Verdict::refuse);    // 1970-01-04: nothing usable
  data.add(4 * kDay, 40.0, 1.0);
  const auto days = summarise(data.fits()).value().days;
  REQUIRE(days.size() == 5);
  CHECK(days[0].day == -1);
  CHECK(days[1].day == 0);
  CHECK(days[2].day == 1);
  CHECK(days[2].scans == 3);
  CHECK(days[2].refused == 1);
  CHECK(days[2].used == 2);
  CHECK(days[2].rabi_hz == 93.0);
  CHECK(days[2].rabi_sigma_hz == Approx(2.0 / std::sqrt(2.0)));
  CHECK(days[2].intensity_w_m2 == 4.0);
  CHECK(days[0].since_first == 0.0);
  CHECK(std::isnan(days[0].since_previous));
  CHECK(days[2].since_first == Approx(93.0 / 80.0 - 1.0));
  CHECK(days[2].since_previous == Approx(93.0 / 100.0 - 1.0));
  CHECK(days[3].refused == 1);
  CHECK(std::isnan(days[3].rabi_hz));
  CHECK(std::isnan(days[3].since_first));
  CHECK(days[4].since_previous == Approx(40.0 / 93.0 - 1.0));  // against the latest day that has one
}

TEST_CASE("the median, and a fault for arrays of different lengths") {
  CHECK(median({3.0, 1.0, 2.0}) == 2.0);
  CHECK(median({4.0, 1.0, 2.0, 3.0}) == 2.5);
  CHECK(std::isnan(median({})));
  auto data = eight(1.0);
  data.intensity.pop_back();
  CHECK(summarise(data.fits()).error().code == "bad_shape");
  CHECK(summarise(Fits{}).value().days.empty());
}

// A 95 % interval holds the truth 95 times in 100, also where the fits' sigmas are three times too small (common practice:
// a chance test of coverage). Of 4000 trials 3800 +- 14 hold it where scatter decides; 4.5 sigma are allowed, failing
// by chance once in 150,000. The larger of both widths only holds it more often, so that has no upper limit.
TEST_CASE("the interval of the trend holds the truth as often as it says") {
  std::mt19937_64 random(7);
  std::normal_distribution<double> normal;
  for (const double factor : {1.0, 3.0}) {
    int held = 0;
    for (int trial = 0; trial < 4000; ++trial) {
      Data data;
      for (int i = 0; i < 12; ++i) data.add(i * kHour, 1e5 - 20.0 * i + factor * 100.0 * normal(random), 100.0);
      const auto trend = summarise(data.fits()).value().trend;
      held += trend.slope_low <= -20.0 && -20.0 <= trend.slope_high;
    }
    INFO("sigmas too small by " << factor);
    CHECK(held >= 3738);
    if (factor > 1.0) CHECK(held <= 3862);
  }
}

// The standard error of a day's median is what the medians of many days scatter by, within the 15 % that the header states and
// 1/sqrt(2*2000) = 1.6 % of chance, of which 4.5 sigma are allowed.
TEST_CASE("the standard error of a median is the scatter of medians") {
  std::mt19937_64 random(9);
  std::normal_distribution<double> normal;
  for (const int count : {1, 2, 3, 4, 15, 60}) {
    double squares = 0.0, stated = 0.0;
    for (int trial = 0; trial < 2000; ++trial) {
      Data data;
      for (int i = 0; i < count; ++i) data.add(i, 1e5 + 100.0 * normal(random), 100.0);
      const auto day = summarise(data.fits()).value().days.at(0);
      squares += (day.rabi_hz - 1e5) * (day.rabi_hz - 1e5);
      stated += 100.0 * (count < 3 ? 1.0 : 1.2533) / std::sqrt(count) / 2000.0;
      REQUIRE(day.rabi_sigma_hz >= 100.0 * (count < 3 ? 1.0 : 1.2533) / std::sqrt(count) * 0.999999);
    }
    const double ratio = stated / std::sqrt(squares / 2000.0);
    INFO(count << " fits a day, ratio " << ratio);
    CHECK(ratio > 1.0 - 4.5 * 0.016);
    CHECK(ratio < 1.15 * (1.0 + 4.5 * 0.016));
  }
}
