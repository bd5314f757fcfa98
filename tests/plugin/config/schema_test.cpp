// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <fstream>
#include <nlohmann/json.hpp>
#include <set>
#include <span>

#include "plugin/config/configuration.hpp"
#include "plugin/config/keys.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
namespace keys = config::keys;
using nlohmann::json;

namespace {

json schema() {
  std::ifstream stream(std::string(HALFTURN_SOURCE_DIR) + "/schemas/configuration.schema.json");
  return json::parse(stream);
}

void same(std::span<const std::string_view> known, const json& properties) {
  std::set<std::string> code(known.begin(), known.end()), file;
  for (const auto& [key, value] : properties.items()) file.insert(key);
  CHECK(code == file);
}

void same_words(std::span<const std::string_view> words, const json& list) {
  CHECK(std::vector<std::string>(words.begin(), words.end()) == list.get<std::vector<std::string>>());
}

}  // namespace

TEST_CASE("The schema has the keys that are read, and no others") {
  const json top = schema();
  same(keys::kTop, top["properties"]);
  same(keys::kSockets, top["properties"]["sockets"]["properties"]);
  const json drive = top["properties"]["drives"]["additionalProperties"]["properties"];
  same(keys::kDrive, drive);
  same(keys::kBeam, drive["beam"]["properties"]);
  same(keys::kReadout, drive["readout"]["properties"]);
  same(keys::kExpect, drive["expect"]["properties"]);
  same(keys::kSwitching, drive["switching"]["properties"]);
  same(keys::kAccept, drive["accept"]["properties"]);
  same(keys::kTransition, drive["transition"]["anyOf"][1]["properties"]);
  same(keys::kLevel, top["$defs"]["level"]["properties"]);
  const json pulse = drive["pulses"]["additionalProperties"]["properties"];
  same(keys::kPulse, pulse);
  same(keys::kShape, pulse["shape"]["properties"]);
  same_words(keys::kAdjust, pulse["adjust"]["enum"]);
  same_words(keys::kShapes, pulse["shape"]["properties"]["kind"]["enum"]);
  same_words(keys::kReadoutKinds, drive["readout"]["properties"]["kind"]["enum"]);
  same_words(keys::kLostReads, drive["lost_reads"]["enum"]);
  same_words(infer::kDynamicsNames, drive["dynamics"]["items"]["enum"]);
}

TEST_CASE("The schema's defaults are those of the program") {
  const json top = schema();
  const json sockets = top["properties"]["sockets"]["properties"];
  const config::Sockets normal;
  CHECK(sockets["requests"]["default"] == normal.requests);
  CHECK(sockets["feed"]["default"] == normal.feed);
  CHECK(sockets["results"]["default"] == normal.results);
  CHECK(sockets["display"]["default"] == normal.display);
  const json accept = top["properties"]["drives"]["additionalProperties"]["properties"]["accept"]["properties"];
  const recalibrate::Accept believed;
  CHECK(accept["max_step"]["default"] == "20 %");
  CHECK(believed.max_step == 0.20);
  CHECK(accept["max_angle_error"]["default"] == "100 mrad");
  CHECK(believed.max_angle_error_rad == 0.100);
  CHECK(accept["min_cycles"]["default"] == believed.min_cycles);
  CHECK(accept["min_evidence"]["default"] == believed.min_evidence);
  CHECK(accept["rival_margin"]["default"] == believed.rival_margin);
  CHECK(accept["min_p_value"]["default"] == believed.min_p_value);
  CHECK(accept["max_carrier_step"]["default"] == believed.max_carrier_step);
  CHECK(accept["max_carrier_error"]["default"] == believed.max_carrier_error);
}

// Every key of every map stands in the example, with or without its default.
TEST_CASE("The example of a night names every key") {
  std::ifstream stream(std::string(HALFTURN_SOURCE_DIR) + "/examples/first-night.yaml");
  const std::string text{std::istreambuf_iterator<char>(stream), {}};
  const std::span<const std::string_view> maps[] = {keys::kTop,     keys::kSockets, keys::kDrive,     keys::kBeam,
                                                    keys::kReadout, keys::kExpect,  keys::kSwitching, keys::kAccept};
  for (const auto& map : maps)
    for (const std::string_view key : map) {
      CAPTURE(key);
      CHECK(text.find(std::string(key) + ":") != std::string::npos);
    }
}
