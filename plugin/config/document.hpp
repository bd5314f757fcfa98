// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "plugin/config/diagnosis.hpp"

/// One YAML document as a tree that knows where everything stands, and nothing of what it means.
namespace halfturn::config {

struct Node {
  enum class Kind { nothing, scalar, list, map };
  Kind kind = Kind::nothing;
  std::string text;           // of a scalar, as written, never interpreted; of `nothing`, `*` where an alias stood
  bool plain = false;         // a scalar without quotation marks
  bool inline_style = false;  // a list or map in brackets or braces
  int line = 0, column = 0;   // from 1, in characters; of `nothing`, where its key stands
  std::string key;            // of a child of a map
  int key_line = 0, key_column = 0;
  std::vector<Node> children;

  const Node* find(std::string_view name) const;  // child of a map; nullptr where there is none
};

struct DocumentLimits {
  std::size_t bytes = std::size_t{1} << 20;
  std::size_t nodes = 20'000;
  int depth = 16;
};

/// What was read. Where the text cannot be followed to its end, the last fault says why, and `root` holds what came before.
/// `root` is complete beside anchors, tags, duplicate keys (all of them are children), aliases (nothing in their place) and a
/// second document (left out).
struct Document {
  Node root;
  std::vector<Diagnosis> faults;
  bool complete = true;
};

/// Reads YAML 1.2 in UTF-8. Faults: text that is not YAML or not UTF-8, no document or several, duplicate keys, keys that
/// are not scalars, anchors, aliases, tags, and what passes the limits. Scalars stay text: `0123`, `y` and `1e3` mean
/// nothing here.
Document read_document(const std::string& text, const DocumentLimits& limits = {});

/// The place of the byte at `offset`, both from 1, the column in characters.
struct Position {
  int line = 1, column = 1;
};
Position position(std::string_view text, std::size_t offset);

/// The offset of the first byte that is not well-formed UTF-8, or is NUL; npos where there is none.
std::size_t first_bad_byte(std::string_view text);

}  // namespace halfturn::config
