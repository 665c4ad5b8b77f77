"""The published schemas: true to what the checks accept, and whatever follows them is run or refused with addresses."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import yaml
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from rigbench.arm.declaration import DriveDeclaration
from rigbench.errors import InputFaults
from rigbench.experiment import load_experiment
from rigbench.experiment.json_schema import arm_schema, experiment_schema, identification_schema
from rigbench.experiment.schema import ExperimentKeys
from rigbench.laws.options import describe_options
from rigbench.laws.registry import registered

ROOT = Path(__file__).resolve().parents[2]

EXPERIMENT, ARM = experiment_schema(), arm_schema()


def nodes(schema: Any) -> Iterator[dict[str, Any]]:
    """Every mapping in a schema."""
    if isinstance(schema, dict):
        yield schema
        for inside in schema.values():
            yield from nodes(inside)
    elif isinstance(schema, list):
        for inside in schema:
            yield from nodes(inside)


@pytest.mark.parametrize("schema", [EXPERIMENT, ARM], ids=["experiment", "arm"])
def test_every_reference_leads_somewhere(schema: dict[str, Any]) -> None:
    """And the whole is JSON, infinities excluded."""
    json.dumps(schema, allow_nan=False)
    for node in nodes(schema):
        reference = node.get("$ref")
        if isinstance(reference, str):
            assert reference.removeprefix("#/$defs/") in schema["$defs"]


def test_every_key_is_there_with_a_description() -> None:
    """Keys of the experiment file and of the drives, each said in words; those that are required are said to be."""
    assert set(EXPERIMENT["properties"]) == set(ExperimentKeys.model_fields)
    assert EXPERIMENT["required"] == ["rigbench", "arm", "motions", "laws"]
    assert set(EXPERIMENT["$defs"]["DriveKeys"]["properties"]) == set(DriveDeclaration.model_fields)
    assert set(ARM["$defs"]["DriveDeclaration"]["properties"]) == set(DriveDeclaration.model_fields)
    for name, schema in {**EXPERIMENT["$defs"], "": EXPERIMENT, **ARM["$defs"]}.items():
        if not name.startswith("Vary"):
            for key, about in schema.get("properties", {}).items():
                assert about.get("description") or "$ref" in about, (name, key)


def test_options_of_every_registered_law_are_there() -> None:
    """With unit and default, once the law's name is given, and no others."""
    chosen = {
        branch["if"]["properties"]["law"]["const"]: branch["then"]
        for branch in EXPERIMENT["$defs"]["LawKeys"]["allOf"]
    }
    assert set(chosen) == set(registered().laws)
    for name, law in registered().laws.items():
        options = describe_options(law.cls)
        assert set(chosen[name]["properties"]) == {"law", *(option.name for option in options)}
        assert chosen[name]["additionalProperties"] is False
        for option in options:
            described = chosen[name]["properties"][option.name]["description"]
            assert option.unit in described
            assert "default" in described


def test_vary_mirrors_the_file() -> None:
    """The same keys, but for those that all sheets share; lists of values wherever the file has a value."""
    varied = EXPERIMENT["properties"]["vary"]
    shared = {"rigbench", "title", "seed", "conditions", "draws", "vary", "tolerance", "required_share"}
    shared |= {"stop_early", "find_level", "worst_case", "tune", "needs"}
    assert set(varied["properties"]) == set(ExperimentKeys.model_fields) - shared
    rates = EXPERIMENT["$defs"]["VaryRatesKeys"]["properties"]["control_hz"]["anyOf"]
    assert [branch["type"] for branch in rates] == ["array"]
    assert "tolerance" not in EXPERIMENT["$defs"]["VaryMotionKeys"]["properties"]
    assert "tolerance" in EXPERIMENT["$defs"]["MotionKeys"]["properties"]


def test_valid_files_follow_the_schema() -> None:
    """Every experiment, identification and arm of the package; some slips that an editor then catches."""
    jsonschema = pytest.importorskip("jsonschema")
    of_experiment = jsonschema.Draft202012Validator(EXPERIMENT)
    of_identification = jsonschema.Draft202012Validator(identification_schema())
    of_arm = jsonschema.Draft202012Validator(ARM)
    for validator in (of_experiment, of_identification, of_arm):
        validator.check_schema(validator.schema)
    for path in (ROOT / "experiments").glob("*.yaml"):
        validator = of_identification if path.name.startswith("practise-") else of_experiment
        validator.validate(yaml.safe_load(path.read_text("utf-8")))
    for path in (ROOT / "robots_demo").glob("*/*.yaml"):
        of_arm.validate(yaml.safe_load(path.read_text("utf-8")))
    good = yaml.safe_load((ROOT / "experiments" / "gear-and-rate.yaml").read_text("utf-8"))
    for section, slip in (
        ("vary", {"rates": {"control_hz": 500}}),
        ("vary", {"draws": [1, 2]}),
        ("vary", {"laws": {"feedforward": {"model_hz": 50}}}),
        ("laws", {"x": {"law": "computed-torque", "natual_hz": 5}}),
        ("laws", {"x": {"law": "computed_torque"}}),
        ("tolerance", {"tool_peek_mm": 3}),
        ("mismatch", {"link_mass_percent": "5"}),
        ("motions", {"m": {"via_degs": [[0], [1]]}}),
    ):
        assert not of_experiment.is_valid(good | {section: slip}), (section, slip)


# Files that follow the schema --------------------------------------------------------------------

NAMES = ("j1", "j2", "all", "wrist", "gripper", "a", "b c", "feedforward", "m")
NUMBERS = st.one_of(st.sampled_from((0.0, 1.0, 0.5, 2.0, 10.0, 100.0, 500.0, 1000.0)), st.floats(-50, 2000))


