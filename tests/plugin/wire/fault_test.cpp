// SPDX-License-Identifier: Apache-2.0
// One row for each fault of a request: its code and place, and what its sentence must say. The rules are the contract's
// (schemas/messages.schema.json).
#include "tests/plugin/wire/support.hpp"

using namespace halfturn;
using namespace halfturn::wire;
using namespace halfturn::wire::tests;

namespace {

struct Row {
  std::string message, code, where, says;
};

void check(const std::vector<Row>& rows) {
  for (const Row& row : rows) {
    const Fault fault = fault_of(row.message);
    INFO(row.message);
    CHECK(fault.code == row.code);
    CHECK(fault.where == row.where);
    CHECK_THAT(fault.message, Catch::Contains(row.says));
  }
}

std::string top(const std::string& kind, const std::string& fields) {
  return R"({"proto":1,"kind":")" + kind + R"(","id":"i")" + (fields.empty() ? "" : ",") + fields + "}";
}

}  // namespace

TEST_CASE("faults of the envelope") {
  check({
      {R"({"kind":"status","id":"i"})", "missing_field", "proto", "found no `proto`"},
      {R"({"proto":2,"kind":"status","id":"i"})", "proto", "proto", "found 2, expected 1"},
      {R"({"proto":1,"id":"i"})", "missing_field", "kind", "found no `kind`"},
      {R"({"proto":1,"kind":"fti","id":"i"})", "unknown_kind", "kind", "found \"fti\"; the nearest known kind is \"fit\""},
      {R"({"proto":1,"kind":"status"})", "missing_field", "id", "such as a UUID"},
      {R"({"proto":1,"kind":"status","id":""})", "bad_value", "id", "1 to 64 printable characters"},
      {R"({"proto":1,"kind":"status","id":"a\nb"})", "bad_value", "id", "1 to 64 printable characters"},
      {R"({"proto":1,"kind":"status","id":")" + std::string(65, 'x') + R"("})", "bad_value", "id", "1 to 64 printable characters"},
      {R"({"proto":1,"kind":"status","id":7})", "bad_type", "id", "found the number 7, expected a text"},
      {R"({"proto":"1","kind":"status","id":"i"})", "bad_type", "proto", "found the text \"1\", expected a number"},
      {R"({"proto":true,"kind":"status","id":"i"})", "bad_type", "proto", "found true, expected a number"},
      {top("status", R"("knid":1)"), "unknown_field", "knid", "the nearest known one is `kind`"},
      {top("status", R"("drive":"red")"), "unknown_field", "drive", "`drive` does not belong to a message `status`"},
      {top("fit", R"("drive":"red")"), "unknown_field", "drive", "it belongs inside `scan`"},
  });
}

