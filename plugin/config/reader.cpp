// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/reader.hpp"

#include <algorithm>
#include <charconv>

#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

bool holds(std::span<const std::string_view> words, std::string_view word) {
  return std::find(words.begin(), words.end(), word) != words.end();
}

/// What is often behind an unknown key, where its look gives it away.
std::string hint(const Node& map, const Node& child) {
  if (child.kind != Node::Kind::nothing) return {};
  if (child.key.find(':') != std::string::npos) return "; a space must follow the colon";
  if (map.inline_style) return "; inside { } a comma ends a value unless the value is in quotes";
  return {};
}

}  // namespace

Place Place::child(const Node& child) const {
  if (node->kind == Node::Kind::list) return {&child, path + "[" + std::to_string(&child - node->children.data()) + "]"};
  return {&child, path.empty() ? child.key : path + "." + child.key};
}

Place Place::operator[](std::string_view key) const {
  const Node* found = node == nullptr ? nullptr : node->find(key);
  return found == nullptr ? Place{} : child(*found);
}

void Reader::fault(const Place& at, std::string message) {
  if (at.node->kind == Node::Kind::nothing && at.node->text == "*") return;  // an alias, which was a fault already
  faults.push_back({at.node->line, at.node->column, at.path, std::move(message)});
}

void Reader::fault_at_key(const Place& at, std::string message) {
  faults.push_back({at.node->key_line, at.node->key_column, at.path, std::move(message)});
}

bool Reader::map(const Place& at, const Keys& keys) {
  if (!at) return false;
  if (at.node->kind != Node::Kind::map) {
    std::vector<std::string_view> few(keys.known.begin(),
                                      keys.known.begin() + std::min<std::ptrdiff_t>(3, std::ssize(keys.known)));
    fault(at, "found " + found(*at.node) + ", expected a map with keys such as " + listed(few));
    return false;
  }
  for (const Node& child : at.node->children) {
    if (holds(keys.known, child.key)) continue;
    const Place place = at.child(child);
    const std::string key = "the key " + wire::in_quotes(child.key);
    if (holds(keys.later, child.key))
      fault_at_key(place, "found " + key + ", which is not available in this version, expected none");
    else
      fault_at_key(place, "found the unknown " + key.substr(4) + ", expected a known key: the nearest is " +
                              wire::in_quotes(wire::nearest(child.key, keys.known)) + hint(*at.node, child));
  }
  return true;
}

bool Reader::map_of_names(const Place& at, std::string_view what) {
  if (!at) return false;
  if (at.node->kind != Node::Kind::map || at.node->children.empty()) {
    const bool empty = at.node->kind == Node::Kind::map;
    fault(at, "found " + (empty ? "an empty map" : found(*at.node)) + ", expected at least one " + std::string(what) +
                  " by its name");
    return false;
  }
  for (const Node& child : at.node->children)
    if (!wire::is_name(child.key))
      fault_at_key(at.child(child),
                   "found the name " + wire::in_quotes(child.key) + ", expected 1 to 48 of A-Z a-z 0-9 _ -");
  return true;
}

bool Reader::list(const Place& at, std::string_view expected) {
  if (!at) return false;
  if (at.node->kind == Node::Kind::list && !at.node->children.empty()) return true;
  fault(at, "found " + (at.node->kind == Node::Kind::list ? "an empty list" : found(*at.node)) + ", expected " +
                std::string(expected));
  return false;
}

Place Reader::need(const Place& map, std::string_view key, std::string_view expected) {
  const Place child = map[key];
  if (!child) {
    const std::string path = map.path.empty() ? std::string(key) : map.path + "." + std::string(key);
    const bool named = map.node->key_line > 0;
    faults.push_back({named ? map.node->key_line : map.node->line, named ? map.node->key_column : map.node->column, path,
                      "found nothing, expected " + std::string(expected)});
  }
  return child;
}

