# SPDX-License-Identifier: Apache-2.0
"""The schemas against the loaders, with the same good and bad files.

A file that a loader takes must be valid. Of the golden cases that a loader
refuses, those whose fault JSON Schema can express must be refused by the schema
too: EXPRESSIBLE lists the ones that are beyond it, with the reason in groups, so
that a new case is looked at by somebody.

The validator is a small one of our own: exactly the keywords that the schemas
use, and an unknown keyword is a failure, so nothing is passed over silently.
"""
import json
import pathlib
import re
import sys
import tempfile

import yaml

from verbs import RELEASE, RIG, SMOKE, TOP, Claims, call

KEYWORDS = {"$schema", "$defs", "$ref", "title", "description", "default", "type", "properties",
            "required", "additionalProperties", "propertyNames", "minProperties",
            "maxProperties", "items", "minItems", "maxItems", "enum", "const", "pattern",
            "minimum", "maximum", "exclusiveMinimum", "anyOf", "oneOf", "if", "then", "else"}
TYPES = {"object": dict, "array": list, "string": str, "boolean": bool, "null": type(None)}


def same(a, b):
    return a == b and isinstance(a, bool) == isinstance(b, bool)


def is_type(value, name):
    if name == "integer":
        return isinstance(value, int) and not isinstance(value, bool)
    if name == "number":
        return isinstance(value, (int, float)) and not isinstance(value, bool)
    return isinstance(value, TYPES[name])


class Validator:
    def __init__(self, schema):
        self.root = schema
        self.walk_keywords(schema)

    def walk_keywords(self, schema):
        """Every keyword is one that is understood here, and every pattern one that compiles."""
        if not isinstance(schema, dict):
            return
        unknown = set(schema) - KEYWORDS
        if unknown:
            raise ValueError(f"keywords that the validator does not know: {unknown}")
        re.compile(schema.get("pattern", ""))
        for key in ("items", "additionalProperties", "propertyNames", "if", "then", "else"):
            self.walk_keywords(schema.get(key))
        for key in ("properties", "$defs"):
            for part in schema.get(key, {}).values():
                self.walk_keywords(part)
        for part in schema.get("anyOf", []) + schema.get("oneOf", []):
            self.walk_keywords(part)

    def faults(self, value, schema=None, path=""):
        schema = self.root if schema is None else schema
        if schema is True:
            return []
        if schema is False:
            return [f"{path}: not allowed"]
        found = []
        if "$ref" in schema:
            found += self.faults(value, self.root["$defs"][schema["$ref"].split("/")[-1]], path)
        if "type" in schema:
            names = schema["type"] if isinstance(schema["type"], list) else [schema["type"]]
            if not any(is_type(value, name) for name in names):
                return [f"{path}: {value!r} is not of type {names}"]
        if "enum" in schema and not any(same(value, item) for item in schema["enum"]):
            found.append(f"{path}: {value!r} is none of {schema['enum']}")
        if "const" in schema and not same(value, schema["const"]):
            found.append(f"{path}: {value!r} is not {schema['const']!r}")
        if "anyOf" in schema and all(self.faults(value, s, path) for s in schema["anyOf"]):
            found.append(f"{path}: {value!r} fits none of {len(schema['anyOf'])}")
        if "oneOf" in schema:
            fits = sum(not self.faults(value, s, path) for s in schema["oneOf"])
            if fits != 1:
                found.append(f"{path}: fits {fits} of {len(schema['oneOf'])}, not one")
        if "if" in schema:
            then = "else" if self.faults(value, schema["if"], path) else "then"
            found += self.faults(value, schema.get(then, True), path)
        if isinstance(value, str) and not re.search(schema.get("pattern", ""), value):
            found.append(f"{path}: {value!r} does not match")
        if is_type(value, "number"):
            if value < schema.get("minimum", value) or value > schema.get("maximum", value):
                found.append(f"{path}: {value} is out of range")
            if value <= schema.get("exclusiveMinimum", value - 1):
                found.append(f"{path}: {value} is too small")
        if isinstance(value, list):
            found += self.list_faults(value, schema, path)
        if isinstance(value, dict):
            found += self.object_faults(value, schema, path)
        return found

    def list_faults(self, value, schema, path):
        found = []
        if not schema.get("minItems", 0) <= len(value) <= schema.get("maxItems", len(value)):
            found.append(f"{path}: {len(value)} items")
        for i, item in enumerate(value):
            found += self.faults(item, schema.get("items", True), f"{path}[{i}]")
        return found

    def object_faults(self, value, schema, path):
        found = [f"{path}: {key} is missing" for key in schema.get("required", [])
                 if key not in value]
        if not schema.get("minProperties", 0) <= len(value) <= schema.get("maxProperties",
                                                                          len(value)):
            found.append(f"{path}: {len(value)} keys")
        for key, item in value.items():
            found += self.faults(str(key), schema.get("propertyNames", True), f"{path}.{key}")
            part = schema.get("properties", {}).get(key, schema.get("additionalProperties", True))
            found += self.faults(item, part, f"{path}.{key}")
        return found


