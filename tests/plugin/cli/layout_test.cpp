// SPDX-License-Identifier: Apache-2.0
// How results are laid out.
#include "plugin/cli/layout.hpp"

#include <cstdlib>
#include <sstream>

#include "plugin/cli/report.hpp"
#include "plugin/cli/style.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::cli;

TEST_CASE("widths count characters and no escape sequences") {
  CHECK(width("4.00 \u00b5s") == 7);
  CHECK(width(Style(true).verdict("apply")) == 5);
  CHECK(padded("\u00b5", 3) == "\u00b5  ");
}

TEST_CASE("sentences break at blanks and keep their indent") {
  std::string text;
  for (int i = 0; i < 60; ++i) text += "word ";
  const auto lines = wrapped(text, "  first: ");
  std::istringstream stream(lines);
  std::string line;
  std::size_t words = 0, count = 0;
  while (std::getline(stream, line)) {
    CHECK(width(line) <= kColumns);
    CHECK(line.substr(0, 9) == (count++ == 0 ? "  first: " : "         "));
    for (std::size_t at = line.find("word"); at != std::string::npos; at = line.find("word", at + 1)) ++words;
    CHECK(line.back() == 'd');
    if (words < 60) CHECK(width(line) >= kColumns - 4);  // the next word, with its blank, would have been too much
  }
  CHECK(words == 60);
  CHECK(wrapped(std::string(200, 'x'), "- ") == "- " + std::string(200, 'x') + "\n");
}

// "2.0000" stood at the end of a line and its unit on the next.
TEST_CASE("a number keeps its unit, wherever the line breaks") {
  for (const std::string quantity : {"2.0000 \u00b5s", "125.34(12) kHz,", "-0.200 %", "(1.5 MHz)", "12.6 mrad;", "3 sigma.", "1.234(3) kW/m\u00b2", "4 s"}) {
    for (std::size_t before = 60; before < kColumns; ++before) {
      const auto text = wrapped(std::string(before, 'x') + " " + quantity + " and more", "");
      INFO(text);
      CHECK(text.find(quantity) != std::string::npos);
    }
  }
  CHECK(wrapped(std::string(kColumns - 2, 'x') + " 4 words", "") == std::string(kColumns - 2, 'x') + " 4\nwords\n");
}

TEST_CASE("columns are as wide as their widest cell") {
  CHECK(table({{"a", "bb", "c"}, {"\u00b5\u00b5\u00b5", "", "d"}, {"e"}}, " ") == " a    bb  c\n \u00b5\u00b5\u00b5      d\n e\n");
}

TEST_CASE("NO_COLOR, and anything that is no terminal, is without colour") {
  // https://no-color.org: set and not empty.
  CHECK_FALSE(colour_wanted(-1));
  CHECK(Style(false).verdict("refuse") == "refuse");
  CHECK(Style(true).verdict("refuse") == "\033[1;31mrefuse\033[0m");
}

TEST_CASE("the report says the verdict first, then reasons, estimates, pulses and quality") {
  wire::Fitted scan;
  scan.scan_name = "night-41";
  scan.drive = "red";
  scan.verdict = "apply";
  scan.reasons = {{"first", "No earlier scan of this drive is known."}};
  scan.assumed = {"the carrier sits on the line"};
  scan.estimates = {{"rabi_hz", {125340.0, 120.0, 125105.0, 125575.0, ""}},
                    {"decay_s", {NAN, NAN, NAN, NAN, "the chosen dynamics have no decay"}},
                    {"contrast", {0.934, 0.011, 0.912, 0.956, ""}},
                    {"intensity_w_m2", {1234.0, 3.0, 1228.0, 1240.0, ""}}};
  wire::Pulse pulse;
  pulse.verdict = "apply";
  pulse.angle_rad = 3.14159265;
  pulse.previous_s = 4.0e-6;
  pulse.length_s = 3.992e-6;
  pulse.exact_s = 3.9891e-6;
  pulse.sigma_s = 3.8e-9;
  pulse.change = -0.002;
  pulse.rotation_error_rad = 0.0126;
  scan.pulses = {{"flip", pulse}};
  scan.dynamics = "undamped";
  scan.candidates = {{"undamped", -120.0, 0.7}, {"decay", -118.0, 0.3}};
  scan.quality.points = 40;
  scan.quality.deviance = 35.1;
  scan.quality.dof = 36;
  scan.quality.p_value = 0.51;
  scan.quality.cycles = 3.2;
  scan.quality.rival = wire::Rival{874000.0, 120.0};
  const auto text = report(scan, Style(false));

  std::size_t at = 0;
  for (const char* expected :
       {"night-41: apply", "first: No earlier scan", "assumed: the carrier", "Rabi frequency", "125.34(12) kHz",
        "125.105 kHz \u2026 125.575 kHz", "0.934(11)", "1.234(3) kW/m\u00b2", "flip", "apply",
        "3.1416 rad", "4.0000 \u00b5s", "3.9920 \u00b5s", "3.989(4) \u00b5s", "-0.200 %", "12.6 mrad", "undamped", "0.70",
        "deviance 35.10", "3.20 cycles in 40 points", "874.00 kHz", "decay time: the chosen dynamics have no decay"}) {
    const auto found = text.find(expected, at);
    INFO(expected << " in\n" << text);
    REQUIRE(found != std::string::npos);
    at = found;
  }
  CHECK(text.find('\033') == std::string::npos);
}

TEST_CASE("the report says what is hardly told apart, and what lies at a bound") {
  wire::Fitted scan;
  scan.quality.points = 40;
  scan.quality.correlation = wire::Correlation{{"rabi_hz", "dead_time_s"}, 0.97};
  CHECK(report(scan, Style(false)).find("told apart") == std::string::npos);
  CHECK(report(scan, Style(false)).find("at its bound") == std::string::npos);
  scan.quality.correlation->value = -0.9931;
  scan.quality.at_bound = {"dephasing_s", "floor"};
  const auto text = report(scan, Style(false));
  CHECK(text.find("Rabi frequency and dead time are hardly told apart (correlation -0.9931)") != std::string::npos);
  CHECK(text.find("at its bound: dephasing time, floor") != std::string::npos);
}

TEST_CASE("fields have names for people, and units from their endings") {
  CHECK(label("rabi_hz").text == "Rabi frequency");
  CHECK(label("rabi_hz").unit == "Hz");
  CHECK(label("intensity_w_m2").unit == "W/m\u00b2");
  CHECK(label("field_v_m").unit == "V/m");
  CHECK(label("dead_time_s").unit == "s");
  CHECK(label("contrast").unit.empty());
  CHECK(label("something_new_hz").text == "something_new_hz");
  CHECK(label("flux_density_t").unit == "T");
}
