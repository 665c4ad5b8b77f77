"""The JSON Schema of experiment, arm and identification files, for editors.

It says what can be said without the arm: keys, types, ranges, units, defaults, and each registered law's
options. ``rigbench check`` says the rest.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from rigbench.arm.declaration import ArmDeclaration
from rigbench.experiment.identification_keys import IdentificationKeys
from rigbench.experiment.read_vary import FIXED
from rigbench.experiment.schema import ExperimentKeys
from rigbench.experiment.tolerance import BAND, SETTLE_BAND_MM
from rigbench.laws.options import OptionAbout, describe_options, options_model
from rigbench.laws.registry import Registered, registered
from rigbench.scores.names import SCORES

__all__ = ["arm_schema", "experiment_schema", "identification_schema"]

DIALECT = "https://json-schema.org/draft/2020-12/schema"

Schema = dict[str, Any]


def arm_schema() -> Schema:
    """Return the JSON Schema of an arm file."""
    return {"$schema": DIALECT, **_plain(ArmDeclaration.model_json_schema())}


def identification_schema() -> Schema:
    """Return the JSON Schema of an identification file."""
    return {"$schema": DIALECT, **_plain(IdentificationKeys.model_json_schema())}


def experiment_schema() -> Schema:
    """Return the JSON Schema of an experiment file, with the options of the laws registered here."""
    whole = _plain(ExperimentKeys.model_json_schema())
    parts: Schema = whole["$defs"]
    whole["properties"] = {key: _given(part) for key, part in whole["properties"].items()}
    parts["LawKeys"] = _law_schema(parts["LawKeys"])
    limits = _tolerance_schema()
    whole["properties"]["tolerance"] |= limits
    own = parts["MotionKeys"]["properties"]["tolerance"]
    parts["MotionKeys"]["properties"]["tolerance"] = limits | {"description": own["description"]}
    mirror = _Mirror(parts)
    varied = {key: mirror.of(part) for key, part in whole["properties"].items() if (key,) not in FIXED}
    varied["motions"] = _mapping(mirror.of({"$ref": "#/$defs/MotionKeys"}))
    varied["laws"] = _mapping(_mapping({"type": "array", "minItems": 1}))
    del mirror.parts["VaryMotionKeys"]["properties"]["tolerance"]
    whole["properties"]["vary"] |= _mapping(False) | {"properties": varied}
    parts |= mirror.parts
    return {"$schema": DIALECT, **whole}


def _plain(node: Any, names: bool = False) -> Any:
    """Leave out titles, and defaults of null, which say nothing; ``names``: the keys are the user's."""
    if isinstance(node, list):
        return [_plain(item) for item in node]
    if not isinstance(node, dict):
        return node
    return {
        key: _plain(item, names=key in ("properties", "$defs") and not names)
        for key, item in node.items()
        if names or not (key == "title" or (key == "default" and item is None))
    }


def _given(schema: Schema) -> Schema:
    """Return the schema of a section without null, which leaving the section out says as well."""
    branches = [branch for branch in schema.get("anyOf", ()) if branch != {"type": "null"}]
    if len(branches) != 1:
        return schema
    merged: Schema = branches[0] | {key: part for key, part in schema.items() if key != "anyOf"}
    return merged


def _mapping(values: Schema | bool) -> Schema:
    return {"type": "object", "minProperties": 1, "additionalProperties": values}


def _law_schema(base: Schema) -> Schema:
    """Return the schema of a law: once its name is known, its options."""
    laws = registered().laws
    law = base["properties"]["law"] | {"anyOf": [{"enum": list(laws)}, {"pattern": r"\.py:"}]}
    chosen = [
        {
            "if": {"properties": {"law": {"const": name}}, "required": ["law"]},
            "then": {
                "properties": {"law": True, **_options(entry)},
                "additionalProperties": False,
            },
        }
        for name, entry in laws.items()
    ]
    return {**base, "properties": {"law": law}, "allOf": chosen}


def _options(law: Registered) -> Schema:
    """Return the schema of each option of a law, with its unit and its default."""
    model = options_model(law.cls)  # type: ignore[arg-type]  # mypy takes the instances' __hash__ for the class's
    properties: Schema = _plain(model.model_json_schema())["properties"]
    for about in describe_options(law.cls):
        properties[about.name]["description"] = _described(about)
    return properties


def _described(about: OptionAbout) -> str:
    unit = f" [{about.unit}]" if about.unit else ""
    default = "none" if about.default is None else about.default
    return f"{about.doc}{unit}; default {default}"


def _tolerance_schema() -> Schema:
    """Return the schema of a tolerance: limits by score."""
    number: Schema = {"type": "number", "minimum": 0}
    by_joint = {"anyOf": [number, _mapping(number)]}
    limits: Schema = {
        name: (by_joint if info.per_joint else number)
        | {"description": f"at most [{info.unit or '-'}]: {info.doc}"}
        for name, info in SCORES.items()
        if not info.host
    }
    described = f"band within which the tool has arrived [mm]; default {SETTLE_BAND_MM:g}"
    limits[BAND] = {"type": "number", "exclusiveMinimum": 0, "description": described}
    return {"type": "object", "minProperties": 1, "additionalProperties": False, "properties": limits}


class _Mirror:
    """Makes from a schema that of ``vary``: the same keys, and lists of values at any depth."""

    def __init__(self, parts: Mapping[str, Schema]) -> None:
        self._source = parts
        self.parts: Schema = {}

    def of(self, schema: Schema) -> Schema:
        """Return the schema of what ``vary`` may hold where the file holds ``schema``."""
        values = {"type": "array", "minItems": 1, "uniqueItems": True, "items": schema}
        branches = [self._keys(branch) for branch in schema.get("anyOf", [schema])]
        mirrored: Schema = {"anyOf": [values, *(branch for branch in branches if branch)]}
        return mirrored | {k: v for k, v in schema.items() if k == "description"}

    def _keys(self, schema: Schema) -> Schema | None:
        """Return the mirrored keys of a mapping; None for anything else."""
        reference = schema.get("$ref")
        if reference is not None:
            name = reference.rpartition("/")[2]
            own = f"Vary{name}"
            if own not in self.parts:
                self.parts[own] = {}  # so that it is made once
                self.parts[own] = self._keys(self._source[name]) or {}
            return {"$ref": f"#/$defs/{own}"} if self.parts[own] else None
        if schema.get("type") != "object":
            return None
        keys: Schema = {"type": "object", "minProperties": 1}
        if "properties" in schema:
            keys["properties"] = {k: self.of(v) for k, v in schema["properties"].items()}
        more = schema.get("additionalProperties", False)
        keys["additionalProperties"] = self.of(more) if isinstance(more, dict) else more
        return keys
