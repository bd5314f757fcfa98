// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/scan_file.hpp"

#include <algorithm>
#include <cmath>
#include <fstream>
#include <random>
#include <sstream>

#include "plugin/wire/decode.hpp"
#include "plugin/wire/time.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using config::read_scan;

namespace {

wire::Scan scan(const std::string& text) {
  const auto reading = read_scan(text);
  for (const config::Diagnosis& one : reading.faults) UNSCOPED_INFO(config::to_text(one, "f"));
  REQUIRE(reading.scan.has_value());
  return *reading.scan;
}

std::string faults(const std::string& text, const config::ScanLimits& limits = {}) {
  const auto reading = read_scan(text, limits);
  CHECK(reading.scan.has_value() == reading.faults.empty());
  std::string out;
  for (const config::Diagnosis& one : reading.faults) out += config::to_text(one, "f") + "\n";
  return out;
}

using Numbers = std::vector<double>;

}  // namespace

TEST_CASE("A scan file is read to the letter") {
  const wire::Scan s = scan(
      "# A remark, and another: with a colon\n# note: nothing that is known\n# scan_name: flop #3: morning\n# drive: "
      "red\n#taken_at: 2026-02-03T04:05:06.5Z\n"
      "# drive_amplitude: 0.8\n# carrier_hz: 434829121311000\n# prepared: e\n# references: {bright_counts: 950, "
      "bright_shots: 1000, dark_counts: 12, dark_shots: 1001}\n"
      "# ambient: {lab_c: 21.5}\n# ambient.humidity: 40\n# at_s: [0, 1.5, "
      "3]\n\nduration_s,counts,shots\n0,3,100\n1e-6,50,100\n2.5e-6,,\n");
  CHECK(s.scan_name == "flop #3: morning");
  CHECK(s.drive == "red");
  CHECK(s.taken_at == wire::parse_time("2026-02-03T04:05:06.5Z"));
  CHECK(s.axis_kind == wire::AxisKind::duration);
  CHECK(s.axis == Numbers{0, 1e-6, 2.5e-6});
  CHECK(s.readout_kind == wire::ReadoutKind::binomial);
  CHECK(s.sites.empty());
  CHECK(s.observed == std::vector<Numbers>{{3, 50, 0}});
  CHECK(s.weight == std::vector<Numbers>{{100, 100, 0}});
  CHECK(s.drive_amplitude == 0.8);
  CHECK(s.carrier_hz == 434829121311000.0);
  CHECK(s.prepared_excited);
  REQUIRE(s.references.has_value());
  CHECK(s.references->bright == 950);
  CHECK(s.references->bright_of == 1000);
  CHECK(s.references->dark == 12);
  CHECK(s.references->dark_of == 1001);
  CHECK(s.ambient == std::map<std::string, double>{{"lab_c", 21.5}, {"humidity", 40}});
  CHECK(s.at_s == Numbers{0, 1.5, 3});
}

TEST_CASE("Every axis and readout has its columns") {
  const wire::Scan line =
      scan("# pulse_s: 4.2e-6\ndetuning_hz,signal,sigma\n-1000,0.1,0.02\n1000,-3e-2,0.02\n2000,null,0.02\n");
  CHECK(line.axis_kind == wire::AxisKind::detuning);
  CHECK(line.readout_kind == wire::ReadoutKind::gaussian);
  CHECK(line.pulse_s == 4.2e-6);
  CHECK(line.axis == Numbers{-1000, 1000, 2000});
  CHECK(line.observed == std::vector<Numbers>{{0.1, -0.03, 0}});
  CHECK(line.weight[0][1] == 0.02);
  CHECK(std::isinf(line.weight[0][2]));
  const wire::Scan amplitude = scan(
      "# pulse_s: 4e-6\n# references.bright_photons: 9\n# references.bright_exposures: 10\n# references.dark_photons: 1\n"
      "# references.dark_exposures: 10\namplitude,photons,exposures\n0.5,12,10\n");
  CHECK(amplitude.axis_kind == wire::AxisKind::amplitude);
  CHECK(amplitude.readout_kind == wire::ReadoutKind::poisson);
  CHECK(amplitude.references->dark_of == 10);
  CHECK(scan("# shots: 200\nduration_s,counts\n0,3\n1e-6,4\n").weight == std::vector<Numbers>{{200, 200}});
  CHECK(scan("# sigma: 0.1\nduration_s,signal\n0,3\n").weight == std::vector<Numbers>{{0.1}});
  CHECK(scan("# pulse_s: 4e-6\nduration_s,counts,shots\n0,3,5\n").pulse_s == std::nullopt);
}