std::optional<double> Reader::quantity(const Place& at, Dimension dimension, const Range& range) {
  if (!at) return std::nullopt;
  if (at.node->kind != Node::Kind::scalar) {
    fault(at, "found " + found(*at.node) + ", expected " + expected(dimension));
    return std::nullopt;
  }
  const auto value = config::quantity(at.node->text, dimension);
  if (!value) {
    fault(at, value.error().message);
    return std::nullopt;
  }
  if (*value < range.low || *value > range.high || (range.low_is_open && *value == range.low)) {
    const std::string what(expected(dimension).substr(0, expected(dimension).find(" with")));
    fault(at, "found " + wire::in_quotes(at.node->text) + ", expected " + what + " " + std::string(range.words));
    return std::nullopt;
  }
  return *value;
}

std::optional<std::pair<double, double>> Reader::pair(const Place& at, Dimension first, const Range& first_range,
                                                      Dimension second, const Range& second_range,
                                                      std::string_view expected) {
  if (!at) return std::nullopt;
  if (at.node->kind != Node::Kind::list || at.node->children.size() != 2) {
    const bool list = at.node->kind == Node::Kind::list;
    fault(at, "found " + (list ? "a list of " + std::to_string(at.node->children.size()) : found(*at.node)) + ", expected " +
                  std::string(expected));
    return std::nullopt;
  }
  const auto a = quantity(at.child(at.node->children[0]), first, first_range);
  const auto b = quantity(at.child(at.node->children[1]), second, second_range);
  if (!a || !b) return std::nullopt;
  return std::pair(*a, *b);
}

std::optional<long long> Reader::integer(const Place& at, long long low, long long high) {
  if (!at) return std::nullopt;
  const std::string& text = at.node->text;
  long long value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  const bool whole = at.node->kind == Node::Kind::scalar && error == std::errc() && end == text.data() + text.size();
  const bool octal = text.size() > 1 && text[0] == '0';
  if (whole && !octal && value >= low && value <= high) return value;
  fault(at, "found " + found(*at.node) + ", expected " +
                (low == high ? std::to_string(low)
                             : "a whole number from " + std::to_string(low) + " to " + std::to_string(high)));
  return std::nullopt;
}

std::optional<bool> Reader::flag(const Place& at) {
  if (!at) return std::nullopt;
  const bool plain = at.node->kind == Node::Kind::scalar && at.node->plain;
  if (plain && at.node->text == "true") return true;
  if (plain && at.node->text == "false") return false;
  fault(at, "found " + found(*at.node) + ", expected true or false, without quotes");
  return std::nullopt;
}

std::optional<std::string> Reader::text(const Place& at, std::string_view expected) {
  if (!at) return std::nullopt;
  if (at.node->kind == Node::Kind::scalar && !at.node->text.empty()) return at.node->text;
  fault(at, "found " + found(*at.node) + ", expected " + std::string(expected));
  return std::nullopt;
}

std::optional<std::size_t> Reader::choice(const Place& at, std::span<const std::string_view> words,
                                          std::span<const std::string_view> later_words) {
  if (!at) return std::nullopt;
  const Node& node = *at.node;
  if (node.kind == Node::Kind::scalar) {
    const auto word = std::find(words.begin(), words.end(), node.text);
    if (word != words.end()) return static_cast<std::size_t>(word - words.begin());
    if (holds(later_words, node.text)) {
      fault(at,
            "found " + wire::in_quotes(node.text) + ", which is not available in this version, expected " + listed(words));
      return std::nullopt;
    }
  }
  fault(at, "found " + found(node) + ", expected " + listed(words));
  return std::nullopt;
}

std::string found(const Node& node) {
  switch (node.kind) {
    case Node::Kind::nothing: return "nothing";
    case Node::Kind::scalar: return wire::in_quotes(node.text);
    case Node::Kind::list: return "a list";
    case Node::Kind::map: return "a map";
  }
  return "nothing";
}

std::string listed(std::span<const std::string_view> words) {
  std::string out;
  for (std::size_t i = 0; i < words.size(); ++i)
    out += std::string(i == 0 ? "" : i + 1 == words.size() ? " or " : ", ") + std::string(words[i]);
  return out;
}

}  // namespace halfturn::config
