// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/document.hpp"

#include <yaml-cpp/eventhandler.h>
#include <yaml-cpp/exceptions.h>
#include <yaml-cpp/mark.h>
#include <yaml-cpp/parser.h>

#include <algorithm>
#include <map>
#include <optional>
#include <set>
#include <sstream>
#include <utility>

#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

struct Stop {};    // ends the parse: a limit is passed
struct Second {};  // ends it at a second document: the first is complete

using Spot = std::pair<int, int>;  // line and column as the parser counts them, from 0

constexpr std::size_t kUnknownAliases = 20;  // the text is read anew for each

/// Builds the tree from the parser's events.
class Builder : public YAML::EventHandler {
 public:
  /// `aliases`: where the text had aliases without an anchor.
  Builder(Document& document, const std::vector<std::string_view>& lines, const DocumentLimits& limits, const std::set<Spot>& aliases)
      : document_(document), lines_(lines), limits_(limits), aliases_(aliases) {}

  void OnDocumentStart(const YAML::Mark& mark) override {
    if (++documents_ == 1) return;
    refuse(mark, "found a second document, or text behind the first, expected one document");
    throw Second{};
  }
  void OnDocumentEnd() override {}

  void OnNull(const YAML::Mark& mark, YAML::anchor_t anchor) override {
    if (aliases_.count({mark.line, mark.column}) > 0) return OnAlias(mark, 0);
    leaf(Node::Kind::nothing, mark, "?", anchor, {});
  }

  void OnAlias(const YAML::Mark& mark, YAML::anchor_t) override {
    refuse(mark, "found an alias (*), expected the value itself");
    leaf(Node::Kind::nothing, mark, "?", 0, "*");
  }

  void OnScalar(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor, const std::string& value) override {
    leaf(Node::Kind::scalar, mark, tag, anchor, value);
  }

  void OnSequenceStart(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                       YAML::EmitterStyle::value style) override {
    open(Node::Kind::list, mark, tag, anchor, style);
  }
  void OnSequenceEnd() override { close(); }

  void OnMapStart(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                  YAML::EmitterStyle::value style) override {
    open(Node::Kind::map, mark, tag, anchor, style);
  }
  void OnMapEnd() override { close(); }

  /// After a fault of syntax: what is open becomes part of the tree.
  void close_all() {
    while (!open_.empty()) close();
  }

  int documents() const { return documents_; }

 private:
  struct Level {
    Node node;
    bool has_key = false;  // of a map: a key was read, its value is next
    std::string key;
    YAML::Mark key_mark;
    std::map<std::string, int, std::less<>> seen;  // keys and their lines
  };

  void place(const YAML::Mark& mark, int& line, int& column) const {
    line = mark.line + 1;
    const std::string_view text =
        mark.line >= 0 && static_cast<std::size_t>(mark.line) < lines_.size() ? lines_[mark.line] : "";
    column = position(text, static_cast<std::size_t>(std::max(mark.column, 0))).column;
  }

  std::string path() const {
    std::string path;
    for (const Level& level : open_) {
      if (level.node.kind == Node::Kind::list) path += "[" + std::to_string(level.node.children.size()) + "]";
      else if (level.has_key) path += (path.empty() ? "" : ".") + level.key;
    }
    return path;
  }

  void refuse(const YAML::Mark& mark, std::string message) {
    Diagnosis fault{0, 0, path(), std::move(message)};
    place(mark, fault.line, fault.column);
    document_.faults.push_back(std::move(fault));
  }

  void check_extras(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor) {
    if (anchor != 0) refuse(mark, "found an anchor (&), expected the value alone");
    if (!tag.empty() && tag != "?" && tag != "!")
      refuse(mark, "found the tag " + wire::in_quotes(tag) + ", expected the value alone");
  }

  /// A quoted scalar ends with its quote. (The parser takes the end of the text for it: version 0.7, ScanScalar.)
  void check_quotes(const YAML::Mark& mark) {
    const auto line = static_cast<std::size_t>(mark.line);
    if (line >= lines_.size() || static_cast<std::size_t>(mark.column) >= lines_[line].size()) return;
    const char* begin = lines_[line].data() + mark.column;
    const std::string_view rest(begin, static_cast<std::size_t>(lines_.back().data() + lines_.back().size() - begin));
    if (rest.front() != '"' && rest.front() != '\'') return;
    for (std::size_t at = 1; at < rest.size(); ++at) {
      if (rest.front() == '"' && rest[at] == '\\') ++at;
      else if (rest.substr(at, 2) == "''" && rest.front() == '\'') ++at;
      else if (rest[at] == rest.front()) return;
    }
    refuse(mark, "found an opening quotation mark without its end, expected two");
  }

