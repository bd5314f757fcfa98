# SPDX-License-Identifier: Apache-2.0
"""Holds schemas/transitions.yaml against its schema, and the schema against a few broken catalogues."""
import copy
import json
import pathlib
import sys

import jsonschema
import yaml

folder = pathlib.Path(sys.argv[1])
schema = json.loads((folder / "transitions.schema.json").read_text())
catalogue = yaml.safe_load((folder / "transitions.yaml").read_text())
jsonschema.Draft202012Validator.check_schema(schema)
validator = jsonschema.Draft202012Validator(schema)
errors = [f"{'/'.join(map(str, e.absolute_path))}: {e.message}" for e in validator.iter_errors(catalogue)]


def broken(change):
    copied = copy.deepcopy(catalogue)
    change(copied["lines"][0])
    return copied


changes = {
    "an unknown key": lambda line: line.update(colour="red"),
    "a kind that is none": lambda line: line.update(kind="E1"),
    "a comma in a name": lambda line: line["recommended"].append("Rb87, D2"),
    "doubled blanks in a name": lambda line: line["recommended"].append("Rb87  D2"),
    "neither wavelength nor frequency": lambda line: line.pop("wavelength_m"),
    "a number without source": lambda line: line["lifetime_s"].pop("source"),
    "a negative lifetime": lambda line: line["lifetime_s"].update(value=-1.0),
    "a text for a number": lambda line: line["lifetime_s"].update(value="26 ns"),
    "no parity": lambda line: line["lower"].pop("parity"),
}
errors += [f"the schema takes {what}" for what, change in changes.items() if validator.is_valid(broken(change))]
for error in errors:
    print(error)
print(f"{len(catalogue['lines'])} lines, {len(changes)} broken catalogues, {len(errors)} errors")
sys.exit(1 if errors else 0)
