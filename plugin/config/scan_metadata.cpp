// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/scan_metadata.hpp"

#include <algorithm>

#include "plugin/wire/check.hpp"
#include "plugin/wire/time.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

using std::string_view;

constexpr string_view kKeys[] = {"scan_name",  "drive",   "taken_at", "pulse_s", "drive_amplitude", "carrier_hz", "prepared",
                                 "references", "ambient", "at_s",     "shots",   "sigma",           "exposures"};
constexpr string_view kColumns[] = {"duration_s", "detuning_hz", "amplitude", "counts", "signal", "photons", "sites"};
constexpr string_view kCounts[] = {"bright_counts", "bright_shots", "dark_counts", "dark_shots"};
constexpr string_view kPhotons[] = {"bright_photons", "bright_exposures", "dark_photons", "dark_exposures"};
constexpr string_view kReferences[] = {"bright_counts",  "bright_shots",     "dark_counts",  "dark_shots",
                                       "bright_photons", "bright_exposures", "dark_photons", "dark_exposures"};

bool holds(std::span<const string_view> words, string_view word) {
  return std::find(words.begin(), words.end(), word) != words.end();
}

bool is_key(string_view text) {
  const auto fits = [](char c) {
    return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '_' || c == '.' || c == '-';
  };
  return !text.empty() && std::all_of(text.begin(), text.end(), fits);
}

/// Whether a word is so near to a key that it was meant as one: two letters off, or its beginning of at least four letters
/// (`pulse`, `referneces`). Words such as `note`, `date` and `lab` are further away.
bool nearly(string_view word, string_view key) {
  return wire::edit_distance(word, key) <= std::min<std::size_t>(2, key.size() / 3) ||
         (word.size() >= 4 && key.starts_with(word));
}

void shift(Node& node, int line, int column) {
  node.line = line, node.column += column;
  node.key_line = line, node.key_column += column;
  for (Node& child : node.children) shift(child, line, column);
}

