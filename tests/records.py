# SPDX-License-Identifier: GPL-3.0-or-later
"""Holds every JSON record under a folder against its schema in standards/schema.

usage: records.py FOLDER
The validator is jsonschema, an implementation from outside the project (JSON Schema 2020-12). Each
record is also spoilt in several ways, and each spoilt copy must be refused. Last line: counts.
"""
import copy
import json
import math
import pathlib
import sys

import jsonschema

root = pathlib.Path(__file__).resolve().parent.parent
passed = failed = 0


def check(good, message):
    global passed, failed
    if good:
        passed += 1
    else:
        failed += 1
        print(f"FAILED: {message}")


def strict(name):
    """JSON has no NaN and no infinities; Python would read them."""
    raise ValueError(f"{name} is not JSON")


def twice(pairs):
    keys = [key for key, _ in pairs]
    if len(set(keys)) != len(keys):
        raise ValueError(f"a key is given twice among {keys}")
    return dict(pairs)


def read(path):
    return json.loads(path.read_text(encoding="utf-8"), parse_constant=strict, object_pairs_hook=twice)


def quantities(value, path=""):
    """Every {"value": ...} within a record, with its path."""
    if isinstance(value, dict):
        if "value" in value:
            yield path, value
        for key, child in value.items():
            yield from quantities(child, f"{path}/{key}")
    elif isinstance(value, list):
        for at, child in enumerate(value):
            yield from quantities(child, f"{path}/{at}")


def reach(record, path):
    for key in path.split("/")[1:]:
        record = record[int(key)] if isinstance(record, list) else record[key]
    return record


schemas = {}
for path in sorted((root / "standards" / "schema").glob("*.json")):
    schema = read(path)
    kind = jsonschema.validators.validator_for(schema)
    try:
        kind.check_schema(schema)
        check(True, "")
    except jsonschema.SchemaError as error:
        check(False, f"{path.name} is not a schema: {error.message}")
        continue
    name = schema.get("properties", {}).get("schema", {}).get("const")
    check(name is not None, f"{path.name} does not fix the record's `schema`")
    schemas[name] = kind(schema)
check(bool(schemas), "there is no schema in standards/schema")
for name in ("linewright/calibration/1", "linewright/results/1"):
    check(name in schemas, f"no schema for {name}")

seen = set()
for path in sorted(pathlib.Path(sys.argv[1]).rglob("*.json")):
    try:
        record = read(path)
    except ValueError as error:
        check(False, f"{path}: {error}")
        continue
    name = record.get("schema") if isinstance(record, dict) else None
    if name not in schemas:
        check(False, f"{path}: its schema {name!r} is none of {sorted(filter(None, schemas))}")
        continue
    seen.add(name)
    validator = schemas[name]
    errors = [f"{'/'.join(map(str, e.absolute_path))}: {e.message[:200]}" for e in validator.iter_errors(record)]
    check(not errors, f"{path}: {errors[:5]}")
    if errors:
        continue
    # A standard uncertainty is finite and never negative.
    for where, quantity in quantities(record):
        u = quantity.get("u")
        check(u is None or (isinstance(u, (int, float)) and math.isfinite(u) and u >= 0), f"{path}: u at {where} is {u!r}")
    # Spoilt copies: without a required field, with a wrong schema name, with words for a number.
    for key in validator.schema.get("required", []):
        spoilt = copy.deepcopy(record)
        del spoilt[key]
        check(not validator.is_valid(spoilt), f"{name}: a record without {key!r} is accepted")
    spoilt = copy.deepcopy(record)
    spoilt["schema"] = "linewright/other/1"
    check(not validator.is_valid(spoilt), f"{name}: a record of another schema is accepted")
    where = next((w for w, q in quantities(record) if "u" in q and "unit" in q), None)
    check(where is not None, f"{path}: it holds no quantity")
    if where is not None:
        for field, wrong in (("value", "wide"), ("u", "small"), ("u", -1.0), ("unit", 3)):
            spoilt = copy.deepcopy(record)
            reach(spoilt, where)[field] = wrong
            check(not validator.is_valid(spoilt), f"{name}: {where}/{field} = {wrong!r} is accepted")
for name in ("linewright/calibration/1", "linewright/results/1"):
    check(name in seen, f"no record of {name} under {sys.argv[1]}")

print(f"{passed} passed, {failed} failed")
sys.exit(1 if failed else 0)
