// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/arguments.hpp"

#include <CLI/App.hpp>
#include <CLI/Config.hpp>
#include <CLI/Formatter.hpp>
#include <algorithm>
#include <array>
#include <memory>
#include <optional>
#include <string_view>
#include <vector>

#include "plugin/cli/check.hpp"
#include "plugin/cli/drift.hpp"
#include "plugin/cli/fit.hpp"
#include "plugin/cli/intensity.hpp"
#include "plugin/cli/serve.hpp"
#include "plugin/cli/status.hpp"
#include "plugin/cli/version.hpp"
#include "plugin/rehearse/rehearse.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::cli {

namespace {

constexpr const char* kAbout =
    "Halfturn turns scans of a driven transition into Rabi frequencies, light intensities and pulse lengths, and says how\n"
    "sure it is. It proposes settings and controls nothing.";

constexpr const char* kFooter =
    "\nExit status: 0 done; 1 done, but at least one scan was refused; 2 bad usage or bad input; 3 anything else.\n"
    "`halfturn COMMAND --help` tells of a command. The manual is halfturn(1).";

/// A command line with the options of every command; `command` is what was chosen.
struct Parser {
  CLI::App app{kAbout, "halfturn"};
  Command command;
  ServeOptions serve;
  FitOptions fit;
  IntensityOptions intensity;
  DriftOptions drift;
  rehearse::RehearseOptions rehearse;
  StatusOptions status;
  std::string checked;

