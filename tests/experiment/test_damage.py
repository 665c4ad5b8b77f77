"""Damaged files: whatever befalls a valid file, it is refused with addresses, or means what it says.

What a damaged file says is worked out a second time here, from the plain YAML tree, by a reading that
knows nothing of the package: rows, sheets, columns, options, rates, limits and the number of runs.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from itertools import product
from math import inf, nan
from pathlib import Path
from typing import Any

import pytest
import yaml
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from rigbench.errors import Fault, InputFaults
from rigbench.experiment import Experiment, load_experiment

ROOT = Path(__file__).resolve().parents[2]

EVERYTHING = """\
rigbench: 1
title: Everything
arm: {root}/robots_demo/tray6/arm.yaml
model: {root}/robots_demo/tray6/arm.yaml
seed: 17
rates: {{control_hz: 500, physics_hz: 1000}}
gravity_m_s2: [0, 0.5, -9.8]
gain_pose_deg: [0, -50, 80, 0, 60, 0]
start_offset_deg: [0.1, 0, 0, 0, 0, -0.1]
drives:
  all: {{motor_viscous: 1.2e-5}}
  j1: {{gear_ratio: 90, viscous: 5.5}}
motions:
  load tray:
    via_deg: [[0, -60, 90, 0, 60, 0], [20, -50, 80, 0, 50, 0], [0, -60, 90, 0, 60, 0]]
    leg_s: 0.5
    rest_s: 0.2
    pace_percent: 80
    tolerance: {{settle_ms: 200, settle_band_mm: 0.8}}
  rim: {{circle: {{centre_m: [0.45, 0, 0.4], radius_m: 0.05, normal: [0, 0, 1], turn_s: 1.5, start_deg: 10}}}}
  edge:
    line: {{from_m: [0.45, -0.05, 0.4], to_m: [0.45, 0.05, 0.4], orientation: held}}
    leg_s: 0.6
    repeat: 2
    join_s: 0.5
  round: {{chain: [load tray, rim], join_s: 0.8}}
laws:
  joint pd: {{law: independent-joint, natural_hz: 5, damping: 1.0}}
  explicit: {{law: gravity-compensated, kp: [900, 900, 500, 100, 100, 30], kd: [60, 60, 30, 6, 6, 2]}}
  feedforward: {{law: torque-feedforward, model_hz: 100, friction: viscous}}
mismatch:
  link_mass_percent: {{all: 5, wrist: 25, shared: true}}
  link_cog_mm: {{all: 3, gripper: 8}}
  payload: {{believed_kg: 1.5, least_kg: 0, most_kg: 3, cog_mm: 30}}
  coulomb_percent: {{all: 20, j2: 30}}
  viscous_percent: 25
conditions:
  each_alone: 1.0
  together: [0.5, 1]
  cases:
    full tray: {{payload_kg: 3, payload_cog_mm: [0, 0, 50]}}
    cold morning: {{viscous_percent: +60, coulomb_percent: {{all: +40, j1: 10}}, level: 1}}
    bent: {{link_cog_mm: {{wrist: [1, -2, 0]}}, link_inertia_percent: {{forearm: -10}}}}
draws: 3
vary:
  laws: {{feedforward: {{model_hz: [50, 250]}}, joint pd: {{natural_hz: [4, 5.5]}}}}
  rates: {{control_hz: [250, 500]}}
  drives: {{all: {{gear_ratio: [80, 100]}}}}
  mismatch: {{link_mass_percent: {{wrist: [10, 25]}}}}
