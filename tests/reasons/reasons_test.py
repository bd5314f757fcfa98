#!/usr/bin/env python3
# SPDX-License-Identifier: Apache-2.0
"""Feeds the check of reasons with lists that agree and lists that do not."""
import unittest

import reasons

SOURCE = """
  refuse(reasons, line ? "no_line" : "no_oscillation", "Text (with \\"quotes\\", and a comma).");
  caution(reasons, "scatter", "a" + f(b, "c"));
  // caution(reasons, "gone", "no longer");
  return {"uncertain", "The `" + pulse.name + "`.", true};
  decision.reasons.push_back({"held", a ? b : std::string(), false});
  constexpr std::array<std::string_view, 2> kNames = {"none", "first"};
"""
ROWS = [("no_line", "refuses"), ("no_oscillation", "refuses"), ("scatter", "caution"), ("uncertain", "refuses"), ("held", "caution")]


def listed(rows):
    return {"format": 1, "reasons": [{"code": c, "effect": e, "meaning": "m", "next": "n"} for c, e in rows]}


def table(rows):
    return "".join(f"| `{c}` | {e} | m | n |\n" for c, e in rows)


class Reasons(unittest.TestCase):
    def differences(self, sources=(SOURCE,), rows=ROWS, said=ROWS):
        return reasons.differences(sources, listed(rows), table(said))[0]

    def test_codes_of_a_source(self):
        self.assertEqual(sorted(reasons.codes_given(SOURCE)), sorted(ROWS))

    def test_lists_that_agree(self):
        self.assertEqual(self.differences(), [])

    def test_each_difference_is_found(self):
        for name, found in {
            "a code without a row": self.differences(rows=ROWS[1:]),
            "a code without a line in the readme": self.differences(said=ROWS[1:]),
            "a row without a code": self.differences(rows=ROWS + [("gone", "caution")]),
            "a line without a code": self.differences(said=ROWS + [("gone", "caution")]),
            "a new code in the sources": self.differences(sources=(SOURCE, 'refuse(reasons, "fresh", "x");')),
            "a row twice": self.differences(rows=ROWS + ROWS[:1]),
            "the wrong effect": self.differences(rows=ROWS[1:] + [("no_line", "caution")]),
            "sources without reasons": self.differences(sources=("int x;",)),
        }.items():
            with self.subTest(name):
                self.assertNotEqual(found, [])

    def test_a_code_that_cannot_be_read_is_a_fault(self):
        with self.assertRaises(ValueError):
            list(reasons.codes_given('refuse(reasons, code, "text");'))


if __name__ == "__main__":
    unittest.main()