  Parser();
  CLI::App* add(const char* name, const char* about, Command run);
  void add_serve();
  void add_fit();
  void add_intensity();
  void add_drift();
  void add_rehearse();
  void add_status();
  void add_check();
};

Parser::Parser() {
  app.set_version_flag("--version", std::string("halfturn ") + kVersion, "Print the version and leave");
  app.require_subcommand(1);
  app.footer(kFooter);
  add_serve();
  add_fit();
  add_intensity();
  add_drift();
  add_rehearse();
  add_status();
  add_check();
}

CLI::App* Parser::add(const char* name, const char* about, Command run) {
  auto* sub = app.add_subcommand(name, about);
  sub->callback([this, run] { command = run; });
  return sub;
}

void Parser::add_serve() {
  auto* sub = add("serve", "The daemon", [this](Streams& streams) { return cli::serve(serve, streams); });
  sub->add_option("--config", serve.config, "The configuration")->required()->type_name("FILE");
  sub->add_option("--threads", serve.threads, "Threads that fit; without it one a hardware core")->check(CLI::Range(1, 1024))->type_name("N");
  auto* quiet = sub->add_flag("--quiet", serve.quiet, "Say warnings and errors alone");
  sub->add_flag("--verbose", serve.verbose, "Say more")->excludes(quiet);
}

void Parser::add_fit() {
  auto* sub = add("fit", "Fit scan files without a daemon", [this](Streams& streams) { return cli::fit(fit, streams); });
  sub->add_option("FILE", fit.files, "Scan files, CSV")->required()->type_name("");
  sub->add_option("--config", fit.config, "The configuration that describes the drive; without it nothing is known beforehand")
      ->type_name("FILE");
  sub->add_option("--drive", fit.drive, "The drive; without it what the file says")->type_name("NAME");
  sub->add_flag("--together", fit.together, "Fit the files jointly: two to four scans of one drive, at one drive amplitude");
  sub->add_flag("--json", fit.json, "Print one JSON object a line, as the sockets carry it");
}

void Parser::add_intensity() {
  auto* sub = add("intensity", "Intensity, field, power and Rabi frequency of a transition, each from another",
                  [this](Streams& streams) { return cli::intensity(intensity, streams); });
  auto* list = sub->add_flag("--list", intensity.list, "Print the transitions of the catalogue, one a line");
  sub->add_option("--transition", intensity.transition, "A name such as those of --list")->type_name("NAME")->excludes(list);
  sub->add_option("--rabi-hz", intensity.rabi_hz, "From a Rabi frequency, cyclic")->type_name("X");
  sub->add_option("--intensity-w-m2", intensity.intensity_w_m2, "From an intensity")->type_name("X");
  sub->add_option("--power-w", intensity.power_w, "From the power of a Gaussian beam; needs --waist-m")->type_name("X");
  sub->add_option("--waist-m", intensity.waist_m, "1/e\u00b2 radius of the beam's intensity")->type_name("W");
  sub->add_flag("--json", intensity.json, "Print a JSON object");
}

void Parser::add_drift() {
  auto* sub = add("drift", "The drift report from the log", [this](Streams& streams) { return cli::drift(drift, streams); });
  sub->add_option("--log", drift.log, "The log; a daemon may be writing it")->required()->type_name("FILE");
  sub->add_option("--drive", drift.drive, "One drive; without it all")->type_name("NAME");
  sub->add_option("--since", drift.since, "Scans taken then or later: 2026-02-03T18:00:00Z, or a date")->type_name("T");
  sub->add_option("--until", drift.until, "Scans taken before then")->type_name("T");
  sub->add_option("--csv", drift.csv, "Write the fits to a file as CSV, one a row")->type_name("OUT");
  sub->add_flag("--json", drift.json, "Print a JSON object instead of the table");
}

void Parser::add_rehearse() {
  auto* sub = add("rehearse", "A simulated apparatus that drives a running daemon through hours of scans",
                  [this](Streams& streams) { return static_cast<Exit>(rehearse::run(rehearse, streams.out, streams.err)); });
  auto& o = rehearse;
  sub->add_option("--drive", o.drive, "A drive of the daemon's configuration")->required()->type_name("NAME");
  sub->add_option("--endpoint", o.endpoint, "The daemon's requests socket")->capture_default_str()->type_name("ENDPOINT");
  sub->add_option("--timeout-s", o.timeout_s, "A reply that takes longer ends the rehearsal")->capture_default_str()->type_name("X");
  sub->add_option("--pulse", o.pulse, "The pulse that is scored; without it the one nearest pi")->type_name("NAME");
  sub->add_option("--hours", o.hours, "Simulated time")->capture_default_str()->type_name("X");
  sub->add_option("--seed", o.seed, "Of all that is random")->capture_default_str()->type_name("N");
  sub->add_option("--starts-at", o.starts_at, "Simulated start, RFC 3339; without it so that the night ends now")->type_name("T");
  sub->add_option("--flop-every-s", o.flop_every_s, "Time between scans of the pulse length")->capture_default_str()->type_name("X");
  sub->add_option("--line-every-s", o.line_every_s, "Time between scans of the frequency")->capture_default_str()->type_name("X");
  sub->add_option("--shots", o.shots, "Shots a point")->capture_default_str()->type_name("N");
  sub->add_option("--flop-points", o.flop_points, "Points of a scan of the pulse length")->capture_default_str()->type_name("N");
  sub->add_option("--line-points", o.line_points, "Points of a scan of the frequency")->capture_default_str()->type_name("N");
  sub->add_option("--rabi-hz", o.rabi_hz, "True Rabi frequency at the start; without it what makes the pulse right")->type_name("X");
  sub->add_flag("--json", o.json, "Print a JSON object instead of the table");
}

void Parser::add_status() {
  auto* sub = add("status", "What is wrong with a running daemon, if anything, and what to do about it",
                  [this](Streams& streams) { return cli::status(status, streams); });
  sub->add_option("--endpoint", status.endpoint, "The daemon's requests socket")->capture_default_str()->type_name("ENDPOINT");
  sub->add_option("--timeout-s", status.timeout_s, "How long to wait for the answer")->capture_default_str()->check(CLI::PositiveNumber)->type_name("X");
  sub->add_flag("--json", status.json, "Print the answer as a JSON object");
}

void Parser::add_check() {
  auto* sub = add("check", "Read a configuration and say line and column of every fault",
                  [this](Streams& streams) { return cli::check(checked, streams); });
  sub->add_option("FILE", checked, "The configuration")->required()->type_name("");
}

/// The chosen command, or the program itself where none was: whose help is meant.
std::string help_for(const CLI::App& app) {
  for (const auto* sub : app.get_subcommands()) return "halfturn " + sub->get_name() + " --help";
  return "halfturn --help";
}

constexpr std::array<std::string_view, 3> kLater = {"refit", "next", "keygen"};

/// What is wrong with the first word, where it is no command.
std::optional<std::string> no_command(const CLI::App& app, std::string_view word) {
  if (word.empty() || word.front() == '-') return std::nullopt;
  std::vector<std::string> names;
  for (const auto* sub : app.get_subcommands([](const CLI::App*) { return true; })) names.push_back(sub->get_name());
  if (std::find(names.begin(), names.end(), word) != names.end()) return std::nullopt;
  if (std::find(kLater.begin(), kLater.end(), word) != kLater.end())
    return "`" + std::string(word) + "` is not available in this version";
  const std::vector<std::string_view> known(names.begin(), names.end());
  return "found " + wire::in_quotes(word) + ", which is no command: the nearest is `" + std::string(wire::nearest(word, known)) + "`";
}

}  // namespace

std::variant<Command, Notice> read_arguments(int argc, const char* const* argv) {
  auto parser = std::make_shared<Parser>();
  auto& app = parser->app;
  if (const auto wrong = no_command(app, argc > 1 ? argv[1] : ""))
    return Notice{"halfturn: " + *wrong + "\nTry `halfturn --help`.\n", kBadInput};
  try {
    app.parse(argc, argv);
  } catch (const CLI::CallForVersion& version) {
    return Notice{std::string(version.what()) + "\n", kDone};
  } catch (const CLI::CallForHelp&) {
    return Notice{app.help(), kDone};
  } catch (const CLI::ParseError& error) {
    return Notice{std::string("halfturn: ") + error.what() + "\nTry `" + help_for(app) + "`.\n", kBadInput};
  }
  return [parser](Streams& streams) { return parser->command(streams); };
}

}  // namespace halfturn::cli