TEST_CASE("faults of types") {
  check({
      {fit_with(R"("duration_s":[0,"1"],"counts":[0,1],"shots":9)"), "bad_type", "scan.duration_s[1]", "found the text \"1\", expected a number"},
      {fit_with(R"("duration_s":[0,true],"counts":[0,1],"shots":9)"), "bad_type", "scan.duration_s[1]", "found true, expected a number"},
      {fit_with(R"("duration_s":[0,null],"counts":[0,1],"shots":9)"), "bad_type", "scan.duration_s[1]", "found null, expected a number"},
      {fit_with(R"("duration_s":[0,[1]],"counts":[0,1],"shots":9)"), "bad_type", "scan.duration_s[1]", "found a list, expected a number"},
      {fit_with(R"("duration_s":[0,{}],"counts":[0,1],"shots":9)"), "bad_type", "scan.duration_s[1]", "found a map, expected a number"},
      {fit_with(R"("duration_s":3,"counts":[0,1],"shots":9)"), "bad_type", "scan.duration_s", "expected a list of numbers"},
      {fit_with(R"("duration_s":[0,1],"counts":3,"shots":9)"), "bad_type", "scan.counts", "expected a list of numbers"},
      {fit_with(R"("duration_s":[0,1],"counts":[0,[1]],"shots":9)"), "bad_type", "scan.counts[1]", "found a list, expected a number"},
      {fit_with(R"("sites":["a","b"],"duration_s":[0],"counts":[[0],1],"shots":9)"), "bad_shape", "scan.counts[1]", "found a number among rows"},
      {fit_with(R"("sites":["a"],"duration_s":[0],"counts":[[[0]]],"shots":9)"), "bad_type", "scan.counts[0][0]", "found a list, expected a number"},
      {fit_with(R"("sites":["a",1],"duration_s":[0],"counts":[[0]],"shots":9)"), "bad_type", "scan.sites[1]", "expected a text"},
      {fit_with(R"("sites":"a","duration_s":[0],"counts":[[0]],"shots":9)"), "bad_type", "scan.sites", "expected a list of texts"},
      {fit_with(kFlop + R"(,"pulse_s":null)"), "bad_type", "scan.pulse_s", "leave the field out"},
      {fit_with(kFlop + R"(,"taken_at":1700000000)"), "bad_type", "scan.taken_at", "expected an RFC 3339 time"},
      {fit_with(kFlop + R"(,"taken_at":"2026-02-30T00:00:00Z")"), "bad_value", "scan.taken_at", "2026-02-30"},
      {fit_with(kFlop + R"(,"taken_at":"2026-02-03 04:05")"), "bad_value", "scan.taken_at", "with its offset"},
      {fit_with(kFlop + R"(,"ambient":{"room":"hot"})"), "bad_type", "scan.ambient.room", "expected a number"},
      {fit_with(kFlop + R"(,"ambient":[1])"), "bad_type", "scan.ambient", "expected a map of names to numbers"},
      {fit_with(kFlop + R"(,"references":3)"), "bad_type", "scan.references", "expected a map"},
      {top("fit", R"("scan":[1])"), "bad_type", "scan", "found a list, expected a map"},
      {top("fit", R"("scans":{})"), "bad_type", "scans", "found a map, expected a list of scans"},
      {top("fit", R"("scans":[1])"), "bad_type", "scans[0]", "expected a scan (a map)"},
      {fit_with(kFlop, R"(,"options":{"store":1})"), "bad_type", "options.store", "expected true or false"},
      {top("next", R"("drive":"red","shots":[1])"), "bad_type", "shots", "one whole number"},
  });
}

TEST_CASE("faults of a scan's fields") {
  check({
      {fit_with(R"("count":[1])"), "unknown_field", "scan.count", "the nearest known one is `counts`"},
      {fit_with(R"("Shots":1)"), "unknown_field", "scan.Shots", "`shots`"},
      {R"({"proto":1,"kind":"fit","id":"i","scan":{)" + kFlop + "}}", "missing_field", "scan.drive", "names its drive"},
      {R"({"proto":1,"kind":"fit","id":"i"})", "missing_field", "scan", "`scans` for a joint fit"},
      {fit_with(R"("counts":[1],"shots":[2])"), "missing_field", "scan.duration_s", "send `duration_s`, `detuning_hz` or `amplitude`"},
      {fit_with(R"("duration_s":[1])"), "missing_field", "scan.counts", "found no readout"},
      {fit_with(R"("duration_s":[1],"counts":[1])"), "missing_field", "scan.shots", "come together"},
      {fit_with(R"("duration_s":[1],"sigma":[1])"), "missing_field", "scan.signal", "come together"},
      {fit_with(R"("duration_s":[1],"detuning_hz":[1],"counts":[1],"shots":1)"), "bad_shape", "scan.detuning_hz", "exactly one axis"},
      {fit_with(R"("duration_s":[1],"counts":[1],"sigma":[1],"shots":1)"), "bad_shape", "scan.sigma", "beside another readout"},
      {fit_with(R"("detuning_hz":[1],"counts":[1],"shots":1)"), "missing_field", "scan.pulse_s", "says the length of its pulse"},
      {fit_with(R"("amplitude":[1],"counts":[1],"shots":1)"), "missing_field", "scan.pulse_s", "says the length of its pulse"},
      {fit_with(kFlop + R"(,"pulse_s":1e-6)"), "bad_shape", "scan.pulse_s", "whose axis is the pulse length"},
      {R"({"proto":1,"kind":"fit","id":"i","scan":{"drive":"r d",)" + kFlop + "}}", "bad_value", "scan.drive", "1 to 48 of A-Z a-z 0-9 _ -"},
      {fit_with(kFlop + R"(,"prepared":"x")"), "bad_value", "scan.prepared", "expected \"g\" or \"e\""},
      {fit_with(kFlop + R"(,"drive_amplitude":0)"), "bad_value", "scan.drive_amplitude", "a number above 0"},
      {fit_with(kFlop + R"(,"scan_name":"")"), "bad_value", "scan.scan_name", "printable"},
      {fit_with(kFlop + R"(,"ambient":{"":1})"), "bad_value", "scan.ambient", "printable"},
  });
}

