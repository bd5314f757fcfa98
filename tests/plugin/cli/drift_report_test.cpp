// SPDX-License-Identifier: Apache-2.0
// The drift report from a log in memory. CSV and JSON are read back by Python's csv and json modules (outside the project).
#include "plugin/cli/drift_report.hpp"

#include <cmath>
#include <cstdlib>
#include <fstream>
#include <iterator>
#include <nlohmann/json.hpp>

#include "plugin/cli/calendar.hpp"
#include "plugin/log/memory_log.hpp"
#include "tests/support/catch.hpp"
#include "tests/support/folder.hpp"

using namespace halfturn;
using namespace halfturn::cli;
using Catch::Matchers::Contains;

namespace {

constexpr double kNone = std::numeric_limits<double>::quiet_NaN();
constexpr log::Time kHour = 3'600'000'000'000;
constexpr log::Time kStart = 1'769'904'000'000'000'000;  // date -u -d 2026-02-01 +%s

log::Event fit(const std::string& drive, log::Time at, double rabi, const std::string& verdict = "apply") {
  log::Event event;
  for (auto* value : {&event.generalised_hz, &event.generalised_sigma_hz, &event.line_offset_hz, &event.line_offset_sigma_hz,
                      &event.carrier_hz, &event.dead_time_s, &event.dead_time_sigma_s, &event.drive_amplitude, &event.rabi_low_hz,
                      &event.rabi_high_hz, &event.intensity_w_m2}) {
    *value = kNone;
  }
  event.kind = "fit";
  event.drive = drive;
  event.happened_at = at;
  event.axis = "duration";
  event.verdict = verdict;
  event.scan_name = "flop " + std::to_string(at / kHour % 24);
  event.rabi_hz = rabi;
  event.rabi_sigma_hz = 120.0;
  event.intensity_w_m2 = 63661.977;
  event.pulses_s = {{"flip", 4e-6}};
  return event;
}

void store(log::Log& log, const std::vector<log::Event>& events) {
  REQUIRE(log.begin());
  for (const auto& event : events) REQUIRE(log.append(event, nullptr));
  REQUIRE(log.commit());
}

/// Two days of red, falling by 6 %, and one scan of blue.
void store_nights(log::Log& log) {
  std::vector<log::Event> events;
  for (int i = 0; i < 5; ++i) events.push_back(fit("red", kStart + i * kHour, 125340.0 + (i % 2 == 0 ? 50 : -50)));
  for (int i = 0; i < 3; ++i) events.push_back(fit("red", kStart + (26 + i) * kHour, 117820.0 + (i % 2 == 0 ? 50 : -50)));
  auto refused = fit("red", kStart + 30 * kHour, 300000.0, "refuse");
  refused.reasons = "step flat";
  refused.scan_name = "say \"no\", again\nplease \u00b5";
  events.push_back(refused);
  auto weak = fit("red", kStart + 31 * kHour, 62000.0);
  weak.drive_amplitude = 0.5;
  events.push_back(weak);
  auto line = fit("red", kStart + 32 * kHour, kNone, "keep");
  line.axis = "detuning";
  line.line_offset_hz = -812.5;
  events.push_back(line);
  auto hold = fit("red", kStart, kNone);
  hold.kind = "hold";
  events.push_back(hold);
  events.push_back(fit("blue", kStart, 1e6));
  store(log, events);
}

/// What a Python program prints that is given the text as its first argument's file.
std::string python(const std::string& program, const std::string& text) {
  tests::Folder folder;
  std::ofstream(folder / "in", std::ios::binary) << text;
  std::ofstream(folder / "program.py") << program;
  const char* given = std::getenv("HALFTURN_PYTHON");
  const std::string command = std::string(given == nullptr ? "/usr/bin/python3" : given) + " '" + (folder / "program.py") + "' '" +
                              (folder / "in") + "' > '" + (folder / "out") + "' 2>&1";
  const int status = std::system(command.c_str());
  std::ifstream out(folder / "out");
  std::string answer{std::istreambuf_iterator<char>(out), {}};
  return status == 0 ? answer : "failed: " + answer;
}

}  // namespace

TEST_CASE("the report gathers drives, days and fits") {
  log::MemoryLog log;
  store_nights(log);
  const auto report = drift_report(log, "", {}, {}).value();
  REQUIRE(report.drives.size() == 2);
  CHECK(report.drives[0].drive == "blue");
  CHECK(report.fits.size() == 12);
  const auto& red = report.drives[1];
  REQUIRE(red.summary.days.size() == 2);
  CHECK(red.summary.days[0].rabi_hz == 125390.0);
  CHECK(red.summary.days[1].scans == 6);
  CHECK(red.summary.days[1].refused == 1);
  CHECK(red.summary.days[1].used == 3);  // neither refused, nor at half amplitude, nor a line scan
  CHECK(red.summary.days[1].rabi_hz == 117870.0);
  CHECK(red.at_other_amplitudes == 1);
  CHECK(std::isnan(red.drive_amplitude));
  CHECK(red.summary.trend.fits == 8);
  CHECK(red.summary.trend.slope_high < 0.0);
}

