"""Breaking text into lines, whatever measures their width: a terminal's columns or a renderer's points."""

from __future__ import annotations

import re
from collections.abc import Callable

__all__ = ["clean", "settings", "wrap", "wrap_list", "wrap_name"]

Measure = Callable[[str], float]


def clean(text: str) -> str:
    """Return the text as one line: runs of blanks and of what can't be printed become one blank."""
    return " ".join("".join(sign if sign.isprintable() else " " for sign in text).split())


def wrap(text: str, width: float, measure: Measure) -> list[str]:
    """Break the text into lines no wider than ``width``: at blanks, else after a sign, else anywhere.

    At least one line, and at least one character a line, however narrow.
    """
    lines = [""]
    for word in clean(text).split(" "):
        joined = f"{lines[-1]} {word}" if lines[-1] else word
        if measure(joined) <= width:
            lines[-1] = joined
        else:
            lines[len(lines) if lines[-1] else -1 :] = _pieces(word, width, measure)
    return lines


def wrap_name(name: str, width: float, measure: Measure) -> list[str]:
    """Break a law's name; a variant's bracket, 'law (model_hz 50)', starts a line where it must break."""
    if measure(clean(name)) <= width or " (" not in name:
        return wrap(name, width, measure)
    law, bracket, rest = name.partition(" (")
    return [*wrap(law, width, measure), *wrap(bracket + rest, width, measure)]


def settings(name: str) -> list[str]:
    """Return the settings in a sheet's name: 'control_hz 500, gear_ratio 50' has two, '[0, 1]' is one."""
    parts, depth = [""], 0
    for part in clean(name).split(", "):
        parts[-1] = f"{parts[-1]}, {part}" if depth else part
        depth = max(
            depth + sum(part.count(sign) for sign in "([{") - sum(part.count(sign) for sign in ")]}"), 0
        )
        if not depth:
            parts.append("")
    return parts[:-1] if not depth else parts


def wrap_list(name: str, width: float, measure: Measure) -> list[str]:
    """Break a sheet's name behind its settings where that does."""
    lines = [""]
    parts = settings(name)
    for part in [*(f"{part}," for part in parts[:-1]), parts[-1]]:
        joined = f"{lines[-1]} {part}" if lines[-1] else part
        if measure(joined) <= width:
            lines[-1] = joined
        else:
            lines[len(lines) if lines[-1] else -1 :] = wrap(part, width, measure)
    return lines


def _pieces(word: str, width: float, measure: Measure) -> list[str]:
    pieces = [""]
    for part in re.findall(r"[^-_/.,:;]*[-_/.,:;]+|[^-_/.,:;]+", word):
        if measure(pieces[-1] + part) <= width:
            pieces[-1] += part
            continue
        if pieces[-1]:
            pieces.append("")
        for sign in part:
            if pieces[-1] and measure(pieces[-1] + sign) > width:
                pieces.append("")
            pieces[-1] += sign
    return pieces
