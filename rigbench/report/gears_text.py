"""What gear ratios do to an arm, as text."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rigbench.campaign.gears.result import Geared, Gears, JointGears
from rigbench.report.gears_words import (
    angle_of,
    floor_words,
    how_words,
    joint_words,
    percent,
    possible_words,
    reserve,
)
from rigbench.report.wrapping import wrap

__all__ = ["gears_text"]

NARROWEST = 80
INDENT = "  "
RATIO = 8

Column = tuple[str, str, list[str]]
"""Two lines of its head, and a cell for each ratio."""


def gears_text(gears: Gears, width: int = 100) -> str:
    """Return what every ratio does and costs, joint by joint, as lines of ``width`` columns (80 at least)."""
    width = max(width, NARROWEST)
    parts = [[f"Gear ratios of {gears.name} ({gears.path})", *wrap(how_words(gears), width, len)]]
    parts += [list(_joint(joint, width)) for joint in gears.joints]
    parts.append(list(_tool(gears, width)))
    return "\n\n".join("\n".join(part) for part in parts)


def _joint(joint: JointGears, width: int) -> Iterator[str]:
    unit, scale = angle_of(joint)
    yield from wrap(joint_words(joint), width, len)
    yield ""
    yield from _table(
        [
            (
                "inertia at the motor",
                "[kg m^2]",
                [_span(row.inertia_least, row.inertia_largest) for row in joint.ratios],
            ),
            ("ratio", "of the two", [f"{row.variation:.3g}" for row in joint.ratios]),
            ("damping", "ratio", [_span(row.damping_least, row.damping_largest) for row in joint.ratios]),
            ("disturbance", "[N m]", [f"{row.disturbance:.3g}" for row in joint.ratios]),
            ("of motor's", "limit", [percent(row.disturbance_share) for row in joint.ratios]),
            ("error", f"[{unit}]", [_scaled(row.error_peak, scale) for row in joint.ratios]),
        ],
        joint.ratios,
        width,
    )
    yield from (INDENT + line for line in wrap(floor_words(joint), width - len(INDENT), len))
    yield ""
    yield from _table(
        [
            (
                "rotor at the joint",
                "[kg]" if joint.prismatic else "[kg m^2]",
                [f"{row.reflected:.3g}" for row in joint.ratios],
            ),
            ("speed limit", f"[{unit}/s]", [_scaled(row.speed_limit, scale) for row in joint.ratios]),
            ("reserve", "of speed", [percent(reserve(row.speed_used)) for row in joint.ratios]),
            ("reserve", "of torque", [percent(reserve(row.torque_used)) for row in joint.ratios]),
        ],
        joint.ratios,
        width,
    )
    yield from (INDENT + line for line in wrap(possible_words(joint), width - len(INDENT), len))


def _tool(gears: Gears, width: int) -> Iterator[str]:
    yield "Tool, all joints listed at the same ratio, largest error"
    for run in gears.tracked:
        said = f"{run.tool_peak_mm:.3g} mm" if run.tool_peak_mm is not None else f"- ({run.reason})"
        first, *more = wrap(said, width - len(INDENT) - RATIO - 2, len)
        yield f"{INDENT}{run.ratio:>{RATIO}g}  {first}"
        yield from (" " * (len(INDENT) + RATIO + 2) + line for line in more)


def _table(columns: Sequence[Column], rows: Sequence[Geared], width: int) -> Iterator[str]:
    """Yield two lines of heads and a line for each ratio, flush right, in parts that fit the width."""
    part: list[Column] = []
    for column in columns:
        if part and sum(2 + _wide(one) for one in [*part, column]) > width - len(INDENT) - RATIO:
            yield from _part(part, rows)
            yield ""
            part = []
        part.append(column)
    yield from _part(part, rows)


def _part(columns: Sequence[Column], rows: Sequence[Geared]) -> Iterator[str]:
    lines = [["ratio", *(one for one, _, _ in columns)], ["", *(other for _, other, _ in columns)]]
    lines += [[f"{row.ratio:g}", *(cells[at] for _, _, cells in columns)] for at, row in enumerate(rows)]
    for first, *cells in lines:
        told = "".join(f"  {cell:>{_wide(column)}}" for cell, column in zip(cells, columns, strict=True))
        yield f"{INDENT}{first:>{RATIO}}{told}"


def _wide(column: Column) -> int:
    one, other, cells = column
    return max(map(len, (one, other, *cells)))


def _span(least: float, largest: float) -> str:
    one, other = f"{least:.3g}", f"{largest:.3g}"
    return one if one == other else f"{one} to {other}"


def _scaled(value: float | None, scale: float) -> str:
    return "-" if value is None else f"{scale * value:.3g}"
