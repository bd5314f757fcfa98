# SPDX-License-Identifier: Apache-2.0
"""The golden messages against schemas/messages.schema.json: check_schema.py SOURCE_FOLDER.

Every golden message is valid, its JSON and MessagePack hold the same, and what the contract forbids is invalid.
"""
import copy
import json
import pathlib
import sys
import unittest

import jsonschema
import msgpack

SOURCE = pathlib.Path(sys.argv.pop())
GOLDEN = SOURCE / "tests" / "golden"
SCHEMA = json.loads((SOURCE / "schemas" / "messages.schema.json").read_text())


def validator(name):
    schema = {"$schema": SCHEMA["$schema"], "$ref": "#/$defs/" + name, "$defs": SCHEMA["$defs"]}
    return jsonschema.Draft202012Validator(schema)


def messages(folder):
    return {path.stem: json.loads(path.read_text()) for path in sorted((GOLDEN / folder).glob("*.json"))}


class Golden(unittest.TestCase):
    def test_the_schema_is_one(self):
        jsonschema.Draft202012Validator.check_schema(SCHEMA)

    def test_every_golden_message_is_valid(self):
        for folder, name in (("requests", "request"), ("replies", "reply"), ("published", "published")):
            check = validator(name)
            for stem, message in messages(folder).items():
                with self.subTest(message=folder + "/" + stem):
                    self.assertEqual([e.message for e in check.iter_errors(message)], [])
                    self.assertTrue(jsonschema.Draft202012Validator(SCHEMA).is_valid(message))

    def test_every_kind_of_request_has_a_golden_message(self):
        kinds = {m["kind"] for m in messages("requests").values()}
        named = {r["$ref"].removeprefix("#/$defs/request_") for r in SCHEMA["$defs"]["request"]["oneOf"]}
        self.assertEqual(kinds, named)

    def test_both_encodings_hold_the_same(self):
        paths = sorted(GOLDEN.glob("*/*.json"))
        self.assertGreater(len(paths), 20)
        for path in paths:
            with self.subTest(message=path.stem):
                self.assertEqual(json.loads(path.read_text()), msgpack.unpackb(path.with_suffix(".msgpack").read_bytes()))

    def test_what_is_forbidden_is_invalid(self):
        check, fit = validator("request"), messages("requests")["fit"]

        def changed(change):
            message = copy.deepcopy(fit)
            change(message)
            return check.is_valid(message)

        self.assertTrue(changed(lambda m: None))
        self.assertFalse(changed(lambda m: m.update(proto=2)))
        self.assertFalse(changed(lambda m: m.update(extra=1)))
        self.assertFalse(changed(lambda m: m.pop("id")))
        self.assertFalse(changed(lambda m: m.update(id="x" * 65)))
        self.assertFalse(changed(lambda m: m["scan"].update(count=[1])))
        self.assertFalse(changed(lambda m: m["scan"].update(detuning_hz=[0, 1, 2])))
        self.assertFalse(changed(lambda m: m["scan"].update(signal=[0, 1, 2])))
        self.assertFalse(changed(lambda m: m["scan"].update(pulse_s=1e-6)))
        self.assertFalse(changed(lambda m: m["scan"].update(drive="r d")))
        self.assertFalse(changed(lambda m: m["scan"].update(counts=[0, 1.5, 2])))
        self.assertFalse(changed(lambda m: m["scan"].update(duration_s=[0, True, 2])))
        self.assertFalse(changed(lambda m: m["scan"]["references"].pop("dark_shots")))
        self.assertFalse(changed(lambda m: m["options"].update(level=95)))
        reply, fitted = validator("reply"), messages("replies")["fitted"]
        fitted["something_new"] = {}
        self.assertTrue(reply.is_valid(fitted), "replies may gain fields")
        fitted["rabi_hz"] = {"value": None}
        self.assertFalse(reply.is_valid(fitted), "no value without a reason")


if __name__ == "__main__":
    unittest.main()
