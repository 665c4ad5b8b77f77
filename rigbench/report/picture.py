"""A figure as a file: PNG, SVG or PDF, the same bytes each time."""

from __future__ import annotations

import math
from collections.abc import Callable
from io import BytesIO
from pathlib import Path
from typing import Any

from matplotlib.figure import Figure

from rigbench.errors import InputFaults, StoreError
from rigbench.report.paper import steady_settings

__all__ = ["FORMATS", "save_picture"]

FORMATS = ("png", "svg", "pdf")
DPI = 180
MOST_PIXELS = 60e6  # what a viewer opens without pain
MOST_SIDE = 60_000  # the rasteriser takes less than 2^16


def save_picture(path: Path, title: str, make: Callable[[], Figure]) -> None:
    """Draw what ``make`` returns into a file whose suffix says the format: .png, .svg or .pdf.

    The same figure gives the same bytes. Missing folders are made. InputFaults for another suffix, before
    anything is drawn; StoreError if the file can't be written.
    """
    suffix = path.suffix.lower().removeprefix(".")
    if suffix not in FORMATS:
        raise InputFaults.one(path, "", f"'{path.suffix}' is no format of a picture", ".png, .svg or .pdf")
    metadata: dict[str, dict[str, Any]] = {
        "png": {"Software": "rigbench", "Title": title},
        "svg": {"Creator": "rigbench", "Title": title, "Date": None},
        "pdf": {"Creator": "rigbench", "Producer": None, "Title": title, "CreationDate": None},
    }
    drawn = BytesIO()
    with steady_settings():
        figure = make()
        figure.savefig(drawn, format=suffix, dpi=_resolution(figure), metadata=metadata[suffix])
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(drawn.getvalue())
    except OSError as error:
        raise StoreError(str(path), f"the picture can't be written: {error.strerror}") from error


def _resolution(figure: Figure) -> float:
    wide, high = figure.get_size_inches()
    return float(min(DPI, MOST_SIDE / max(wide, high), math.sqrt(MOST_PIXELS / (wide * high))))