TEST_CASE("a filter by drive and time") {
  log::MemoryLog log;
  store_nights(log);
  const auto report = drift_report(log, "red", kStart + kHour, kStart + 3 * kHour).value();
  REQUIRE(report.fits.size() == 2);
  CHECK(report.fits[0].happened_at == kStart + kHour);
  CHECK(drift_report(log, "red", 0, kHour).value().drives.empty());
  CHECK(to_table(drift_report(log, "red", 0, kHour).value(), false) ==
        "No scans of drive red from 1970-01-01T00:00:00Z until 1970-01-01T01:00:00Z in this log.\n");
  const auto unknown = drift_report(log, "rde", {}, {});
  REQUIRE_FALSE(unknown);
  CHECK(unknown.error().code == "unknown_drive");
  CHECK_THAT(unknown.error().message, Contains("`rde`") && Contains("blue, red"));
  CHECK(drift_report(log, "", kHour, kHour).error().code == "bad_value");
}

// The trend by NumPy and SciPy: x = [0, 1, 2, 3, 4, 26, 27, 28], y = [125390, 125290, ...], s = 120;
// p, c = np.polyfit(x, y, 1, w=1/s, cov='unscaled'); scatter = sqrt((((y - np.polyval(p, x))/s)**2).sum()/6);
// p[0]/y.mean() +- scipy.stats.t.ppf(0.975, 6)*sqrt(c[0, 0])*scatter/y.mean()
TEST_CASE("the table, laid out for reading") {
  log::MemoryLog log;
  store_nights(log);
  const auto text = to_table(drift_report(log, "red", {}, {}).value(), false);
  CHECK(text ==
        "Drive red\n"
        "  day (UTC)   scans  refused  Rabi frequency    intensity  since first  since last day\n"
        "  2026-02-01      5        0   125.39(7) kHz  63.66 kW/m\u00b2      +0.00 %               -\n"
        "  2026-02-02      6        1   117.87(9) kHz  63.66 kW/m\u00b2      -6.00 %         -6.00 %\n"
        "  Trend: -0.243 % per hour, 95 % interval -0.268 % to -0.218 % (8 fits).\n"
        "  The fits scatter about it 3.6 times as much as their own uncertainties say.\n"
        "  Left aside: 1 scan at other drive amplitudes.\n");
  const auto coloured = to_table(drift_report(log, "red", {}, {}).value(), true);
  CHECK_THAT(coloured, Contains("\x1b[31m1\x1b[0m") && Contains("\x1b[33m-6.00 %\x1b[0m"));
  CHECK_THAT(to_table(drift_report(log, "blue", {}, {}).value(), false), Contains("Trend: none yet; it takes three fits"));
}

TEST_CASE("Python's csv module reads the CSV back, strictly") {
  log::MemoryLog log;
  store_nights(log);
  const auto csv = to_csv(drift_report(log, "red", {}, {}).value());
  CHECK_THAT(csv, Catch::StartsWith("taken_at,drive,scan_name,axis,verdict,effect,reasons,rabi_hz,rabi_sigma_hz,rabi_low_hz,rabi_high_hz,"));
  const std::string program = R"(
import csv, sys
rows = list(csv.DictReader(open(sys.argv[1], newline='', encoding='utf-8'), strict=True))
print(len(rows), len({len(row) for row in rows}), all(None not in row and None not in row.values() for row in rows))
odd = rows[8]
print(odd['taken_at'], repr(odd['scan_name']), odd['reasons'], odd['verdict'], float(odd['rabi_hz']))
line = rows[10]
print(repr(line['rabi_hz']), float(line['line_offset_hz']), float(line['intensity_w_m2']) == 63661.977)
)";
  CHECK(python(program, csv) ==
        "11 1 True\n"
        "2026-02-02T06:00:00Z 'say \"no\", again\\nplease \u00b5' step flat refuse 300000.0\n"
        "'' -812.5 True\n");
}

TEST_CASE("Python's json module reads the JSON back, without NaN") {
  log::MemoryLog log;
  store_nights(log);
  const auto json = to_json(drift_report(log, "red", kStart, {}).value());
  CHECK(json.find('\n') == std::string::npos);
  const std::string program = R"(
import json, sys
def refuse(text): raise ValueError(text)
report = json.load(open(sys.argv[1], encoding='utf-8'), parse_constant=refuse)
red = report['drives']['red']
print(report['since'], report['until'], len(report['fits']), [day['day'] for day in red['days']])
print(red['days'][0]['since_previous'], red['days'][1]['rabi_hz'], red['trend']['fits'], red['drive_amplitude'])
print(report['fits'][0]['pulses_s'], report['fits'][10]['rabi_hz'], report['fits'][8]['scan_name'][:8])
)";
  CHECK(python(program, json) ==
        "2026-02-01T00:00:00Z None 11 ['2026-02-01', '2026-02-02']\n"
        "None 117870.0 8 None\n"
        "{'flip': 4e-06} None say \"no\"\n");
}

TEST_CASE("times of day against GNU date") {
  CHECK(time_text(1'769'904'000'000'000'000) == "2026-02-01T00:00:00Z");    // date -u -d @1769904000 --rfc-3339=seconds
  CHECK(time_text(951'782'399'000'000'001) == "2000-02-28T23:59:59.000000001Z");  // date -u -d @951782399
  CHECK(time_text(951'868'799'500'000'000) == "2000-02-29T23:59:59.500Z");  // date -u -d @951868799
  CHECK(time_text(-1) == "1969-12-31T23:59:59.999999999Z");
  CHECK(date_text(-1) == "1969-12-31");
}