def bounded(schema: dict[str, Any]) -> st.SearchStrategy[Any]:
    """Numbers within the bounds."""
    low = schema.get("minimum", schema.get("exclusiveMinimum", -1e6))
    high = schema.get("maximum", schema.get("exclusiveMaximum", 1e6))

    def inside(value: float) -> float:
        kept = min(max(value, low), high)
        on_edge = kept in (schema.get("exclusiveMinimum"), schema.get("exclusiveMaximum"))
        return 0.5 * (low + min(high, low + 10)) if on_edge else kept

    if schema["type"] == "integer":
        return st.integers(max(0, int(low)), int(min(high, max(low, 0) + 20)))
    return NUMBERS.map(inside)


def following(schema: Any, depth: int = 0) -> st.SearchStrategy[Any]:
    """Values that follow a schema (of the keywords that ours uses)."""
    if schema is True or schema == {}:
        return st.one_of(NUMBERS, st.sampled_from(NAMES), st.booleans())
    if "$ref" in schema:
        name = schema["$ref"].rpartition("/")[2]
        return st.deferred(lambda: following(EXPERIMENT["$defs"][name], depth + 1))
    if "enum" in schema or "const" in schema:
        return st.sampled_from(schema.get("enum") or [schema["const"]])
    if "allOf" in schema:
        return st.sampled_from(schema["allOf"]).flatmap(lambda one: of_law(one, depth))
    if "anyOf" in schema and "properties" not in schema:
        return st.one_of([following(branch, depth) for branch in schema["anyOf"]])
    return OF_TYPE[schema["type"]](schema, depth)


def of_array(schema: dict[str, Any], depth: int) -> st.SearchStrategy[Any]:
    """Short lists; longer ones further in, where the joints are."""
    least = schema.get("minItems", 0)
    most = min(schema.get("maxItems", 6), max(least, 6 if depth > 2 else 3))
    return st.lists(following(schema.get("items", True), depth + 1), min_size=least, max_size=most)


def of_law(branch: dict[str, Any], depth: int) -> st.SearchStrategy[Any]:
    """A law with some of its options."""
    properties = {**branch["then"]["properties"], "law": branch["if"]["properties"]["law"]}
    return of_object({"properties": properties, "required": ["law"]}, depth)


def of_object(schema: dict[str, Any], depth: int) -> st.SearchStrategy[Any]:
    """A mapping with what it requires, and some of what it allows."""
    properties = schema.get("properties", {})
    required = {key: following(properties[key], depth + 1) for key in schema.get("required", ())}
    some = {key: following(part, depth + 1) for key, part in properties.items() if key not in required}
    whole = st.fixed_dictionaries(required, optional=some)
    more = schema.get("additionalProperties", False)
    if not isinstance(more, dict):
        return whole
    named = st.dictionaries(
        st.sampled_from(NAMES),
        following(more, depth + 1),
        min_size=schema.get("minProperties", 0),
        max_size=2,
    )
    return st.tuples(whole, named).map(lambda both: both[1] | both[0])


OF_TYPE = {
    "object": of_object,
    "array": of_array,
    "number": lambda schema, _: bounded(schema),
    "integer": lambda schema, _: bounded(schema),
    "string": lambda *_: st.sampled_from(NAMES),
    "boolean": lambda *_: st.booleans(),
    "null": lambda *_: st.none(),
}


def experiments() -> st.SearchStrategy[dict[str, Any]]:
    """Experiments on tray6: with its own motion and laws beside those that the schema makes up, or without."""
    sound = {
        "rigbench": 1,
        "arm": f"{ROOT}/robots_demo/tray6/arm.yaml",
        "motions": {"m": {"via_deg": [[0, -60, 90, 0, 60, 0], [9, -50, 80, 0, 60, 0]], "leg_s": 0.5}},
        "laws": {"feedforward": {"law": "torque-feedforward"}},
    }
    sections = [key for key in EXPERIMENT["properties"] if key not in ("rigbench", "arm", "model")]
    parts = {key: following(EXPERIMENT["properties"][key]) for key in sections}
    some = st.lists(st.sampled_from(sections), min_size=1, max_size=3, unique=True)
    return some.flatmap(lambda keys: st.fixed_dictionaries({key: parts[key] for key in keys})).map(
        lambda made: sound | made
    )


QUIET = {
    "deadline": None, "derandomize": True, "database": None, "phases": (Phase.generate,),
    "suppress_health_check": list(HealthCheck),
}  # fmt: skip


def check_made(path: Path, data: dict[str, Any]) -> None:
    """A file that follows the schema is in order and can be planned, or each of its faults has an address."""
    path.write_text(yaml.safe_dump(data, sort_keys=False), encoding="utf-8")
    try:
        experiment = load_experiment(path)
    except InputFaults as error:
        for fault in error.faults:
            assert fault.file
            assert fault.problem
            assert fault.key or fault.line
            assert "unknown key" not in fault.problem or fault.key.startswith(("vary.laws", "laws"))
        return
    assert experiment.runs > 0
    if experiment.runs < 20_000:
        assert len(experiment.plan().entries) == experiment.runs


@settings(max_examples=100, **QUIET)
@given(data=experiments())
def test_files_made_from_the_schema(tmp_path: Path, data: dict[str, Any]) -> None:
    """100 of them."""
    check_made(tmp_path / "made.yaml", data)


@pytest.mark.evidence
@settings(max_examples=1000, **QUIET)
@given(data=experiments())
def test_a_thousand_files_made_from_the_schema(tmp_path: Path, data: dict[str, Any]) -> None:
    """1,000 of them."""
    check_made(tmp_path / "made.yaml", data)