// Shafranovich, RFC 4180 (2005), section 2: CRLF, the last line's end optional, quotes, doubled quotes, commas within
// quotes.
TEST_CASE("CSV is that of RFC 4180") {
  const wire::Scan plain = scan("duration_s,counts,shots\n0,1,5\n1e-6,2,5\n");
  CHECK(scan("duration_s,counts,shots\r\n0,1,5\r\n1e-6,2,5\r\n").observed == plain.observed);
  CHECK(scan("duration_s,counts,shots\r\n0,1,5\r\n1e-6,2,5").observed == plain.observed);
  CHECK(scan("\"duration_s\",\"counts\",\"shots\"\r\n\"0\",\"1\",\"5\"\r\n\"1e-6\",2,5\r\n\r\n").observed == plain.observed);
  CHECK(scan("\xEF\xBB\xBF"
             "duration_s , counts, shots\n0,1,5\n1e-6,2,5\n")
            .observed == plain.observed);
  const wire::Scan sites = scan("duration_s,site,counts,shots\n0,\"a,\"\"b\"\"\",1,5\n");
  CHECK(sites.sites == std::vector<std::string>{"a,\"b\""});
}

TEST_CASE("Sites share an axis, whatever the order of the rows") {
  const wire::Scan s =
      scan("duration_s,site,counts,shots\n0,a,1,10\n1e-6,a,2,10\n1e-6,a,3,10\n1e-6,b,4,10\n0,b,5,10\n3e-6,b,6,10\n");
  CHECK(s.sites == std::vector<std::string>{"a", "b"});
  CHECK(s.axis == Numbers{0, 1e-6, 1e-6, 3e-6});
  CHECK(s.observed == std::vector<Numbers>{{1, 2, 3, 0}, {5, 4, 0, 6}});
  CHECK(s.weight == std::vector<Numbers>{{10, 10, 10, 0}, {10, 10, 0, 10}});
}

TEST_CASE("Faults of a scan file say where and what") {
  CHECK(faults("") == "f:1:1: found no header, expected one such as duration_s,counts,shots\n");
  CHECK(faults("duration_s,counts,shots\n") == "f:1:1: found a header alone, expected at least one point below it\n");
  CHECK(faults("time_s,counts,shots\n0,1,2\n") ==
        "f:1:1: found the unknown column \"time_s\", expected a known one: the nearest is \"site\"\n");
  CHECK(faults("duration_s,count,shots\n0,1,2\n") ==
        "f:1:12: found the unknown column \"count\", expected a known one: the nearest is \"counts\"\n");
  CHECK(faults("duration_s;counts;shots\n0;1;2\n").find("; columns are separated by commas\n") != std::string::npos);
  CHECK(
      faults("counts,shots,duration_s\n0,1,2\n") ==
      "f:1:1: counts: found \"counts\", expected duration_s, detuning_hz or amplitude as the first column, and only there\n"
      "f:1:14: duration_s: found \"duration_s\", expected duration_s, detuning_hz or amplitude as the first column, and "
      "only there\n");
  CHECK(faults("duration_s,counts,counts\n") == "f:1:19: counts: found the column a second time, expected it once\n");
  CHECK(faults("duration_s,site\n0,1\n") ==
        "f:1:1: found no readout, expected one of counts,shots or signal,sigma or photons,exposures\n");
  CHECK(faults("duration_s,counts,shots,signal,sigma\n") ==
        "f:1:1: found several readouts, expected one of counts,shots or signal,sigma or photons,exposures\n");
  CHECK(faults("duration_s,counts\n") ==
        "f:1:1: found half of a readout or a weight given twice, expected one of counts,shots or signal,sigma or "
        "photons,exposures\n");
  CHECK(faults("duration_s,counts,shots\n0,x,2\n-1e-6,1,2\n0,3,2\n0,1.5,2\n0,1,2.5\n0,1\n0,-1,2\n0x1,1,2\n0,nan,2\n") ==
        "f:2:3: counts: found \"x\", expected a number, or nothing where the point was not measured\n"
        "f:3:1: duration_s: found \"-1e-6\", expected a number of at least 0\n"
        "f:4:3: counts: found \"3\", expected at most the shots beside it\n"
        "f:5:3: counts: found \"1.5\", expected a whole number of at least 0\n"
        "f:6:5: shots: found \"2.5\", expected a whole number of at least 0\n"
        "f:7:1: found 2 values, expected 3 as in the header\n"
        "f:8:3: counts: found \"-1\", expected a whole number of at least 0\n"
        "f:9:1: duration_s: found \"0x1\", expected a number\n"
        "f:10:3: counts: found \"nan\", expected a number, or nothing where the point was not measured\n");
  CHECK(faults("duration_s,signal,sigma\n0,1,0\n") == "f:2:5: sigma: found \"0\", expected a number above 0\n");
  CHECK(faults("detuning_hz,counts,shots\n0,1,2\n") ==
        "f:1:1: pulse_s: found nothing, expected the length of the pulse as a line such as # pulse_s: 4.2e-6 above the "
        "header\n");
  CHECK(faults("duration_s,counts,shots\n# late: 1\n0,1,2\n") ==
        "f:2:1: found a line that begins with #, expected such lines before the header only\n");
  CHECK(faults("duration_s,counts,shots\n0,\"1,2\n") ==
        "f:2:1: found 2 values, expected 3 as in the header\nf:2:3: found an opening quotation mark without its end, "
        "expected two\n");
  CHECK(faults("duration_s,counts,shots\n0,\"1\"x,2\n") ==
        "f:2:3: found text behind the closing quotation mark, expected a comma or the line's end\n");
  CHECK(faults("duration_s,counts,shots\n0,1\"1\",2\n")
            .find("f:2:3: found a quotation mark within a value, expected it around the whole value\n") == 0);
  CHECK(faults("duration_s,counts,shots\n0,\xff,2\n") == "f:2:3: found a byte that is not text in UTF-8, expected UTF-8\n");
  CHECK(faults("duration_s,site,counts,shots\n0,,1,2\n") ==
        "f:2:3: site: found \"\", expected a name of 1 to 48 printable characters\n");
}

