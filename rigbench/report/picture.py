"""A figure as a file: PNG, SVG or PDF, the same bytes each time."""

from __future__ import annotations

import math
from collections.abc import Callable
from io import BytesIO
from pathlib import Path
from typing import Any

from matplotlib.figure import Figure

from rigbench.errors import InputFaults
from rigbench.report.output_file import write_whole
from rigbench.report.paper import steady_settings

__all__ = ["FORMATS", "check_format", "save_picture"]

FORMATS = ("png", "svg", "pdf")
DPI = 180
MOST_PIXELS = 60e6  # what a viewer opens without pain
MOST_SIDE = 60_000  # the rasteriser takes less than 2^16


def check_format(path: Path) -> None:
    """Raise InputFaults unless the file's suffix says a format that can be drawn."""
    if path.suffix.lower().removeprefix(".") not in FORMATS:
        raise InputFaults.one(path, "-o", f"'{path.suffix}' is no format of a picture", ".png, .svg or .pdf")


def save_picture(path: Path, title: str, make: Callable[[], Figure]) -> None:
    """Draw what ``make`` returns into a file whose suffix says the format: .png, .svg or .pdf.

    The same figure gives the same bytes, whole or not at all. Missing folders are made. InputFaults for
    another suffix, before anything is drawn; StoreError if the file can't be written.
    """
    check_format(path)
    suffix = path.suffix.lower().removeprefix(".")
    metadata: dict[str, dict[str, Any]] = {
        "png": {"Software": "rigbench", "Title": title},
        "svg": {"Creator": "rigbench", "Title": title, "Date": None},
        "pdf": {"Creator": "rigbench", "Producer": None, "Title": title, "CreationDate": None},
    }
    drawn = BytesIO()
    with steady_settings():
        figure = make()
        figure.savefig(drawn, format=suffix, dpi=_resolution(figure), metadata=metadata[suffix])
    write_whole(path, lambda stream: stream.write(drawn.getvalue()))


def _resolution(figure: Figure) -> float:
    wide, high = figure.get_size_inches()
    return float(min(DPI, MOST_SIDE / max(wide, high), math.sqrt(MOST_PIXELS / (wide * high))))
