// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/configuration.hpp"

#include <algorithm>
#include <filesystem>
#include <tuple>

#include "plugin/config/file.hpp"
#include "plugin/config/keys.hpp"
#include "plugin/config/sections.hpp"
#include "plugin/wire/digest.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

constexpr std::string_view kDefaultLog = "halfturn.db";

std::string read_log(Reader& reader, const Place& at, const std::string& folder) {
  const std::string name = at ? reader.text(at, "the path of a file").value_or("") : std::string(kDefaultLog);
  if (name.starts_with("~") || name.ends_with("/"))
    reader.fault(at, "found " + wire::in_quotes(name) + ", expected the path of a file, without ~");
  return folder.empty() ? name : (std::filesystem::path(folder) / name).string();
}

std::map<std::string, Drive> read_drives(Reader& reader, const Place& at) {
  std::map<std::string, Drive> drives;
  if (!reader.map_of_names(at, "drive")) return drives;
  for (const Node& child : at.node->children) drives.emplace(child.key, read_drive(reader, at.child(child)));
  return drives;
}

Configuration read_top(Reader& reader, const Place& top, const std::string& folder) {
  Configuration out;
  if (!reader.map(top, {keys::kTop, keys::kTopLater})) return out;
  reader.integer(reader.need(top, "format", "format: 1"), 1, 1);
  out.insecure = reader.flag(top["insecure"]).value_or(false);
  out.sockets = read_sockets(reader, top["sockets"], out.insecure);
  out.log_path = read_log(reader, top["log"], folder);
  out.drives = read_drives(reader, reader.need(top, "drives", "at least one drive by its name"));
  return out;
}

void sort(std::vector<Diagnosis>& faults) {
  std::stable_sort(faults.begin(), faults.end(), [](const Diagnosis& a, const Diagnosis& b) {
    return std::tie(a.line, a.column) < std::tie(b.line, b.column);
  });
}

}  // namespace

Reading read(const std::string& text, const std::string& folder) {
  Reading reading;
  const Document document = read_document(text);
  reading.faults = document.faults;
  if (document.complete) {
    Reader reader;
    Configuration configuration = read_top(reader, {&document.root, ""}, folder);
    reading.faults.insert(reading.faults.end(), reader.faults.begin(), reader.faults.end());
    configuration.text = text;
    configuration.fingerprint = wire::fingerprint(text);
    if (reading.faults.empty()) reading.configuration = std::move(configuration);
  }
  sort(reading.faults);
  return reading;
}

Reading read_file(const std::string& path) {
  const auto text = file_text(path, DocumentLimits{}.bytes);
  if (!text) {
    Reading reading;
    reading.faults.push_back({0, 0, "", text.error().message});
    return reading;
  }
  return read(*text, std::filesystem::path(path).parent_path().string());
}

std::string to_text(const Diagnosis& diagnosis, const std::string& file) {
  std::string out = file;
  if (diagnosis.line > 0) out += ":" + std::to_string(diagnosis.line) + ":" + std::to_string(diagnosis.column);
  if (!diagnosis.path.empty()) out += ": " + diagnosis.path;
  return out + ": " + diagnosis.message;
}

}  // namespace halfturn::config
