// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/document.hpp"

#include "tests/support/catch.hpp"

using namespace halfturn::config;

namespace {

std::string faults(const std::string& text, const DocumentLimits& limits = {}) {
  std::string out;
  for (const Diagnosis& one : read_document(text, limits).faults) out += to_text(one, "f") + "\n";
  return out;
}

}  // namespace

TEST_CASE("A document knows where its values stand") {
  const Document document = read_document("a: 0123\nb: {c: [y, \"2\"], d: }\n");
  REQUIRE(document.faults.empty());
  REQUIRE(document.root.children.size() == 2);
  const Node& a = document.root.children[0];
  CHECK(a.key == "a");
  CHECK(a.text == "0123");
  CHECK(a.plain);
  CHECK(a.line == 1);
  CHECK(a.column == 4);
  const Node* c = document.root.find("b")->find("c");
  REQUIRE(c != nullptr);
  CHECK(c->kind == Node::Kind::list);
  CHECK(c->inline_style);
  CHECK(c->children[0].text == "y");
  CHECK(c->children[1].text == "2");
  CHECK_FALSE(c->children[1].plain);
  CHECK(c->children[1].column == 12);
  const Node* d = document.root.find("b")->find("d");
  REQUIRE(d != nullptr);
  CHECK(d->kind == Node::Kind::nothing);
  CHECK(d->column == 18);
}

TEST_CASE("Columns count characters, not bytes") {
  const Document document = read_document("a: [\"\u00b5\u03bc\u20ac\", x]\r\nb: z\r\n");
  REQUIRE(document.faults.empty());
  CHECK(document.root.find("a")->children[1].column == 12);
  CHECK(document.root.find("b")->line == 2);
  CHECK(read_document("\xEF\xBB\xBF"
                      "a: 1")
            .root.find("a")
            ->column == 4);
}

TEST_CASE("What YAML allows and a configuration must not have is found, all at once") {
  CHECK(faults("a: 1\nb: 2\na: 3\nb: 4\n") ==
        "f:3:1: a: found the key \"a\" a second time (first in line 1), expected it once\n"
        "f:4:1: b: found the key \"b\" a second time (first in line 2), expected it once\n");
  CHECK(faults("a: 1\n---\nb: 2\n") == "f:2:1: found a second document, or text behind the first, expected one document\n");
  CHECK(faults("a: &x 1\nb: *x\n") ==
        "f:1:4: a: found an anchor (&), expected the value alone\n"
        "f:2:4: b: found an alias (*), expected the value itself\n");
  CHECK(faults("b: *x\n") == "f:1:4: b: found an alias (*), expected the value itself\n");
  CHECK(faults("a: !!int 3\n") == "f:1:4: a: found the tag \"tag:yaml.org,2002:int\", expected the value alone\n");
  CHECK(faults("a: !x {b: 1}\n") == "f:1:4: a: found the tag \"!x\", expected the value alone\n");
  CHECK(faults("? [a, b]\n: 1\n") == "f:1:3: found a list or a map as a key, expected a word\n");
  CHECK(faults("{: 1}\n") == "f:1:2: found no key, expected a word before the colon\n");
  CHECK(faults("") == "f:1:1: found nothing, expected a YAML document\n");
  CHECK(faults("# only a remark\n") == "f:1:1: found nothing, expected a YAML document\n");
  CHECK(faults("a: 1\n\tb: 2\n") == "f:2:1: found a tab before the text, expected spaces\n");
  CHECK(faults("a: [1, 2\n") ==
        "f:2:1: found text that is not YAML (end of sequence flow not found), expected YAML; look at brackets, "
        "quotes, colons and indentation, also above\n");
  const std::string open_quote = "found an opening quotation mark without its end, expected two\n";
  CHECK(faults("a: \"x\n") == "f:1:4: a: " + open_quote);
  CHECK(faults("a: \"x\\\"\n") == "f:1:4: a: " + open_quote);
  CHECK(faults("b: 1\na: 'x''\nc: 2\n") == "f:2:4: a: " + open_quote);
  CHECK(faults("a: 'it''s'\nb: \"\\\"\"\n").empty());
  CHECK(faults("ok: 1\nbad: \xff\n") == "f:2:6: found a byte that is not text in UTF-8, expected UTF-8\n");
  CHECK(faults(std::string("a: \0b", 5)) == "f:1:4: found a byte that is not text in UTF-8, expected UTF-8\n");
}

TEST_CASE("Behind an alias without an anchor the text is still read") {
  CHECK(faults("a: *x\nb: [*y, 1, *z]\nc: {d: *x}\na: 2\n") ==
        "f:1:4: a: found an alias (*), expected the value itself\n"
        "f:2:5: b[0]: found an alias (*), expected the value itself\n"
        "f:2:12: b[2]: found an alias (*), expected the value itself\n"
        "f:3:8: c.d: found an alias (*), expected the value itself\n"
        "f:4:1: a: found the key \"a\" a second time (first in line 1), expected it once\n");
  std::string many;
  for (int i = 0; i < 1000; ++i) many += "a" + std::to_string(i) + ": *x\n";
  CHECK_FALSE(faults(many).empty());
}

TEST_CASE("A document that passes a limit is refused, however it tries") {
  CHECK(faults("abcdef: 1", {4, 100, 4}) == "f: found 9 bytes, expected at most 4\n");
  CHECK(faults("[1, 2, 3, 4]", {100, 3, 4}) == "f:1:8: [2]: found more than 3 values, expected fewer\n");
  CHECK(faults("[[[[[1]]]]]", {100, 100, 4}) == "f:1:5: [0][0][0][0]: found more than 4 levels, expected fewer\n");
  CHECK(faults(std::string(100'000, '[')).find("f:1:1: found") == 0);
  CHECK(faults(std::string(100'000, '{')).find("f:1:1: found") == 0);
  CHECK(faults("a: " + std::string(100, '[') + std::string(100, ']')).find("levels") != std::string::npos);
  std::string deep;
  for (int i = 0; i < 400; ++i) deep += std::string(static_cast<std::size_t>(i), ' ') + "a:\n";
  CHECK(faults(deep).find("levels") != std::string::npos);
}

// Unicode 15.0, table 3-7: well-formed UTF-8 byte sequences.
TEST_CASE("Only well-formed UTF-8 is text") {
  const std::string good[] = {"a", "\xC2\xB5", "\xE0\xA0\x80", "\xED\x9F\xBF", "\xF0\x90\x80\x80", "\xF4\x8F\xBF\xBF"};
  for (const std::string& text : good) CHECK(first_bad_byte(text) == std::string::npos);
  const std::string bad[] = {"\x80",
                             "\xC0\x80",
                             "\xC1\xBF",
                             "\xC2",
                             "\xE0\x9F\xBF",
                             "\xED\xA0\x80",
                             "\xF0\x8F\xBF\xBF",
                             "\xF4\x90\x80\x80",
                             "\xF5\x80\x80\x80"};
  for (const std::string& text : bad) CHECK(first_bad_byte("x" + text) == 1);
}