class Core(yaml.SafeLoader):
    """YAML 1.2 core: `yes` is a text, dates are texts, a doubled key is an error."""


Core.yaml_implicit_resolvers = {}
for tag, pattern, first in (
        ("bool", r"^(true|false|True|False|TRUE|FALSE)$", "tfTF"),
        ("null", r"^(null|~|)$", ["n", "~", ""]),
        ("int", r"^[-+]?[0-9]+$", "-+0123456789"),
        ("float", r"^[-+]?([0-9]+\.[0-9]*|\.[0-9]+|[0-9]+)([eE][-+]?[0-9]+)?$", "-+0123456789.")):
    Core.add_implicit_resolver(f"tag:yaml.org,2002:{tag}", re.compile(pattern), list(first))
Core.add_constructor("tag:yaml.org,2002:int",
                     lambda loader, node: int(node.value, 10))
Core.add_constructor("tag:yaml.org,2002:float", lambda loader, node: float(node.value))


def load(path):
    try:
        return yaml.load(path.read_text(), Loader=Core)
    except (yaml.YAMLError, UnicodeDecodeError, ValueError):
        return None  # no YAML: beyond a schema


def schema_of(claims, name):
    done = call("schema", name)
    claims.that(done.returncode == 0 and not done.stderr, f"schema {name} is printed")
    schema = json.loads(done.stdout)
    claims.that(schema["$schema"].endswith("2020-12/schema"), f"{name} says its draft")
    return Validator(schema)


def beyond():
    """Golden cases whose fault a schema cannot say."""
    path = pathlib.Path(__file__).with_name("beyond_schema.txt")
    return {line.split("#")[0].strip() for line in path.read_text().splitlines()} - {""}


def golden(claims, rig, suite):
    excused, caught, missed, good = beyond(), set(), set(), 0
    for folder in sorted((TOP / "tests" / "golden").iterdir()):
        expected = folder / "expected"
        if not expected.is_file() or not folder.name.startswith(("rig-", "suite-", "step-")):
            continue
        refused = expected.read_text().strip() != "no faults"
        text = expected.read_text()
        files = [(rig, folder / "rig.yaml"), (suite, folder / "suite.yaml")]
        found = []
        for validator, path in files:
            tree = load(path) if path.is_file() else None
            if tree is None:
                continue
            faults = validator.faults(tree)
            blamed = path.name + ":" in text
            if not blamed:
                good += 1
                claims.that(not faults, f"{folder.name}/{path.name} is good: {faults[:2]}")
            found += faults if blamed else []
        if refused:
            (caught if found else missed).add(folder.name)
    print(f"{good} good files, {len(caught)} bad ones caught, {len(missed)} beyond")
    claims.that(good >= 20, f"enough good files: {good}")
    claims.that(len(caught) >= 60, f"enough bad files caught: {len(caught)}")
    claims.that(not missed - excused, f"to be caught, or to be excused: {sorted(missed - excused)}")
    claims.that(not excused & caught, f"excused for nothing: {sorted(excused & caught)}")


def shipped(claims, rig, suite):
    for path in sorted((TOP / "rigs").glob("*.yaml")):
        claims.that(not rig.faults(load(path)), f"{path.name}: {rig.faults(load(path))[:3]}")
    for path in sorted((TOP / "suites").glob("*.yaml")):
        faults = suite.faults(load(path)) if "suite" in load(path) else []
        claims.that(not faults, f"{path.name}: {faults[:3]}")


def results(claims):
    validator = schema_of(claims, "results")
    with tempfile.TemporaryDirectory() as name:
        out = pathlib.Path(name) / "out"
        call("rehearse", "--quiet", "--rig", RIG, "--out", out, SMOKE)
        tree = json.loads((out / "results.json").read_text())
    claims.that(not validator.faults(tree), f"results are valid: {validator.faults(tree)[:3]}")
    for key in list(tree):
        less = {k: v for k, v in tree.items() if k != key}
        claims.that(validator.faults(less), f"results without {key} are not valid")
    tree["suites"][0]["tests"][0]["verdict"] = "passed"
    claims.that(validator.faults(tree), "a verdict that does not exist is not valid")


def main():
    claims = Claims()
    rig, suite = schema_of(claims, "rig"), schema_of(claims, "suite")
    golden(claims, rig, suite)
    shipped(claims, rig, suite)
    results(claims)
    done = call("schema", "siute")
    claims.that(done.returncode == 64 and "did you mean 'suite'" in done.stderr, done.stderr)
    claims.that(RELEASE.is_file(), "the release suite is there")
    claims.end()


if __name__ == "__main__":
    sys.exit(main())
