#!/usr/bin/env python3
# SPDX-License-Identifier: Apache-2.0
"""Holds three lists of reason codes to one another: those that model/recalibrate gives, schemas/reasons.yaml, README.md.

    tests/reasons/reasons.py [ROOT]

prints what differs and exits 1 where anything does.
"""
import pathlib
import re
import sys

import yaml

CALL = re.compile(r"\b(refuse|caution)\s*\(\s*reasons\s*,")
BRACE = re.compile(r"\{\s*\"[a-z_]+\"\s*,")
CODE = re.compile(r'"([a-z][a-z_]*)"')
ROW = re.compile(r"^\| `([a-z_]+)` \| (refuses|caution) \|", re.MULTILINE)
EFFECTS = {"refuse": "refuses", "caution": "caution", "true": "refuses", "false": "caution"}


def arguments(text, start):
    """The arguments from `start`, behind an opening bracket, to the one that closes it; strings are skipped over."""
    found, begin, depth, at = [], start, 0, start
    while at < len(text):
        letter = text[at]
        if letter == '"':
            at += 1
            while text[at] != '"':
                at += 2 if text[at] == "\\" else 1
        elif letter in "([{":
            depth += 1
        elif letter in ")]}" and depth == 0:
            return found + [text[begin:at].strip()]
        elif letter in ")]}":
            depth -= 1
        elif letter == "," and depth == 0:
            found.append(text[begin:at].strip())
            begin = at + 1
        at += 1
    raise ValueError(f"a bracket is left open behind: {text[start:start + 60]!r}")


def codes_given(text):
    """(code, effect) of each reason that a source gives: refuse(reasons, CODE, ...), caution(reasons, CODE, ...) or a Reason
    written out as {CODE, TEXT, REFUSES}. CODE may choose between two (`line ? "no_line" : "no_oscillation"`)."""
    text = re.sub(r"(?<!:)//[^\n]*", "", text)
    for call in CALL.finditer(text):
        codes = CODE.findall(arguments(text, text.index("(", call.start()) + 1)[1])
        if not codes:
            raise ValueError(f"a reason whose code is no text in the source: {text[call.start():call.start() + 60]!r}")
        yield from ((code, EFFECTS[call.group(1)]) for code in codes)
    for brace in BRACE.finditer(text):
        parts = arguments(text, brace.start() + 1)
        if len(parts) == 3 and parts[2] in EFFECTS:
            yield parts[0].strip('"'), EFFECTS[parts[2]]


def differences(sources, listed, readme):
    """What differs: `sources` and `readme` are texts, `listed` the parsed reasons.yaml."""
    given = {pair for text in sources for pair in codes_given(text)}
    rows = [(row.get("code"), row.get("effect")) for row in listed["reasons"]]
    said = ROW.findall(readme)
    found = [f"schemas/reasons.yaml: `{code}` stands there twice" for code in {c for c, _ in rows if [c for c, _ in rows].count(c) > 1}]
    for row in listed["reasons"]:
        if set(row) != {"code", "effect", "meaning", "next"} or not all(isinstance(v, str) and v for v in row.values()):
            found.append(f"schemas/reasons.yaml: `{row.get('code')}` needs code, effect, meaning and next, each a text")
    for where, have in (("schemas/reasons.yaml", set(rows)), ("the table in README.md", set(said))):
        found += [f"{where}: lacks `{code}` ({effect}), which model/recalibrate gives" for code, effect in sorted(given - have)]
        found += [f"{where}: has `{code}` ({effect}), which model/recalibrate does not give" for code, effect in sorted(have - given)]
    if not given:
        found.append("model/recalibrate: no reason was found in the sources")
    return found, len(given)


def main():
    root = pathlib.Path(sys.argv[1] if len(sys.argv) > 1 else pathlib.Path(__file__).resolve().parents[2])
    sources = [path.read_text(encoding="utf-8") for path in sorted((root / "model/recalibrate").glob("*.[ch]pp"))]
    listed = yaml.safe_load((root / "schemas/reasons.yaml").read_text(encoding="utf-8"))
    found, count = differences(sources, listed, (root / "README.md").read_text(encoding="utf-8"))
    print(*found, f"{count} reasons held, {len(found)} differences", sep="\n")
    return 1 if found else 0


if __name__ == "__main__":
    sys.exit(main())
