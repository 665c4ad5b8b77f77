"""A load in words and numbers: what torques tell of it, what they don't, and the body that can exist."""

from __future__ import annotations

import textwrap
from typing import Any

from rigbench.identify.load import Load

__all__ = ["load_document", "load_text"]

NUMBER, WIDE = 11, 100

ABOUT = {"kg": "", "mm": ", from the tool point", "kg m^2": ", about the centre of gravity"}
"""What the terms in a unit are about."""


def load_text(load: Load) -> list[str]:
    """Return a line for mass, each coordinate of the centre of gravity and each entry of the inertia.

    Then, where something is not told, that, and a line for each base parameter of the load.
    """
    known = load.truth is not None
    words = ["estimate", "low", "high", "identified", *(["true"] if known else [])]
    lines = [
        "The load in the axes of the tool frame, with 95 % intervals; identified: of the body that can exist",
        "",
        "  " + "".join(f"{word:>{NUMBER}}" for word in words),
    ]
    for term in load.terms:
        numbers = [term.value, term.low, term.high, term.identified, *([term.truth] if known else [])]
        lines.append(f"  {_row(numbers)}  {term.name} [{term.unit}]{ABOUT[term.unit]}")
    return lines + _untold(load)


def load_document(load: Load) -> dict[str, Any]:
    """Return the same, JSON-able; what is not told is null."""
    low, high = load.found.interval()
    rows = zip(load.found.base.names, load.found.values, low, high, strict=True)
    return {
        "terms": [
            {
                "name": term.name,
                "unit": term.unit,
                "value": term.value,
                "low": term.low,
                "high": term.high,
                "identified": term.identified,
                "true": term.truth,
            }
            for term in load.terms
        ],
        "base": [
            {"name": name, "value": float(value), "low": float(least), "high": float(most)}
            for name, value, least, most in rows
        ],
    }


def _untold(load: Load) -> list[str]:
    """Say what torques don't tell, why, and which sums they do."""
    silent = [term.name for term in load.terms if not term.told]
    rough = [term.name for term in load.terms if term.told and term.value is None]
    mass, said = load.terms[0], []
    if mass.low is not None and mass.low <= 0:
        said.append("The mass can't be told from none.")
    if rough:
        said.append(f"The mass is known too roughly to tell {', '.join(rough)}.")
    if silent:
        said.append(f"Torques of this arm don't tell {', '.join(silent)}, whatever the motion.")
    lines = ["", *textwrap.wrap(" ".join(said), WIDE)] if said else []
    if silent or rough:
        lines += [
            "",
            "What they tell of the load, in the frame of the last link [SI units], with 95 % intervals",
        ]
        lines += ["", "  " + "".join(f"{word:>{NUMBER}}" for word in ("estimate", "low", "high"))]
        for row in load_document(load)["base"]:
            lines.append(f"  {_row([row['value'], row['low'], row['high']])}  {row['name']}")
    return lines


def _row(numbers: list[float | None]) -> str:
    return "".join(f"{'-' if number is None else f'{number:.4g}':>{NUMBER}}" for number in numbers)