TEST_CASE("faults of lengths and values") {
  check({
      {fit_with(R"("duration_s":[],"counts":[],"shots":1)"), "bad_shape", "scan.duration_s", "found no points"},
      {fit_with(R"("duration_s":[0,1],"counts":[1],"shots":9)"), "bad_shape", "scan.counts", "found 1 number, expected one for each of the 2 points of `duration_s`"},
      {fit_with(R"("duration_s":[0,1],"counts":[1,1],"shots":[9,9,9])"), "bad_shape", "scan.shots", "found 3 numbers"},
      {fit_with(R"("duration_s":[0,1],"counts":[[1,1]],"shots":9)"), "bad_shape", "scan.counts", "needs `sites`"},
      {fit_with(R"("sites":["a","b"],"duration_s":[0],"counts":[1],"shots":9)"), "bad_shape", "scan.counts", "found one list of numbers, expected one list for each of the 2 sites"},
      {fit_with(R"("sites":["a","b"],"duration_s":[0],"counts":[[1]],"shots":9)"), "bad_shape", "scan.counts", "found 1 row"},
      {fit_with(R"("sites":["a","b"],"duration_s":[0,1],"counts":[[1,1],[1]],"shots":9)"), "bad_shape", "scan.counts[1]", "found 1 number"},
      {fit_with(R"("sites":["a","b"],"duration_s":[0],"counts":[[1],[1]],"shots":[[9]])"), "bad_shape", "scan.shots", "found 1 row"},
      {fit_with(R"("sites":["a","a"],"duration_s":[0],"counts":[[1],[1]],"shots":9)"), "bad_value", "scan.sites[1]", "a second time"},
      {fit_with(R"("sites":[],"duration_s":[0],"counts":[1],"shots":9)"), "bad_shape", "scan.sites", "found no sites"},
      {fit_with(R"("sites":["a\u0007"],"duration_s":[0],"counts":[[1]],"shots":9)"), "bad_value", "scan.sites[0]", "printable"},
      {fit_with(R"("duration_s":[0,-1e-6],"counts":[1,1],"shots":9)"), "bad_value", "scan.duration_s[1]", "found -1e-06, expected a number of at least 0"},
      {fit_with(R"("duration_s":[0,1],"counts":[1,-1],"shots":9)"), "bad_value", "scan.counts[1]", "found -1, expected a whole number of at least 0"},
      {fit_with(R"("duration_s":[0,1],"counts":[1,1.5],"shots":9)"), "bad_value", "scan.counts[1]", "found 1.5"},
      {fit_with(R"("duration_s":[0,1],"counts":[1,10],"shots":9)"), "bad_value", "scan.counts[1]", "found 10, expected at most the shots, 9"},
      {fit_with(R"("duration_s":[0,1],"counts":[1,1],"shots":[9,-9])"), "bad_value", "scan.shots[1]", "found -9"},
      {fit_with(R"("duration_s":[0,1],"counts":[1,1],"shots":0.5)"), "bad_value", "scan.shots", "found 0.5"},
      {fit_with(R"("duration_s":[0,1],"photons":[1,-2],"exposures":5)"), "bad_value", "scan.photons[1]", "found -2"},
      {fit_with(R"("duration_s":[0,1],"signal":[1,2],"sigma":[0.1,0])"), "bad_value", "scan.sigma[1]", "found 0, expected a number above 0"},
      {fit_with(R"("sites":["a","b"],"duration_s":[0],"counts":[[1],[8]],"shots":[[9],[7]])"), "bad_value", "scan.counts[1][0]", "at most the shots, 7"},
      {fit_with(kFlop + R"(,"at_s":[1,2])"), "bad_shape", "scan.at_s", "found 2 times, expected one for each of the 3 points"},
      {fit_with(kFlop + R"(,"references":{"bright_counts":1})"), "missing_field", "scan.references.bright_shots", "references hold"},
      {fit_with(kFlop + R"(,"references":{"bright_counts":9,"bright_shots":8,"dark_counts":0,"dark_shots":8})"), "bad_value", "scan.references.bright_counts", "at most the shots"},
      {fit_with(kFlop + R"(,"references":{"bright_photons":9,"bright_exposures":8,"dark_photons":0,"dark_exposures":8})"), "bad_shape", "scan.references", "another readout"},
      {fit_with(kFlop + R"(,"references":{"bright_photons":9,"bright_shots":8})"), "bad_shape", "scan.references", "the references of one readout"},
      {fit_with(kFlop + R"(,"references":{"bright_counts":9,"bright_shots":9.5,"dark_counts":0,"dark_shots":8})"), "bad_value", "scan.references.bright_shots", "whole number"},
  });
}