tolerance: {{tool_peak_mm: 3.0, tool_angle_peak_deg: 0.5, joint_peak_deg: {{j1: 0.05}}}}
required_share: 0.9
"""


def valid_files() -> list[tuple[str, str]]:
    """Name and text: every experiment that comes with the package, with few draws, and one with every key."""
    found = [("everything", EVERYTHING.format(root=ROOT))]
    for path in sorted((ROOT / "experiments").glob("[!p]*.yaml")):  # those named practise- are no experiments
        text = path.read_text("utf-8").replace("../robots_demo", f"{ROOT}/robots_demo")
        found.append((path.stem, re.sub(r"(?m)^draws: \d+", "draws: 2", text)))
    return found


FILES = valid_files()

# What a file says, read plainly ------------------------------------------------------------------

WORDS = {
    **dict.fromkeys(("", "~", "null", "Null", "NULL")),
    **dict.fromkeys(("true", "True", "TRUE"), True),
    **dict.fromkeys(("false", "False", "FALSE"), False),
    **dict.fromkeys((".inf", "+.inf", ".Inf", "+.Inf", ".INF", "+.INF"), inf),
    **dict.fromkeys(("-.inf", "-.Inf", "-.INF"), -inf),
    **dict.fromkeys((".nan", ".NaN", ".NAN"), nan),
}


class Tree(yaml.SafeLoader):
    """Builds the tree; an anchor may be given again, as YAML 1.2 has it (6.9.2)."""

    def compose_node(self, parent: yaml.Node | None, index: Any) -> yaml.Node | None:
        if not self.check_event(yaml.AliasEvent):
            self.anchors.pop(self.peek_event().anchor, None)
        return super().compose_node(parent, index)


def scalar(text: str) -> Any:
    """A plain scalar in YAML 1.2's core schema."""
    if text in WORDS:
        return WORDS[text]
    if re.fullmatch(r"0o[0-7]+", text):
        return int(text[2:], 8)
    if re.fullmatch(r"0x[0-9a-fA-F]+", text):
        return int(text[2:], 16)
    if re.fullmatch(r"[-+]?[0-9]+", text):
        return int(text)
    if re.fullmatch(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?", text):
        return float(text)
    return text


def plain(node: yaml.Node) -> Any:
    """The tree of a YAML file; AssertionError where a mapping has a key twice, or one that is no text."""
    if isinstance(node, yaml.ScalarNode):
        quoted = node.style is not None or (node.tag or "").startswith("!")
        return node.value if quoted else scalar(node.value)
    if isinstance(node, yaml.SequenceNode):
        return [plain(item) for item in node.value]
    keys = [plain(key) for key, _ in node.value]
    assert all(isinstance(key, str) for key in keys)
    assert len(set(keys)) == len(keys)
    return {key: plain(value) for key, (_, value) in zip(keys, node.value, strict=True)}


def text_of(value: Any) -> str:
    """A swept number or word, as a name shows it; of a path that is too long the file's name."""
    if isinstance(value, str) and len(value) > 32:
        return value.rpartition("/")[2]
    return value if isinstance(value, str) else re.sub(r"\.0$", "", repr(value))


def leaves(tree: Any, path: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], list[Any]]]:
    """The lists of a sweep with their paths."""
    if isinstance(tree, list):
        yield path, tree
    else:
        for key, inside in tree.items():
            yield from leaves(inside, (*path, key))


def rows_of(data: dict[str, Any]) -> dict[str, dict[str, Any]]:
    """Every row with the options that are given for it."""
    rows = {}
    for name, options in data["laws"].items():
        swept = list(leaves(data.get("vary", {}).get("laws", {}).get(name, {})))
        for values in product(*(values for _, values in swept)):
            picked = {path[-1]: value for (path, _), value in zip(swept, values, strict=True)}
            said = ", ".join(f"{key} {text_of(value)}" for key, value in picked.items())
            rows[f"{name} ({said})" if picked else name] = options | picked
    return rows


def sheets_of(data: dict[str, Any]) -> list[dict[tuple[str, ...], Any]]:
    """Every combination of what makes sheets: values by path."""
    vary = {key: inside for key, inside in data.get("vary", {}).items() if key != "laws"}
    swept = list(leaves(vary))
    return [
        {path: value for (path, _), value in zip(swept, values, strict=True)}
        for values in product(*(values for _, values in swept))
    ]


def rates_of(data: dict[str, Any], sheet: dict[tuple[str, ...], Any]) -> tuple[float, float]:
    """control_hz and physics_hz."""
    rates = data.get("rates", {}) | {path[1]: value for path, value in sheet.items() if path[0] == "rates"}
    control = rates.get("control_hz", 1000)
    physics = rates.get("physics_hz")
    return control, 2 * control if physics is None else physics


def fits(large: float, small: float) -> bool:
    return round(large / small) >= 1 and abs(large / small - round(large / small)) < 1e-6


def columns_of(data: dict[str, Any]) -> list[bool]:
    """For each column whether it is random; a sweep may declare a source that the file leaves out."""
    mismatch, conditions = data.get("mismatch", {}), data.get("conditions", {})
    declared = mismatch | data.get("vary", {}).get("mismatch", {})
    sources = [name for name, value in declared.items() if value is not None]
    payload = mismatch.get("payload")
    if payload and payload["least_kg"] == payload["most_kg"] and not payload.get("cog_mm"):
        sources.remove("payload")
    sensing, timing = data.get("sensing", {}), data.get("timing", {})
    noise = [sensing.get("noise_deg"), timing.get("jitter_percent"), timing.get("dropped_percent")]
    noisy = any(noise)
    found = [noisy]
    found += [True] * (len(sources) if conditions.get("each_alone") is not None else 0)
    found += [True] * len(conditions.get("together") or [])
    return found + [noisy or case.get("level", 0) > 0 for case in (conditions.get("cases") or {}).values()]