  void count(const YAML::Mark& mark) {
    if (++nodes_ <= limits_.nodes) return;
    refuse(mark, "found more than " + std::to_string(limits_.nodes) + " values, expected fewer");
    throw Stop{};
  }

  bool key_is_next() const { return !open_.empty() && open_.back().node.kind == Node::Kind::map && !open_.back().has_key; }

  void leaf(Node::Kind kind, const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
            const std::string& text) {
    check_extras(mark, tag, anchor);
    count(mark);
    if (tag == "!") check_quotes(mark);
    if (key_is_next()) return take_key(kind, mark, text);
    Node node;
    node.kind = kind;
    node.text = text;
    node.plain = tag != "!";
    place(mark, node.line, node.column);
    attach(std::move(node));
  }

  void take_key(Node::Kind kind, const YAML::Mark& mark, const std::string& text) {
    Level& level = open_.back();
    if (kind != Node::Kind::scalar) refuse(mark, "found no key, expected a word before the colon");
    level.has_key = true;
    level.key = text;
    level.key_mark = mark;
    const auto [seen, fresh] = level.seen.emplace(text, mark.line + 1);
    if (!fresh)
      refuse(mark, "found the key " + wire::in_quotes(text) + " a second time (first in line " +
                       std::to_string(seen->second) + "), expected it once");
  }

  void open(Node::Kind kind, const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
            YAML::EmitterStyle::value style) {
    check_extras(mark, tag, anchor);
    count(mark);
    if (static_cast<int>(open_.size()) >= limits_.depth) {
      refuse(mark, "found more than " + std::to_string(limits_.depth) + " levels, expected fewer");
      throw Stop{};
    }
    if (key_is_next()) {
      refuse(mark, "found a list or a map as a key, expected a word");
      throw Stop{};
    }
    Level level;
    level.node.kind = kind;
    level.node.inline_style = style == YAML::EmitterStyle::Flow;
    place(mark, level.node.line, level.node.column);
    open_.push_back(std::move(level));
  }

  void close() {
    Node node = std::move(open_.back().node);
    open_.pop_back();
    attach(std::move(node));
  }

  void attach(Node node) {
    if (open_.empty()) {
      document_.root = std::move(node);
      return;
    }
    Level& level = open_.back();
    if (level.node.kind == Node::Kind::map) {
      if (!level.has_key) return;  // only after a fault of syntax
      node.key = std::move(level.key);
      place(level.key_mark, node.key_line, node.key_column);
      if (node.kind == Node::Kind::nothing) node.line = node.key_line, node.column = node.key_column;
      level.has_key = false;
    }
    level.node.children.push_back(std::move(node));
  }

  Document& document_;
  const std::vector<std::string_view>& lines_;
  const DocumentLimits& limits_;
  const std::set<Spot>& aliases_;
  std::vector<Level> open_;
  std::size_t nodes_ = 0;
  int documents_ = 0;
};

std::vector<std::string_view> split_lines(std::string_view text) {
  std::vector<std::string_view> lines;
  for (std::size_t begin = 0; begin <= text.size();) {
    const std::size_t end = std::min(text.find('\n', begin), text.size());
    lines.push_back(text.substr(begin, end - begin));
    begin = end + 1;
  }
  return lines;
}

/// What the parser disliked, with the cause that is usual where it is known.
std::string syntax_message(const std::string& reason, std::string_view line) {
  const std::size_t text = line.find_first_not_of(" \t");
  if (line.substr(0, text).find('\t') != std::string_view::npos) return "found a tab before the text, expected spaces";
  if (reason.find("anchor") != std::string::npos) return "found an alias (*), expected the value itself";
  return "found text that is not YAML (" + reason +
         "), expected YAML; look at brackets, quotes, colons and indentation, also above";
}