/// The value of a key: text as it stands, or what is in braces or brackets.
Node value_node(Reader& reader, string_view text, int line, int column) {
  Node node;
  node.kind = text.empty() ? Node::Kind::nothing : Node::Kind::scalar;
  node.text = text;
  node.line = line, node.column = column;
  const bool quotes = text.size() >= 2 && (text.front() == '"' || text.front() == '\'') && text.back() == text.front();
  if (quotes) node.text = text.substr(1, text.size() - 2);
  if (!text.starts_with('{') && !text.starts_with('[')) return node;
  Document document = read_document(std::string(text), {std::size_t{16} << 20, 200'000, 4});
  for (Diagnosis& one : document.faults)
    reader.faults.push_back({line, column + std::max(one.column, 1) - 1, one.path, one.message});
  if (!document.complete) return node;
  shift(document.root, line, column - 1);
  return std::move(document.root);
}

/// Puts a value under its key; `references.bright_counts` goes into the map `references`.
void place(Reader& reader, Node& map, string_view key, Node value, int column, const std::string& path) {
  const std::size_t dot = key.find('.');
  const string_view head = key.substr(0, dot);
  auto child = std::find_if(map.children.begin(), map.children.end(), [&](const Node& node) { return node.key == head; });
  const bool fresh = child == map.children.end();
  if (!fresh && (dot == string_view::npos || child->kind != Node::Kind::map)) {
    reader.faults.push_back(
        {value.line, column, path,
         "found the key a second time (first in line " + std::to_string(child->key_line) + "), expected it once"});
    return;
  }
  const int line = value.line;
  if (fresh) {
    Node node = dot == string_view::npos ? std::move(value) : Node{};
    if (dot != string_view::npos) node.kind = Node::Kind::map, node.line = line, node.column = column;
    node.key = head, node.key_line = line, node.key_column = column;
    map.children.push_back(std::move(node));
    child = map.children.end() - 1;
  }
  if (dot != string_view::npos) place(reader, *child, key.substr(dot + 1), std::move(value), column, path);
}

void read_comment(Reader& reader, Node& root, const Comment& comment) {
  const std::size_t lead = comment.text.find_first_not_of(' ');
  const std::size_t colon = comment.text.find(':');
  if (colon == std::string::npos) return;
  string_view key = string_view(comment.text).substr(0, colon);
  while (key.ends_with(' ')) key.remove_suffix(1);
  const bool spaced = colon + 1 == comment.text.size() || comment.text[colon + 1] == ' ' || comment.text[colon + 1] == '\t';
  const string_view head = key.substr(0, key.find('.'));
  if (lead == std::string::npos || !is_key(key)) return;
  if (holds(kColumns, key)) {
    reader.faults.push_back(
        {comment.line, comment.column, std::string(key), "found a column above the header, expected it in the table"});
    return;
  }
  const bool known = holds(kKeys, head) && (head == key || head == "references" || head == "ambient");
  if (!known) {
    const string_view nearest = wire::nearest(head, kKeys);
    if (nearly(head, nearest))
      reader.faults.push_back({comment.line, comment.column, std::string(key),
                               "found an unknown key, expected a key of a scan: the nearest is " + wire::in_quotes(nearest) +
                                   " (a remark has no colon after its first word)"});
    return;
  }
  std::size_t begin = comment.text.find_first_not_of(" \t", colon + 1);
  if (begin == std::string::npos) begin = comment.text.size();
  const int offset = position(comment.text, begin).column - 1;
  if (!spaced)
    reader.faults.push_back(
        {comment.line, comment.column, std::string(key), "found no space after the colon, expected one"});
  Node value = value_node(reader, string_view(comment.text).substr(begin), comment.line, comment.column + offset);
  place(reader, root, key, std::move(value), comment.column, std::string(key));
}

std::optional<double> whole(Reader& reader, const Place& at) {
  const auto value = reader.quantity(at, Dimension::number, kNotNegative);
  if (value && !wire::is_count(*value))
    reader.fault(at, "found " + wire::in_quotes(at.node->text) + ", expected a whole number");
  return value;
}

void read_references(Reader& reader, const Place& at, Metadata& out) {
  if (!at || !reader.map(at, {kReferences})) return;
  const bool photons = std::any_of(std::begin(kPhotons), std::end(kPhotons), [&](string_view key) { return bool(at[key]); });
  const bool counts = std::any_of(std::begin(kCounts), std::end(kCounts), [&](string_view key) { return bool(at[key]); });
  if (photons && counts) return reader.fault(at, "found counts and photons, expected one of them");
  double numbers[4] = {};
  for (std::size_t i = 0; i < 4; ++i) {
    const string_view key = photons ? kPhotons[i] : kCounts[i];
    const Place child = reader.need(at, key, "a number");
    numbers[i] = whole(reader, child).value_or(0.0);
    if (child && i % 2 == 1 && !photons && numbers[i - 1] > numbers[i])
      reader.fault(child, "found more counts than shots, expected at most as many");
  }
  out.scan.references = wire::References{numbers[0], numbers[1], numbers[2], numbers[3]};
  out.references_kind = photons ? wire::ReadoutKind::poisson : wire::ReadoutKind::binomial;
}

void read_ambient(Reader& reader, const Place& at, wire::Scan& scan) {
  if (!at) return;
  if (at.node->kind != Node::Kind::map)
    return reader.fault(at, "found " + found(*at.node) + ", expected a map of names and numbers");
  for (const Node& child : at.node->children)
    if (const auto value = reader.quantity(at.child(child), Dimension::number)) scan.ambient[child.key] = *value;
}

void read_times(Reader& reader, const Place& top, wire::Scan& scan) {
  if (const auto text = reader.text(top["taken_at"], "a time such as 2026-02-03T04:05:06Z")) {
    scan.taken_at = wire::parse_time(*text);
    if (!scan.taken_at)
      reader.fault(top["taken_at"], "found " + wire::in_quotes(*text) + ", expected a time such as 2026-02-03T04:05:06Z");
  }
  const Place at = top["at_s"];
  if (!at || !reader.list(at, "a list of seconds, one a point")) return;
  for (const Node& child : at.node->children)
    scan.at_s.push_back(reader.quantity(at.child(child), Dimension::number).value_or(0.0));
}

void read_names(Reader& reader, const Place& top, wire::Scan& scan) {
  if (const auto name = reader.text(top["scan_name"], "a name")) {
    scan.scan_name = *name;
    if (!wire::is_printable(*name, 128))
      reader.fault(top["scan_name"], "found " + wire::in_quotes(*name) + ", expected 1 to 128 printable characters");
  }
  if (const auto name = reader.text(top["drive"], "the name of a drive")) {
    scan.drive = *name;
    if (!wire::is_name(*name))
      reader.fault(top["drive"], "found " + wire::in_quotes(*name) + ", expected 1 to 48 of A-Z a-z 0-9 _ -");
  }
}

}  // namespace

Metadata read_metadata(Reader& reader, const std::vector<Comment>& comments) {
  Metadata out;
  out.node.kind = Node::Kind::map;
  for (const Comment& comment : comments) read_comment(reader, out.node, comment);
  static constexpr string_view kPrepared[] = {"g", "e"};
  const Place top{&out.node, ""};
  read_names(reader, top, out.scan);
  read_times(reader, top, out.scan);
  out.scan.pulse_s = reader.quantity(top["pulse_s"], Dimension::number, kPositive);
  out.scan.drive_amplitude = reader.quantity(top["drive_amplitude"], Dimension::number, kPositive);
  out.scan.carrier_hz = reader.quantity(top["carrier_hz"], Dimension::number);
  out.scan.prepared_excited = reader.choice(top["prepared"], kPrepared).value_or(0) == 1;
  read_references(reader, top["references"], out);
  read_ambient(reader, top["ambient"], out.scan);
  out.shots = whole(reader, top["shots"]);
  out.sigma = reader.quantity(top["sigma"], Dimension::number, kPositive);
  out.exposures = whole(reader, top["exposures"]);
  return out;
}

}  // namespace halfturn::config