TEST_CASE("Faults of metadata say where and what") {
  const std::string table = "duration_s,counts,shots\n0,1,2\n";
  CHECK(faults("# pulse: 4e-6\n" + table) ==
        "f:1:3: pulse: found an unknown key, expected a key of a scan: the nearest is \"pulse_s\" (a remark has no colon "
        "after its first word)\n");
  CHECK(faults("# prepraed: e\n" + table)
            .find("f:1:3: prepraed: found an unknown key, expected a key of a scan: the nearest is \"prepared\"") == 0);
  CHECK(faults("# referneces.bright_counts: 3\n" + table).find("f:1:3: referneces.bright_counts: found an unknown key") ==
        0);
  CHECK(faults("# prepared: up\n" + table) == "f:1:13: prepared: found \"up\", expected g or e\n");
  CHECK(faults("# drive_amplitude: 2 V\n" + table) ==
        "f:1:20: drive_amplitude: found \"2 V\", expected a number without a unit, such as 0.5\n");
  CHECK(faults("# drive: two words\n" + table) ==
        "f:1:10: drive: found \"two words\", expected 1 to 48 of A-Z a-z 0-9 _ -\n");
  CHECK(faults("# drive:\n" + table) == "f:1:9: drive: found nothing, expected the name of a drive\n");
  CHECK(faults("# drive: red\n# drive: blue\n" + table) ==
        "f:2:3: drive: found the key a second time (first in line 1), expected it once\n");
  CHECK(faults("# taken_at: yesterday\n" + table) ==
        "f:1:13: taken_at: found \"yesterday\", expected a time such as 2026-02-03T04:05:06Z\n");
  CHECK(faults("# references: {bright_counts: 3, dark_counts: 1, dark_shots: 2, brigth_shots: 4}\n" + table) ==
        "f:1:3: references.bright_shots: found nothing, expected a number\n"
        "f:1:65: references.brigth_shots: found the unknown key \"brigth_shots\", expected a known key: the nearest is "
        "\"bright_shots\"\n");
  CHECK(faults("# references: {bright_counts: 5, bright_shots: 4, dark_counts: 1, dark_shots: 2}\n" + table) ==
        "f:1:48: references.bright_shots: found more counts than shots, expected at most as many\n");
  CHECK(faults("# references: {bright_photons: 5, bright_exposures: 4, dark_photons: 1, dark_exposures: 2}\n" + table) ==
        "f:1:15: references: found references of another readout than the scan's, expected the same (a Gaussian signal has "
        "none)\n");
  CHECK(faults("# at_s: [1, 2]\n" + table) == "f:1:9: at_s: found 2 times, expected one for each of 1 points\n");
  CHECK(faults("# at_s: [1, 2\n" + table).find("f:1:") == 0);
  CHECK(faults("# counts: 3\n" + table) == "f:1:3: counts: found a column above the header, expected it in the table\n");
  CHECK(faults("# ambient: 3\n" + table) == "f:1:12: ambient: found \"3\", expected a map of names and numbers\n");
  CHECK(faults("# shots: 3\n" + table).find("f:2:1: found half of a readout or a weight given twice") == 0);
}

