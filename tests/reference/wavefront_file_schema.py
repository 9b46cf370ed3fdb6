"""Holds wavefront files against schema/wavefront_file.schema.json.

Usage: wavefront_file_schema.py SCHEMA PAGE FILE...

The file is turned into JSON by the very lines that schema/wavefront_file.md shows, so that the page is tested too.
The validator knows the few keywords of JSON Schema 2020-12 (core and validation, from memory) that the schema uses,
and stops at any other.
"""
import json
import re
import subprocess
import sys

TYPES = {"object": dict, "string": str, "number": (int, float)}


def violations(schema, value, root, place):
    known = {"$schema", "$id", "$defs", "title", "description", "type", "required", "properties", "patternProperties",
             "anyOf", "$ref", "enum", "const", "minimum", "maximum", "exclusiveMinimum", "minLength"}
    if set(schema) - known:
        raise SystemExit(f"the validator does not know {sorted(set(schema) - known)}")
    if "$ref" in schema:
        target = root
        for step in schema["$ref"].removeprefix("#/").split("/"):
            target = target[step]
        yield from violations(target, value, root, place)
    if "type" in schema and (not isinstance(value, TYPES[schema["type"]]) or isinstance(value, bool)):
        yield f"{place}: {value!r} is no {schema['type']}"
        return
    if "enum" in schema and value not in schema["enum"]:
        yield f"{place}: {value!r} is none of {schema['enum']}"
    if "const" in schema and value != schema["const"]:
        yield f"{place}: {value!r} is not {schema['const']}"
    if isinstance(value, str) and len(value) < schema.get("minLength", 0):
        yield f"{place}: too short"
    if isinstance(value, (int, float)):
        if value < schema.get("minimum", value) or value > schema.get("maximum", value):
            yield f"{place}: {value} is out of range"
        if "exclusiveMinimum" in schema and value <= schema["exclusiveMinimum"]:
            yield f"{place}: {value} is not above {schema['exclusiveMinimum']}"
    if isinstance(value, dict):
        for name in schema.get("required", []):
            if name not in value:
                yield f"{place}: {name} is missing"
        for name, member in value.items():
            if name in schema.get("properties", {}):
                yield from violations(schema["properties"][name], member, root, f"{place} {name}")
            for pattern, inner in schema.get("patternProperties", {}).items():
                if re.search(pattern, name):
                    yield from violations(inner, member, root, f"{place} {name}")
    if "anyOf" in schema and all(list(violations(one, value, root, place)) for one in schema["anyOf"]):
        yield f"{place}: none of the alternatives holds"


def main():
    schema = json.load(open(sys.argv[1]))
    lines = re.search(r"```python\n(import h5py, json.*?)```", open(sys.argv[2]).read(), re.S).group(1)
    bad = 0
    for path in sys.argv[3:]:
        found = json.loads(subprocess.run([sys.executable, "-c", lines, path], check=True, capture_output=True).stdout)
        problems = list(violations(schema, found, schema, path.rsplit("/", 1)[1]))
        print(*(problems or [f"{path}: conforms"]), sep="\n")
        bad += bool(problems)
    sys.exit(1 if bad else 0)


main()