TEST_CASE("faults of the other kinds") {
  const std::string scan = R"({"drive":"red",)" + kFlop + "}";
  check({
      {top("fit", R"("scan":)" + scan + R"(,"scans":[)" + scan + "]"), "bad_shape", "scans", "expected one of them"},
      {top("fit", R"("scans":[])"), "bad_shape", "scans", "found no scans"},
      {top("fit", R"("scans":[)" + scan + R"(,{"drive":"blue",)" + kFlop + "}]"), "bad_value", "scans[1].drive", "the drive of the first scan"},
      {top("fit", R"("scans":[)" + scan + R"(,{"drive":"red","duration_s":[1],"counts":[2],"shots":1}])"), "bad_value", "scans[1].counts[0]", "at most the shots"},
      {fit_with(kFlop, R"(,"options":{"level":0.5})"), "bad_value", "options.level", "between 0.5 and 0.9999"},
      {fit_with(kFlop, R"(,"options":{"level":95})"), "bad_value", "options.level", "such as 0.95"},
      {fit_with(kFlop, R"(,"options":{"overlay_points":10001})"), "bad_value", "options.overlay_points", "from 0 to 10000"},
      {fit_with(kFlop, R"(,"options":{"overlay_points":2.5})"), "bad_value", "options.overlay_points", "found 2.5"},
      {fit_with(kFlop, R"(,"options":{"dynamics":[]})"), "bad_shape", "options.dynamics", "leave it out for all"},
      {fit_with(kFlop, R"(,"options":{"dynamics":["a b"]})"), "bad_value", "options.dynamics[0]", "the name of a candidate"},
      {fit_with(kFlop, R"(,"options":{"stor":true})"), "unknown_field", "options.stor", "`store`"},
      {top("begin", R"("scan":{"drive":"red","counts":[1]})"), "unknown_field", "scan.counts", "whose points follow by `points`"},
      {top("begin", R"("scan":{"drive":"red"})"), "missing_field", "scan.scan_name", "name their scan"},
      {top("begin", ""), "missing_field", "scan", "a message `begin` holds it"},
      {top("points", R"("duration_s":[1],"counts":[1],"shots":1)"), "missing_field", "scan_name", "holds it"},
      {top("points", R"("scan_name":"s","duration_s":[1],"counts":[2],"shots":1)"), "bad_value", "counts[0]", "at most the shots"},
      {top("points", R"("scan_name":"s","duration_s":[1],"counts":[],"shots":1)"), "bad_shape", "counts", "found 0 numbers"},
      {top("end", ""), "missing_field", "scan_name", "holds it"},
      {top("applied", R"("drive":"red")"), "missing_field", "pulses", "neither `pulses` nor `carrier_hz`"},
      {top("applied", R"("drive":"red","pulses":{})"), "bad_shape", "pulses", "found no pulses"},
      {top("applied", R"("drive":"red","pulses":{"flip":0})"), "bad_value", "pulses.flip", "a number above 0"},
      {top("applied", R"("drive":"red","pulses":{"a b":1})"), "bad_value", "pulses", "1 to 48 of A-Z a-z 0-9 _ -"},
      {top("applied", R"("pulses":{"flip":1})"), "missing_field", "drive", "holds it"},
      {top("history", ""), "missing_field", "drive", "holds it"},
      {top("history", R"("drive":"red","limit":0)"), "bad_value", "limit", "a whole number from 1 to 100000"},
      {top("next", R"("drive":"red")"), "missing_field", "shots", "holds it"},
      {top("next", R"("drive":"red","shots":0)"), "bad_value", "shots", "a whole number from 1"},
      {top("hold", R"("drive":"red","by":"Ada")"), "missing_field", "why", "holds it"},
      {top("hold", R"("drive":"red","by":"","why":"x")"), "bad_value", "by", "printable"},
      {top("release", R"("drive":"red")"), "missing_field", "by", "holds it"},
  });
}