def limits_of(declared: dict[str, Any] | None) -> dict[str, float]:
    """Limits by score, those of joints by score.joint."""
    found = {}
    for name, value in (declared or {}).items():
        if isinstance(value, dict):
            found |= {f"{name}.{joint}": limit for joint, limit in value.items()}
        elif name != "settle_band_mm":
            found[name] = value
    return found


def same(given: Any, resolved: Any) -> bool:
    """Whether an option came through: lists as tuples, whole numbers as numbers, nothing else changed."""
    if isinstance(given, list):
        return len(given) == len(resolved) and all(map(same, given, resolved))
    return type(given) in (int, float, type(resolved)) and given == resolved


def check_meaning(text: str, experiment: Experiment) -> None:
    """The plan is what the plain reading of the text makes it."""
    data = plain(yaml.compose(text, Loader=Tree))
    data = {key: value for key, value in data.items() if value is not None}
    plan = experiment.plan()
    rows, sheets, columns = rows_of(data), sheets_of(data), columns_of(data)
    draws = data.get("draws", 128)
    assert experiment.draws == draws
    assert list(plan.motions) == list(data["motions"])
    assert [column.random for column in plan.columns] == columns
    each = len(data["motions"]) * sum(draws if random else 1 for random in columns)
    runs = 0
    possible: dict[str, int] = dict.fromkeys(rows, 0)
    found = list(plan.sheets)
    for sheet in sheets:
        control, physics = rates_of(data, sheet)
        fitting = [
            name
            for name, options in rows.items()
            if fits(physics, control)
            and (options.get("model_hz") is None or fits(control, options["model_hz"]))
        ]
        if not fitting:
            continue
        for path, value in sheet.items():
            assert path[-1] in found[0]
            assert text_of(value) in found[0]
        found.pop(0)
        runs += each * len(fitting)
        for name in fitting:
            possible[name] += 1
    assert found == []
    assert list(plan.laws) == [name for name, count in possible.items() if count]
    assert len(plan.entries) == experiment.runs == runs
    for entry in plan.entries[:: max(1, len(plan.entries) // 200)]:
        options = dict(entry.run.law.options)
        for key, value in rows[entry.law].items():
            resolved = entry.run.law.plugin if key == "law" else options[key]
            assert same(value, resolved), (entry.law, key, value)
        assert entry.run.seed == data.get("seed", 0)
        assert list(entry.run.gravity) == data.get("gravity_m_s2", [0, 0, -9.81])
    swept = [sheet for sheet in sheets if fits(*reversed(rates_of(data, sheet)))]
    rates = {rates_of(data, sheet) for sheet in swept}
    assert {(e.run.rates.control_hz, e.run.rates.physics_hz) for e in plan.entries} <= rates
    of_motions = {name: limits_of(keys.get("tolerance")) for name, keys in data["motions"].items()}
    of_motions = {name: limits for name, limits in of_motions.items() if limits}
    limits = limits_of(data.get("tolerance"))
    if limits or of_motions:
        assert plan.tolerance is not None
        assert dict(plan.tolerance.limits) == limits
        assert {name: dict(own) for name, own in plan.tolerance.motions.items()} == of_motions
        assert plan.tolerance.required_share == data.get("required_share", 0.95)
    else:
        assert plan.tolerance is None
    for name, keys in data["motions"].items():
        if "via_deg" in keys and not any(path[:2] == ("motions", name) for path in sheets[0]):
            leg = keys.get("leg_s", 1) * 100 / keys.get("pace_percent", 100) + keys.get("rest_s", 0.3)
            if keys.get("repeat", 1) == 1:
                expected = (len(keys["via_deg"]) - 1) * leg
                assert experiment.sheets[0].motions[name].duration_s == pytest.approx(expected, rel=1e-9)


# Damage ------------------------------------------------------------------------------------------

NUMBER = re.compile(r"(?<![\w.])[-+]?\d+(\.\d+)?(e[-+]?\d+)?(?![\w.])")
WORD = re.compile(r"[A-Za-z_][\w-]*")
ODD = "\t\x07:{}[]é'\"#&*!%|>-,?@`\u2028 0aZ\n\ufeff"
OTHERS = (
    "1e-5", "on", "010", "'5'", "fast", "true", "null", "[1]", "{}", "-1", ".inf", ".nan", "0", "1e999", "1_000",
    "0x10", "0o17", "2026-01-01", "1:30", "~", "yes", "9" * 50, "1e3", "+2", "5.", "&a 1", "*a", "!!str 5",
)  # fmt: skip


@st.composite
def damaged(draw: st.DrawFn) -> str:
    """The text of a valid file after one or two mishaps."""
    _, text = draw(st.sampled_from(FILES))
    for _ in range(draw(st.integers(1, 2))):
        text = draw(st.sampled_from(MISHAPS))(draw, text)
    return text


def _line(draw: st.DrawFn, text: str) -> tuple[list[str], int]:
    lines = text.splitlines(keepends=True) or ["\n"]
    return lines, draw(st.integers(0, len(lines) - 1))


def line_deleted(draw: st.DrawFn, text: str) -> str:
    lines, at = _line(draw, text)
    return "".join(lines[:at] + lines[at + 1 :])


def line_doubled(draw: st.DrawFn, text: str) -> str:
    lines, at = _line(draw, text)
    return "".join([*lines[: at + 1], *lines[at:]])


def lines_swapped(draw: st.DrawFn, text: str) -> str:
    lines, at = _line(draw, text)
    other = draw(st.integers(0, len(lines) - 1))
    lines[at], lines[other] = lines[other], lines[at]
    return "".join(lines)


def number_swapped(draw: st.DrawFn, text: str) -> str:
    found = list(NUMBER.finditer(text))
    if not found:
        return text
    match = draw(st.sampled_from(found))
    return text[: match.start()] + draw(st.sampled_from(OTHERS)) + text[match.end() :]


def word_swapped(draw: st.DrawFn, text: str) -> str:
    found = list(WORD.finditer(text))
    if not found:
        return text
    one, other = draw(st.sampled_from(found)), draw(st.sampled_from(found))
    put = draw(st.sampled_from((other.group(), "on", "5", one.group()[:-1], one.group() * 2)))
    return text[: one.start()] + put + text[one.end() :]


def character_put_in(draw: st.DrawFn, text: str) -> str:
    at = draw(st.integers(0, len(text)))
    return text[:at] + draw(st.sampled_from(ODD)) + text[at:]


def character_lost(draw: st.DrawFn, text: str) -> str:
    at = draw(st.integers(0, len(text)))
    return text[:at] + text[at + 1 :]


def truncated(draw: st.DrawFn, text: str) -> str:
    return text[: draw(st.integers(0, len(text)))]


def indented(draw: st.DrawFn, text: str) -> str:
    lines, at = _line(draw, text)
    lines[at] = draw(st.sampled_from(("  ", " ", ""))) + lines[at].removeprefix(" ")
    return "".join(lines)


MISHAPS = (
    line_deleted, line_doubled, lines_swapped, number_swapped, number_swapped, word_swapped, character_put_in,
    character_lost, truncated, indented,
)  # fmt: skip


def check_addresses(path: Path, text: str, faults: Sequence[Fault]) -> None:
    """Every fault says in which file; one of the file itself on which of its lines, unless a key is missing."""
    assert faults
    for fault in faults:
        assert fault.file
        assert fault.problem
        if fault.file == str(path):
            assert fault.line is None or 1 <= fault.line <= text.count("\n") + 2
            assert fault.line is not None or fault.problem == "missing" or not fault.key


def check_file(path: Path, text: str) -> None:
    """Load it: InputFaults with addresses, or a plan that means what the text says; nothing else is raised."""
    path.write_text(text, encoding="utf-8", newline="")
    try:
        experiment = load_experiment(path)
    except InputFaults as error:
        check_addresses(path, text, error.faults)
    else:
        check_meaning(text, experiment)


@pytest.mark.parametrize(("name", "text"), FILES, ids=[name for name, _ in FILES])
def test_undamaged_files_mean_what_they_say(tmp_path: Path, name: str, text: str) -> None:
    """The second reading agrees on every valid file, so it is worth something on the damaged ones."""
    path = tmp_path / f"{name}.yaml"
    path.write_text(text, encoding="utf-8")
    check_meaning(text, load_experiment(path))


QUIET = {
    "deadline": None, "derandomize": True, "database": None, "phases": (Phase.generate,),
    "suppress_health_check": [HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
}  # fmt: skip


@settings(max_examples=150, **QUIET)
@given(text=damaged())
def test_damaged_files(tmp_path: Path, text: str) -> None:
    """150 of them."""
    check_file(tmp_path / "damaged.yaml", text)


@pytest.mark.evidence
@settings(max_examples=2000, **QUIET)
@given(text=damaged())
def test_two_thousand_damaged_files(tmp_path: Path, text: str) -> None:
    """2,000 of them."""
    check_file(tmp_path / "damaged.yaml", text)
