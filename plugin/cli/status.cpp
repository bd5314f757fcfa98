// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/status.hpp"

#include <chrono>
#include <cmath>
#include <nlohmann/json.hpp>
#include <vector>

#include "model/quantity/format.hpp"
#include "plugin/cli/layout.hpp"
#include "plugin/client/client.hpp"

namespace halfturn::cli {

namespace {

using nlohmann::json;

std::string text_of(const json& object, const char* key) {
  const auto found = object.find(key);
  return found != object.end() && found->is_string() ? found->get<std::string>() : std::string();
}

double number_of(const json& object, const char* key) {
  const auto found = object.find(key);
  return found != object.end() && found->is_number() ? found->get<double>() : std::nan("");
}

/// The object or array under a key; an empty one where there is none.
const json& part_of(const json& object, const char* key) {
  static const json kNothing = json::object();
  const auto found = object.find(key);
  return found != object.end() && found->is_structured() ? *found : kNothing;
}

std::string uptime(double seconds) {
  const auto minutes = static_cast<long long>(seconds / 60.0);
  if (minutes < 1) return plain(seconds, 2) + " s";
  if (minutes < 60) return std::to_string(minutes) + " min";
  if (minutes < 48 * 60) return std::to_string(minutes / 60) + " h " + std::to_string(minutes % 60) + " min";
  return std::to_string(minutes / (24 * 60)) + " days";
}

std::string drive_line(const json& drive) {
  std::string text;
  const double rabi_hz = number_of(drive, "rabi_hz"), per_amplitude_hz = number_of(drive, "rabi_per_amplitude_hz");
  if (std::isfinite(rabi_hz)) text += "Rabi frequency " + engineering(rabi_hz, "Hz") + "; ";
  if (std::isfinite(per_amplitude_hz)) text += "Rabi frequency per amplitude " + engineering(per_amplitude_hz, "Hz") + "; ";
  if (text.empty()) text += "no scan accepted yet; ";
  if (const auto verdict = text_of(drive, "last_verdict"); !verdict.empty()) text += "last verdict " + verdict + "; ";
  if (const auto due = text_of(drive, "due_at"); !due.empty()) text += "next scan due at " + due + "; ";
  if (drive.value("held", false)) text += "on hold, so every verdict is keep; ";
  text += "in force:";
  const char* separator = " ";
  for (const auto& [name, length_s] : part_of(drive, "pulses").items()) {
    if (!length_s.is_number()) continue;
    text += separator + name + " " + engineering(length_s.get<double>(), "s");
    separator = ", ";
  }
  for (const auto& [name, amplitude] : part_of(drive, "amplitudes").items()) {
    if (!amplitude.is_number()) continue;
    text += separator + name + " amplitude " + plain(amplitude.get<double>());
    separator = ", ";
  }
  return text;
}

/// What is wrong, each a sentence that says what to do.
std::vector<std::string> wrong_with(const json& state) {
  std::vector<std::string> wrong;
  if (const auto log = text_of(state, "log"); !log.empty() && log != "ok") wrong.push_back("log: " + log);
  if (state.value("stopping", false)) wrong.push_back("the daemon is stopping: it takes no new requests");
  for (const auto& trouble : part_of(state, "troubles"))
    if (trouble.is_string()) wrong.push_back(trouble.get<std::string>());
  return wrong;
}

void print(const json& state, const StatusOptions& options, Streams& streams) {
  const auto wrong = wrong_with(state);
  streams.out << streams.style.strong(wrong.empty() ? "nothing is wrong" : "something is wrong") << '\n';
  for (const auto& each : wrong) streams.out << wrapped(each, "  - ");
  streams.out << "halfturn " << text_of(state, "version") << " at " << options.endpoint << ", up for "
              << uptime(number_of(state, "uptime_s")) << '\n';
  for (const auto& [name, drive] : part_of(state, "drives").items()) streams.out << wrapped(drive_line(drive), "  " + name + ": ");
}

}  // namespace

Exit status(const StatusOptions& options, Streams& streams) {
  const auto timeout = std::chrono::milliseconds(std::llround(1000.0 * options.timeout_s));
  client::Client client(client::ClientOptions{options.endpoint, timeout, 1});
  const auto state = client.request("status");
  if (!state) {
    if (state.error().code == "bad_endpoint") return print_fault(streams.err, "--endpoint", state.error()), kBadInput;
    if (state.error().code != "no_answer") return print_fault(streams.err, "", state.error()), kFailed;
    streams.err << wrapped("no daemon answers at " + options.endpoint + " within " + plain(options.timeout_s, 3) +
                               " s. Check that it runs (systemctl status halfturn, or halfturn serve --config FILE), and that "
                               "this is the endpoint under sockets: requests: of its configuration (--endpoint gives another).",
                           "halfturn: ");
    return kFailed;
  }
  if (options.json)
    streams.out << state->dump() << '\n';
  else
    print(*state, options, streams);
  return kDone;
}

}  // namespace halfturn::cli