TEST_CASE("a field or a name that comes twice") {
  // nlohmann's object keeps one of two equal keys, so these are bytes.
  const auto fault_of_bytes = [](const std::string& bytes) { return decode(bytes).request.error(); };
  const Fault json = fault_of_bytes(fit_with(kFlop + R"(,"drive":"red")"));
  CHECK(json.code == "bad_value");
  CHECK(json.where == "scan.drive");
  CHECK_THAT(json.message, Catch::Contains("found this field twice"));
  const Fault name = fault_of_bytes(fit_with(kFlop + R"(,"ambient":{"t":1,"t":1})"));
  CHECK(name.where == "scan.ambient.t");
  CHECK_THAT(name.message, Catch::Contains("found this name twice"));
  const Fault msgpack = fault_of_bytes("\x84\xa5proto\x01\xa4kind\xa6status\xa2id\xa1i\xa5proto\x01");
  CHECK(msgpack.code == "bad_value");
  CHECK(msgpack.where == "proto");
}

TEST_CASE("a faulty request keeps its id wherever that stands") {
  CHECK(decode(R"({"proto":1,"kind":"fit","scan":{"drive":7,"x":[[{}]]},"id":"late"})").id == "late");
  CHECK(decode(R"({"id":"early","proto":1,"kind":"fit","scan":{"drive":7}})").id == "early");
  CHECK(decode(R"({"foo":{"id":"inner"},"id":"outer"})").id == "outer");
  CHECK(decode(R"({"id":"first","foo":1,"id":"second"})").id == "first");
  CHECK(decode(R"({"id":"broken","foo":1,)").id == "broken");
  CHECK(decode(R"({"foo":1,"id":"two\nlines"})").id.empty());
}

TEST_CASE("a wrong version or kind is said before an unknown field") {
  CHECK(fault_of(R"({"new":1,"proto":2,"kind":"status","id":"i"})").code == "proto");
  CHECK(fault_of(R"({"new":1,"proto":1,"kind":"stat","id":"i"})").code == "unknown_kind");
  CHECK(fault_of(R"({"new":1,"proto":1,"kind":"status","id":"i"})").code == "unknown_field");
}