TEST_CASE("A scan file that passes a limit is refused") {
  config::ScanLimits limits;
  limits.bytes = 10;
  CHECK(faults("duration_s,counts,shots\n0,1,2\n", limits) == "f: found more than 10 bytes, expected fewer\n");
  limits = {};
  limits.points = 2;
  CHECK(faults("duration_s,counts,shots\n0,1,2\n1,1,2\n2,1,2\n", limits) ==
        "f:4:1: found more than 2 points, expected fewer\n");
  limits = {};
  limits.sites = 1;
  CHECK(faults("duration_s,site,counts,shots\n0,a,1,2\n0,b,1,2\n", limits) ==
        "f:3:3: site: found more than 1 sites, expected fewer\n");
  std::string wrong = "duration_s,counts,shots\n", apart = "duration_s,site,counts,shots\n";
  for (int i = 0; i < 5000; ++i) {
    wrong += "x,1,2\n";
    apart += std::to_string(i) + "," + std::to_string(i) + ",1,2\n";
  }
  CHECK(read_scan(wrong).faults.size() == 50);
  CHECK(faults(apart) == "f:1:1: site: found sites whose points hardly coincide, expected sites on a common axis\n");
}

TEST_CASE("The example scans are sound, and fit on the wire") {
  for (const char* name : {"flop", "line", "amplitude"}) {
    const auto reading = config::read_scan_file(std::string(HALFTURN_SOURCE_DIR) + "/examples/" + name + ".csv");
    REQUIRE(reading.scan.has_value());
    CHECK(reading.scan->axis.size() == (std::string(name) == "amplitude" ? 41 : 61));
    CHECK(reading.scan->drive == "red");
    const auto again = wire::decode_scan(wire::encode_scan(*reading.scan));
    REQUIRE(again.has_value());
    CHECK(again->observed == reading.scan->observed);
    CHECK(again->axis == reading.scan->axis);
  }
}

TEST_CASE("A scan without a name takes that of its file") {
  NEEDS_REFERENCE_DATA(folder)
  const auto reading = config::read_scan_file(*folder + "/measured/nv_rabi.csv");
  REQUIRE(reading.scan.has_value());
  CHECK(reading.scan->scan_name == "nv_rabi");
  CHECK(reading.scan->drive == "nv");
  CHECK(reading.scan->readout_kind == wire::ReadoutKind::poisson);
  CHECK(reading.scan->axis.size() == 101);
  CHECK(reading.scan->axis.back() == Approx(0.5e-6));
}

// Seeded. Whatever is done to a sound file, it is read or refused; what is read fits on the wire.
TEST_CASE("Mutilated scan files are read or refused, never worse") {
  const std::string whole =
      "# drive: red\n# pulse_s: 4.2e-6\n# references: {bright_counts: 950, bright_shots: 1000, dark_counts: 12, dark_shots: "
      "1000}\n# at_s: [1, 2, 3]\n"
      "detuning_hz,site,counts,shots\n-1,\"a\",3,100\n0,a,50,100\n1e3,a,,\n0,b,1,2\n";
  const std::string pieces[] = {"\"",
                                ",",
                                "\n",
                                "\r\n",
                                "#",
                                "# ",
                                ":",
                                "{",
                                "}",
                                "[",
                                "]",
                                "-",
                                "e9",
                                "1e400",
                                "null",
                                ".",
                                "\xC2\xB5",
                                "\xFF",
                                "references.x: 1\n"};
  std::mt19937 random(7);
  const auto below = [&](std::size_t n) { return std::uniform_int_distribution<std::size_t>(0, n - 1)(random); };
  int sound = 0;
  for (int round = 0; round < 5000; ++round) {
    std::string text = whole;
    for (std::size_t change = 0, changes = 1 + below(3); change < changes; ++change) {
      const std::size_t at = below(text.size());
      switch (below(4)) {
        case 0: text.erase(at, 1 + below(10)); break;
        case 1: text.insert(at, pieces[below(std::size(pieces))]); break;
        case 2: text[at] = static_cast<char>(below(256)); break;
        default: {
          const std::size_t from = below(text.size());
          text.insert(at, text.substr(from, below(40)));
        }
      }
    }
    const auto reading = read_scan(text);
    REQUIRE(reading.scan.has_value() == reading.faults.empty());
    for (const config::Diagnosis& one : reading.faults) REQUIRE(one.message.find("found") == 0);
    if (!reading.scan) continue;
    ++sound;
    wire::Scan scan = *reading.scan;
    if (scan.drive.empty()) scan.drive = "red";  // a file may leave it to the command line
    const auto again = wire::decode_scan(wire::encode_scan(scan));
    CAPTURE(text, again ? "" : again.error().message);
    REQUIRE(again.has_value());
  }
  CHECK(sound > 200);
}