/// Puts nothing in the place of the alias at this spot, so that what stands behind can be read; false where there is none.
bool blank_alias(const Spot& spot, const std::vector<std::string_view>& lines, std::string& text) {
  if (spot.first < 0 || spot.second < 0 || static_cast<std::size_t>(spot.first) >= lines.size()) return false;
  std::size_t at = static_cast<std::size_t>(spot.second);
  for (int line = 0; line < spot.first; ++line) at += lines[static_cast<std::size_t>(line)].size() + 1;
  if (at >= text.size() || text[at] != '*') return false;
  text[at] = '~';
  for (++at; at < text.size() && std::string_view(" \t\r\n,[]{}").find(text[at]) == std::string_view::npos; ++at) text[at] = ' ';
  return true;
}

/// One reading of the text; the spot of an alias without an anchor, where one ended it.
std::optional<Spot> parse_once(const std::string& text, const std::vector<std::string_view>& lines, const DocumentLimits& limits,
                               const std::set<Spot>& aliases, Document& document) {
  Builder builder(document, lines, limits, aliases);
  std::optional<Spot> alias;
  std::istringstream stream(text);
  try {
    YAML::Parser parser(stream);
    while (parser.HandleNextDocument(builder)) {
    }
    if (builder.documents() > 0) return std::nullopt;
    document.faults.push_back({1, 1, "", "found nothing, expected a YAML document"});
  } catch (const Second&) {
    return std::nullopt;
  } catch (const Stop&) {
  } catch (const YAML::Exception& error) {
    const int line = std::max(error.mark.line, 0);
    const std::string_view there = static_cast<std::size_t>(line) < lines.size() ? lines[line] : std::string_view();
    const int column = position(there, static_cast<std::size_t>(std::max(error.mark.column, 0))).column;
    document.faults.push_back({line + 1, column, "", syntax_message(error.msg, there)});
    if (error.msg.find("anchor") != std::string::npos) alias = Spot{error.mark.line, error.mark.column};
  }
  document.complete = false;
  builder.close_all();
  return alias;
}

void parse(std::string text, const DocumentLimits& limits, Document& document) {
  const std::string original = text;
  const auto lines = split_lines(original);
  std::set<Spot> aliases;
  for (;;) {
    document = Document{};
    const auto alias = parse_once(text, lines, limits, aliases, document);
    if (!alias || aliases.size() >= kUnknownAliases || !blank_alias(*alias, lines, text)) return;
    aliases.insert(*alias);
  }
}

/// Length of the UTF-8 character at the start of `text`, which is not empty; 0 where it is none, or NUL.
std::size_t character_length(std::string_view text) {
  if (text.front() == '\0') return 0;
  for (std::size_t length = 1; length <= std::min<std::size_t>(4, text.size()); ++length)
    if (wire::is_utf8(text.substr(0, length))) return length;
  return 0;
}

}  // namespace

const Node* Node::find(std::string_view name) const {
  const auto child = std::find_if(children.begin(), children.end(), [&](const Node& node) { return node.key == name; });
  return kind == Kind::map && child != children.end() ? &*child : nullptr;
}

Position position(std::string_view text, std::size_t offset) {
  Position at;
  for (const char c : text.substr(0, std::min(offset, text.size()))) {
    if (c == '\n') ++at.line, at.column = 1;
    else if ((static_cast<unsigned char>(c) & 0xC0u) != 0x80u) ++at.column;
  }
  return at;
}

std::size_t first_bad_byte(std::string_view text) {
  for (std::size_t at = 0; at < text.size();) {
    const std::size_t length = character_length(text.substr(at));
    if (length == 0) return at;
    at += length;
  }
  return std::string_view::npos;
}

Document read_document(const std::string& text, const DocumentLimits& limits) {
  Document document;
  document.complete = false;
  if (text.size() > limits.bytes) {
    document.faults.push_back(
        {0, 0, "", "found " + std::to_string(text.size()) + " bytes, expected at most " + std::to_string(limits.bytes)});
    return document;
  }
  if (const std::size_t bad = first_bad_byte(text); bad != std::string_view::npos) {
    const Position at = position(text, bad);
    document.faults.push_back({at.line, at.column, "", "found a byte that is not text in UTF-8, expected UTF-8"});
    return document;
  }
  document.complete = true;
  parse(text.starts_with("\xEF\xBB\xBF") ? text.substr(3) : text, limits, document);
  return document;
}

}  // namespace halfturn::config
